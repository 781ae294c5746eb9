/*
 * Slots and claims from JSON objects, and from JSON text line by line. Only one line is parsed at a time, so that a
 * campaign of tens of thousands of claims needs little memory beyond the input itself.
 */
#include "server/audit/input.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

static enum qb_status need_text(const json_t *doc, const char *key, const char *what, size_t max, char **out,
                                struct qb_error *e)
{
	const char *s = NULL;
	const enum qb_status st = json_str(doc, key, what, &s, e);
	if (st != QB_OK)
		return st;
	if (!text_is_line(s, max))
		return qb_fail(e, QB_FORMAT, what, NULL, "%s must be one line of 1 to %zu bytes", key, max);
	*out = qb_strdup(s);
	return QB_OK;
}

static int column_for(struct audit_input *in, const char *name)
{
	const int have = audit_column(in, name);
	if (have >= 0 || in->n_columns == AUDIT_MAX_COLUMNS || !text_is_line(name, 64))
		return have;
	in->columns[in->n_columns] = qb_strdup(name);
	return (int)in->n_columns++;
}

/* ---- slots ---- */

static enum qb_status read_state(const json_t *doc, const char *what, struct audit_slot *slot, struct qb_error *e)
{
	const char *state = NULL, *drawn = NULL;
	enum qb_status st = json_str(doc, "state", what, &state, e);
	if (st == QB_OK)
		st = json_str(doc, "assignment", what, &drawn, e);
	if (st != QB_OK)
		return st;
	unsigned i = 0;
	while (i < AUDIT_STATE_COUNT && strcmp(state, audit_state_word((enum audit_state)i)) != 0)
		i++;
	if (i == AUDIT_STATE_COUNT)
		return qb_fail(e, QB_FORMAT, what, NULL, "unknown slot state %.40s", state);
	slot->state = (enum audit_state)i;
	slot->drawn_live = strcmp(drawn, "live") == 0;
	if (!slot->drawn_live && strcmp(drawn, "null") != 0)
		return qb_fail(e, QB_FORMAT, what, NULL, "assignment must be live or null, not %.40s", drawn);
	if (slot->drawn_live ? slot->state == AUDIT_NULL : audit_state_actuated(slot->state))
		return qb_fail(e, QB_FORMAT, what, NULL, "state %s contradicts assignment %s", state, drawn);
	return QB_OK;
}

static bool is_slot_key(const char *key)
{
	static const char *const fixed[] = {"slot_id", "planned_gps", "arrival_gps", "state", "assignment"};
	for (size_t i = 0; i < sizeof fixed / sizeof fixed[0]; i++)
		if (strcmp(fixed[i], key) == 0)
			return true;
	return false;
}

static void read_values(struct audit_input *in, const json_t *doc, struct audit_slot *slot)
{
	const char *key;
	json_t *v;
	slot->values = QB_NEW_ARRAY(struct audit_value, json_object_size(doc));
	json_object_foreach((json_t *)doc, key, v)
	{
		if (is_slot_key(key) || !json_is_number(v) || !isfinite(json_number_value(v)))
			continue;
		const int column = column_for(in, key);
		if (column >= 0)
			slot->values[slot->n_values++] = (struct audit_value){(unsigned)column, json_number_value(v)};
	}
}

enum qb_status audit_input_slot(struct audit_input *in, const json_t *doc, const char *what, struct qb_error *e)
{
	if (in->n_slots == AUDIT_MAX_SLOTS)
		return qb_fail(e, QB_RANGE, what, NULL, "more than %zu slots", AUDIT_MAX_SLOTS);
	struct audit_slot slot = {0};
	enum qb_status st = need_text(doc, "slot_id", what, 128, &slot.slot_id, e);
	if (st == QB_OK)
		st = read_state(doc, what, &slot, e);
	if (st != QB_OK)
		goto out;
	slot.planned_gps = audit_number(json_object_get(doc, "planned_gps"));
	slot.arrival_gps = audit_number(json_object_get(doc, "arrival_gps"));
	if (!isfinite(slot.arrival_gps)) {
		st = qb_fail(e, QB_FORMAT, what, NULL, "arrival_gps is missing or not a finite number");
		goto out;
	}
	read_values(in, doc, &slot);
	if (in->n_slots == in->cap_slots) {
		in->cap_slots = in->cap_slots == 0 ? 64 : in->cap_slots * 2;
		in->slots = qb_realloc(in->slots, in->cap_slots, sizeof *in->slots);
	}
	in->slots[in->n_slots++] = slot;
	return QB_OK;
out:
	qb_free(slot.slot_id);
	return st;
}

/* ---- claims ---- */

static void read_quantiles(struct audit_input *in, const json_t *all, struct audit_claim *claim)
{
	const char *key;
	json_t *v;
	if (json_object_size(all) == 0 || json_object_size(all) > AUDIT_MAX_COLUMNS)
		return;
	claim->quantiles = QB_NEW_ARRAY(struct audit_quantiles, json_object_size(all));
	json_object_foreach((json_t *)all, key, v)
	{
		const int column = json_array_size(v) == 5 ? column_for(in, key) : -1;
		if (column < 0)
			continue;
		struct audit_quantiles *q = &claim->quantiles[claim->n_quantiles++];
		q->column = (unsigned)column;
		q->increasing = true;
		for (size_t i = 0; i < 5; i++) {
			q->q[i] = audit_number(json_array_get(v, i));
			if (!isfinite(q->q[i]) || (i > 0 && q->q[i] < q->q[i - 1]))
				q->increasing = false;
		}
	}
}

