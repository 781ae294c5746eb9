/* Revision chains by identifier: sorted look-up, roots with memory, then the last revision in time of each chain. */
#include "server/audit/chain.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"

#define UNKNOWN (-2) /* the root was not looked for yet */
#define ON_PATH (-3)
#define BROKEN  (-4) /* unknown parent or a cycle */

struct work {
	const struct audit_claim *claims;
	const size_t *sorted; /* indices of this pipeline's claims by claim_id */
	size_t n;
	ptrdiff_t *root; /* per place in sorted: place of the root, or a mark */
};

static int by_id(const void *a, const void *b, void *ctx)
{
	const struct audit_claim *claims = ctx;
	return strcmp(claims[*(const size_t *)a].claim_id, claims[*(const size_t *)b].claim_id);
}

static ptrdiff_t place_of(const struct work *w, const char *id)
{
	size_t lo = 0, hi = w->n;
	while (lo < hi) {
		const size_t mid = lo + (hi - lo) / 2;
		const int order = strcmp(w->claims[w->sorted[mid]].claim_id, id);
		if (order == 0)
			return (ptrdiff_t)mid;
		if (order < 0)
			lo = mid + 1;
		else
			hi = mid;
	}
	return -1;
}

static ptrdiff_t parent_of(const struct work *w, ptrdiff_t place)
{
	return place_of(w, w->claims[w->sorted[place]].revision_of);
}

/* Follows revision_of from one claim and gives the same answer to all on the path. */
static void find_root(struct work *w, ptrdiff_t from)
{
	ptrdiff_t at = from, answer;
	while (at >= 0 && w->root[at] == UNKNOWN && w->claims[w->sorted[at]].revision_of != NULL) {
		w->root[at] = ON_PATH;
		at = parent_of(w, at);
	}
	if (at < 0 || w->root[at] == ON_PATH)
		answer = BROKEN;
	else
		answer = w->root[at] == UNKNOWN ? at : w->root[at];
	if (at >= 0 && w->root[at] == UNKNOWN)
		w->root[at] = answer;
	for (at = from; at >= 0 && w->root[at] == ON_PATH; at = parent_of(w, at))
		w->root[at] = answer;
}

static bool well_formed(const struct audit_claim *c)
{
	return isfinite(c->arrival_gps) && isfinite(c->submitted_gps) && !c->far_malformed;
}

/* The later of two claims of a chain; equal times fall to the larger identifier. */
static bool supersedes(const struct audit_claim *a, const struct audit_claim *b)
{
	if (a->submitted_gps > b->submitted_gps || a->submitted_gps < b->submitted_gps)
		return a->submitted_gps > b->submitted_gps;
	return strcmp(a->claim_id, b->claim_id) > 0;
}

static void keep_last(const struct work *w, struct audit_fate *fates)
{
	ptrdiff_t *last = QB_NEW_ARRAY(ptrdiff_t, w->n);
	double *first_gps = QB_NEW_ARRAY(double, w->n);
	for (size_t i = 0; i < w->n; i++)
		last[i] = -1;
	for (size_t i = 0; i < w->n; i++) {
		const struct audit_claim *c = &w->claims[w->sorted[i]];
		if (fates[w->sorted[i]].status != AUDIT_UNEXPLAINED)
			continue;
		const ptrdiff_t root = w->root[i];
		if (last[root] < 0 || c->submitted_gps < first_gps[root])
			first_gps[root] = c->submitted_gps;
		if (last[root] < 0 || supersedes(c, &w->claims[w->sorted[last[root]]]))
			last[root] = (ptrdiff_t)i;
	}
	for (size_t i = 0; i < w->n; i++) {
		struct audit_fate *fate = &fates[w->sorted[i]];
		if (fate->status != AUDIT_UNEXPLAINED)
			continue;
		if (last[w->root[i]] == (ptrdiff_t)i)
			fate->first_submitted_gps = first_gps[w->root[i]];
		else
			fate->status = AUDIT_SUPERSEDED;
	}
	qb_free(last);
	qb_free(first_gps);
}

enum qb_status audit_reduce_claims(const struct audit_input *in, const size_t *mine, size_t n, struct audit_fate *fates,
                                   struct qb_error *e)
{
	size_t *sorted = qb_memdup(mine, n * sizeof *mine);
	struct work w = {.claims = in->claims, .sorted = sorted, .n = n, .root = QB_NEW_ARRAY(ptrdiff_t, n)};
	enum qb_status st = QB_OK;
	qsort_r(sorted, n, sizeof *sorted, by_id, in->claims);
	for (size_t i = 0; i + 1 < n; i++) {
		if (strcmp(in->claims[sorted[i]].claim_id, in->claims[sorted[i + 1]].claim_id) == 0) {
			st = qb_fail(e, QB_FORMAT, in->settings.pipelines[in->claims[sorted[i]].pipeline],
			             "give every claim its own identifier", "claim %s is there twice",
			             in->claims[sorted[i]].claim_id);
			goto out;
		}
	}
	for (size_t i = 0; i < n; i++)
		w.root[i] = UNKNOWN;
	for (size_t i = 0; i < n; i++) {
		const struct audit_claim *c = &in->claims[sorted[i]];
		struct audit_fate *fate = &fates[sorted[i]];
		find_root(&w, (ptrdiff_t)i);
		if (!well_formed(c))
			fate->status = AUDIT_MALFORMED;
		else if (c->submitted_gps > in->settings.closing_gps)
			fate->status = AUDIT_LATE;
		else
			fate->status = w.root[i] == BROKEN ? AUDIT_MALFORMED : AUDIT_UNEXPLAINED;
	}
	keep_last(&w, fates);
out:
	qb_free(sorted);
	qb_free(w.root);
	return st;
}
