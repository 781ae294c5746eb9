/* From the reduced claims to one status each: the order of the rules of clause A5 is the order of the code. */
#include "server/audit/match.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "server/audit/chain.h"
#include "server/base/alloc.h"
#include "server/base/check.h"

static const char *const status_words[AUDIT_STATUS_COUNT] = {
    [AUDIT_FOUND] = "found",
    [AUDIT_MATCHED_EXCLUDED] = "matched_excluded",
    [AUDIT_DUPLICATE] = "duplicate",
    [AUDIT_OUTSIDE_OBSERVING] = "outside_observing",
    [AUDIT_IN_VETOED_TIME] = "in_vetoed_time",
    [AUDIT_UNEXPLAINED] = "unexplained",
    [AUDIT_SUPERSEDED] = "superseded",
    [AUDIT_LATE] = "late",
    [AUDIT_MALFORMED] = "malformed",
};

const char *audit_status_word(enum audit_status s)
{
	CHECK((unsigned)s < AUDIT_STATUS_COUNT);
	return status_words[s];
}

/* Slots of one kind, sorted by arrival. */
struct times {
	double *gps;
	size_t n;
};

static int by_value(const void *a, const void *b)
{
	const double x = *(const double *)a, y = *(const double *)b;
	return (x > y) - (x < y);
}

static bool any_within(const struct times *t, double gps, double window_s)
{
	size_t lo = 0, hi = t->n;
	while (lo < hi) {
		const size_t mid = lo + (hi - lo) / 2;
		if (t->gps[mid] < gps)
			lo = mid + 1;
		else
			hi = mid;
	}
	return (lo < t->n && fabs(t->gps[lo] - gps) <= window_s) || (lo > 0 && fabs(t->gps[lo - 1] - gps) <= window_s);
}

struct targets {
	struct times actuated, null;
	struct assign_drill *drills;
	size_t *slot_of, n; /* drills[i] is slot slot_of[i] */
};

static struct targets targets_of(const struct audit_input *in)
{
	struct targets t = {0};
	t.actuated.gps = QB_NEW_ARRAY(double, in->n_slots);
	t.null.gps = QB_NEW_ARRAY(double, in->n_slots);
	t.drills = QB_NEW_ARRAY(struct assign_drill, in->n_slots);
	t.slot_of = QB_NEW_ARRAY(size_t, in->n_slots);
	for (size_t i = 0; i < in->n_slots; i++) {
		const struct audit_slot *s = &in->slots[i];
		if (s->state == AUDIT_NULL)
			t.null.gps[t.null.n++] = s->arrival_gps;
		if (!audit_state_actuated(s->state))
			continue;
		t.drills[t.n].arrival_gps = s->arrival_gps;
		t.slot_of[t.n++] = i;
		t.actuated.gps[t.actuated.n++] = s->arrival_gps;
	}
	qsort(t.actuated.gps, t.actuated.n, sizeof *t.actuated.gps, by_value);
	qsort(t.null.gps, t.null.n, sizeof *t.null.gps, by_value);
	return t;
}

static void targets_free(struct targets *t)
{
	qb_free(t->actuated.gps);
	qb_free(t->null.gps);
	qb_free(t->drills);
	qb_free(t->slot_of);
}

static void classify(const struct audit_input *in, const struct targets *t, const struct audit_claim *c,
                     struct audit_fate *fate)
{
	if (fate->slot >= 0)
		fate->status = in->slots[fate->slot].state == AUDIT_LIVE ? AUDIT_FOUND : AUDIT_MATCHED_EXCLUDED;
	else if (any_within(&t->actuated, c->arrival_gps, fate->window_s))
		fate->status = AUDIT_DUPLICATE;
	else if (!segments_hold(&in->settings.observing, c->arrival_gps))
		fate->status = AUDIT_OUTSIDE_OBSERVING;
	else if (segments_hold(&in->settings.vetoes, c->arrival_gps))
		fate->status = AUDIT_IN_VETOED_TIME;
	else
		fate->near_null_slot = any_within(&t->null, c->arrival_gps, fate->window_s);
}