static enum qb_status read_pipeline(const struct audit_input *in, const json_t *doc, const char *what, unsigned *out,
                                    struct qb_error *e)
{
	const char *name = NULL;
	const enum qb_status st = json_str(doc, "pipeline", what, &name, e);
	if (st != QB_OK)
		return st;
	for (size_t i = 0; i < in->settings.n_pipelines; i++) {
		if (strcmp(in->settings.pipelines[i], name) == 0) {
			*out = (unsigned)i;
			return QB_OK;
		}
	}
	return qb_fail(e, QB_FORMAT, what, "name a pipeline of the plan", "unknown pipeline %.64s", name);
}

static void read_claim_numbers(const json_t *doc, struct audit_claim *claim)
{
	claim->arrival_gps = audit_number(json_object_get(doc, "arrival_gps"));
	claim->submitted_gps = audit_number(json_object_get(doc, "submitted_gps"));
	claim->network_snr = audit_number(json_object_get(doc, "network_snr"));
	const double sigma = audit_number(json_object_get(doc, "arrival_gps_sigma_s"));
	claim->sigma_s = isfinite(sigma) && sigma > 0 ? sigma : 0;
	const json_t *far = json_object_get(doc, "false_alarm_rate_per_year");
	claim->far_per_year = audit_number(far);
	if (far != NULL && !json_is_null(far) && !(isfinite(claim->far_per_year) && claim->far_per_year >= 0))
		claim->far_malformed = true;
}

enum qb_status audit_input_claim(struct audit_input *in, const json_t *doc, const char *what, struct qb_error *e)
{
	if (in->n_claims == AUDIT_MAX_CLAIMS)
		return qb_fail(e, QB_RANGE, what, NULL, "more than %zu claims", AUDIT_MAX_CLAIMS);
	struct audit_claim claim = {0};
	enum qb_status st = need_text(doc, "claim_id", what, 128, &claim.claim_id, e);
	if (st == QB_OK)
		st = read_pipeline(in, doc, what, &claim.pipeline, e);
	const json_t *parent = json_object_get(doc, "revision_of");
	if (st == QB_OK && parent != NULL && !json_is_null(parent))
		st = need_text(doc, "revision_of", what, 128, &claim.revision_of, e);
	if (st != QB_OK) {
		qb_free(claim.claim_id);
		return st;
	}
	read_claim_numbers(doc, &claim);
	read_quantiles(in, json_object_get(doc, "quantiles_05_25_50_75_95"), &claim);
	if (in->n_claims == in->cap_claims) {
		in->cap_claims = in->cap_claims == 0 ? 64 : in->cap_claims * 2;
		in->claims = qb_realloc(in->claims, in->cap_claims, sizeof *in->claims);
	}
	in->claims[in->n_claims++] = claim;
	return QB_OK;
}

/* ---- text ---- */

typedef enum qb_status line_taker(struct audit_input *, const json_t *, const char *what, struct qb_error *);

static bool is_blank(const char *p, size_t n)
{
	for (size_t i = 0; i < n; i++)
		if (p[i] != ' ' && p[i] != '\t' && p[i] != '\r')
			return false;
	return true;
}

static enum qb_status take_lines(struct audit_input *in, const char *text, size_t n, const char *what, line_taker *take,
                                 struct qb_error *e)
{
	size_t line = 0;
	for (size_t at = 0; at < n;) {
		const char *end = memchr(text + at, '\n', n - at);
		const size_t len = end != NULL ? (size_t)(end - (text + at)) : n - at;
		char where[200];
		(void)snprintf(where, sizeof where, "%s:%zu", what, ++line);
		if (!is_blank(text + at, len)) {
			json_t *doc = NULL;
			enum qb_status st = json_read(text + at, len, where, &doc, e);
			if (st == QB_OK)
				st = take(in, doc, where, e);
			json_decref(doc);
			if (st != QB_OK)
				return st;
		}
		at += len + 1;
	}
	return QB_OK;
}

enum qb_status audit_input_slots_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                      struct qb_error *e)
{
	return take_lines(in, text, n, what, audit_input_slot, e);
}

enum qb_status audit_input_claims_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                       struct qb_error *e)
{
	return take_lines(in, text, n, what, audit_input_claim, e);
}

enum qb_status audit_input_course(struct audit_input *in, const json_t *doc, const char *what, struct qb_error *e)
{
	if (!json_is_object(doc) || in->course != NULL)
		return qb_fail(e, QB_FORMAT, what, NULL, "is not one object");
	in->course = json_deep_copy(doc);
	return QB_OK;
}

enum qb_status audit_input_course_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                       struct qb_error *e)
{
	json_t *doc = NULL;
	enum qb_status st = json_read(text, n, what, &doc, e);
	if (st == QB_OK)
		st = audit_input_course(in, doc, what, e);
	json_decref(doc);
	return st;
}
