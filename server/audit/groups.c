/* One sort and one sweep over the unexplained claims. */
#include "server/audit/groups.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"

static int by_time(const void *a, const void *b, void *ctx)
{
	const struct audit_claim *claims = ctx, *x = &claims[*(const size_t *)a], *y = &claims[*(const size_t *)b];
	if (x->arrival_gps < y->arrival_gps || x->arrival_gps > y->arrival_gps)
		return x->arrival_gps < y->arrival_gps ? -1 : 1;
	if (x->pipeline != y->pipeline)
		return x->pipeline < y->pipeline ? -1 : 1;
	return strcmp(x->claim_id, y->claim_id);
}

static void close_group(const struct audit_input *in, struct audit_groups *g, size_t first, size_t end)
{
	bool seen[AUDIT_MAX_PIPELINES] = {false};
	struct audit_group *out = &g->at[g->n++];
	const double base = in->claims[g->claims[first]].arrival_gps;
	double offset = 0; /* from the first claim, so that the mean keeps its microseconds */
	*out = (struct audit_group){.first = first, .n = end - first};
	for (size_t i = first; i < end; i++) {
		const struct audit_claim *c = &in->claims[g->claims[i]];
		offset += c->arrival_gps - base;
		if (!seen[c->pipeline]) {
			seen[c->pipeline] = true;
			out->pipelines++;
		}
	}
	out->mean_gps = base + offset / (double)out->n;
}

struct audit_groups audit_groups_of(const struct audit_input *in, const struct audit_match *m)
{
	struct audit_groups g = {.claims = QB_NEW_ARRAY(size_t, in->n_claims)};
	for (size_t i = 0; i < in->n_claims; i++)
		if (m->fates[i].status == AUDIT_UNEXPLAINED)
			g.claims[g.n_claims++] = i;
	if (g.n_claims > 0)
		qsort_r(g.claims, g.n_claims, sizeof *g.claims, by_time, in->claims);
	g.at = QB_NEW_ARRAY(struct audit_group, g.n_claims);
	size_t first = 0;
	for (size_t i = 1; i <= g.n_claims; i++) {
		if (i < g.n_claims) {
			const size_t a = g.claims[i - 1], b = g.claims[i];
			const double gap = in->claims[b].arrival_gps - in->claims[a].arrival_gps;
			if (gap <= fmax(m->fates[a].window_s, m->fates[b].window_s))
				continue;
		}
		close_group(in, &g, first, i);
		first = i;
	}
	return g;
}

void audit_groups_free(struct audit_groups *g)
{
	qb_free(g->claims);
	qb_free(g->at);
	*g = (struct audit_groups){0};
}