static enum qb_status match_pipeline(const struct audit_input *in, const struct targets *t, size_t pipeline,
                                     const size_t *mine, size_t n, struct audit_match *m, struct qb_error *e)
{
	const struct audit_settings *s = &in->settings;
	struct assign_claim *kept = QB_NEW_ARRAY(struct assign_claim, n);
	size_t *claim_of = QB_NEW_ARRAY(size_t, n), n_kept = 0;
	enum qb_status st = audit_reduce_claims(in, mine, n, m->fates, e);
	for (size_t i = 0; st == QB_OK && i < n; i++) {
		const struct audit_claim *c = &in->claims[mine[i]];
		struct audit_fate *fate = &m->fates[mine[i]];
		if (fate->status != AUDIT_UNEXPLAINED)
			continue;
		fate->window_s = assign_window_s(s->match_base_s, s->match_sigma_factor, s->match_max_s, c->sigma_s);
		m->largest_window_s = fmax(m->largest_window_s, fate->window_s);
		kept[n_kept] = (struct assign_claim){c->claim_id, c->arrival_gps, fate->window_s, c->far_per_year,
		                                     fate->first_submitted_gps};
		claim_of[n_kept++] = mine[i];
	}
	struct assign_result *r = &m->per_pipeline[pipeline];
	if (st == QB_OK)
		st = assign_claims(kept, n_kept, t->drills, t->n, s->match_max_s, r, e);
	for (size_t i = 0; st == QB_OK && i < n_kept; i++) {
		struct audit_fate *fate = &m->fates[claim_of[i]];
		if (r->drill_of[i] >= 0) {
			fate->slot = (ptrdiff_t)t->slot_of[r->drill_of[i]];
			m->claim_of[pipeline * in->n_slots + (size_t)fate->slot] = (ptrdiff_t)claim_of[i];
		}
		classify(in, t, &in->claims[claim_of[i]], fate);
	}
	qb_free(r->drill_of);
	r->drill_of = NULL;
	qb_free(kept);
	qb_free(claim_of);
	return st;
}

static int by_text(const void *a, const void *b)
{
	return strcmp(*(const char *const *)a, *(const char *const *)b);
}

static enum qb_status slots_differ(const struct audit_input *in, struct qb_error *e)
{
	const char **ids = QB_NEW_ARRAY(const char *, in->n_slots);
	enum qb_status st = QB_OK;
	for (size_t i = 0; i < in->n_slots; i++)
		ids[i] = in->slots[i].slot_id;
	qsort(ids, in->n_slots, sizeof *ids, by_text);
	for (size_t i = 0; st == QB_OK && i + 1 < in->n_slots; i++)
		if (strcmp(ids[i], ids[i + 1]) == 0)
			st = qb_fail(e, QB_FORMAT, "slots", NULL, "slot %s is there twice", ids[i]);
	qb_free(ids);
	return st;
}

static void count(const struct audit_input *in, struct audit_match *m)
{
	for (size_t i = 0; i < in->n_claims; i++) {
		const unsigned p = in->claims[i].pipeline;
		m->claims_in_file[p]++;
		m->status_counts[p][m->fates[i].status]++;
		m->near_null[p] += m->fates[i].near_null_slot;
	}
	if (!(m->largest_window_s > 0))
		m->largest_window_s = in->settings.match_base_s;
}

enum qb_status audit_match(const struct audit_input *in, struct audit_match *m, struct qb_error *e)
{
	*m = (struct audit_match){.n_slots = in->n_slots, .n_pipelines = in->settings.n_pipelines};
	enum qb_status st = slots_differ(in, e);
	if (st != QB_OK)
		return st;
	m->fates = QB_NEW_ARRAY(struct audit_fate, in->n_claims);
	m->claim_of = QB_NEW_ARRAY(ptrdiff_t, in->n_slots * m->n_pipelines);
	for (size_t i = 0; i < in->n_slots * m->n_pipelines; i++)
		m->claim_of[i] = -1;
	for (size_t i = 0; i < in->n_claims; i++)
		m->fates[i].slot = -1;
	struct targets t = targets_of(in);
	size_t *mine = QB_NEW_ARRAY(size_t, in->n_claims);
	for (size_t p = 0; st == QB_OK && p < m->n_pipelines; p++) {
		size_t n = 0;
		for (size_t i = 0; i < in->n_claims; i++)
			if (in->claims[i].pipeline == p)
				mine[n++] = i;
		st = match_pipeline(in, &t, p, mine, n, m, e);
	}
	qb_free(mine);
	targets_free(&t);
	if (st == QB_OK)
		count(in, m);
	else
		audit_match_free(m);
	return st;
}

void audit_match_free(struct audit_match *m)
{
	qb_free(m->fates);
	qb_free(m->claim_of);
	for (size_t p = 0; p < AUDIT_MAX_PIPELINES; p++)
		assign_result_free(&m->per_pipeline[p]);
	*m = (struct audit_match){0};
}

ptrdiff_t audit_found_by(const struct audit_match *m, const struct audit_input *in, size_t pipeline, size_t slot)
{
	return in->slots[slot].state == AUDIT_LIVE ? m->claim_of[pipeline * m->n_slots + slot] : -1;
}
