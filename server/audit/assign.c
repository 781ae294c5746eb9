/*
 * Windows, weights, and the division of all claims and drills into small components, each solved exactly. Greedy
 * pairing loses weight in crowds, and an order-preserving rule is wrong when windows differ, hence the full solver.
 */
#include "server/audit/assign.h"

#include <math.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "server/audit/hungarian.h"
#include "server/base/alloc.h"

double assign_window_s(double base_s, double factor, double max_s, double sigma_s)
{
	const double sigma = isfinite(sigma_s) && sigma_s > 0 ? sigma_s : 0;
	return fmin(max_s, base_s + factor * sigma);
}

int64_t assign_weight(double dt_s, double window_s)
{
	const double x = fabs(dt_s) / window_s;
	return (int64_t)floor((1 - x * x) * 1073741824.0 + 0.5) + 1;
}

#define MAX_EDGES ((size_t)1 << 25) /* of all components together */

/* An admissible pair; claim and drill are places in time order. */
struct edge {
	size_t claim, drill;
	int64_t weight;
};

struct ranked {
	const struct assign_claim *claim;
	size_t place; /* in time order */
};

struct work {
	const struct assign_claim *claims;
	const struct assign_drill *drills;
	size_t n_claims, n_drills;
	size_t *claim_at, *drill_at; /* indices in time order */
	struct edge *edges;          /* by claim place, then drill place */
	size_t n_edges, cap_edges;
	size_t *parent; /* union-find over claim places, then drill places */
	size_t *local;  /* place within its component, for both sides */
};

static int compare_double(double a, double b)
{
	return (a > b) - (a < b);
}

static int claims_by_time(const void *a, const void *b, void *ctx)
{
	const struct assign_claim *c = ctx, *x = &c[*(const size_t *)a], *y = &c[*(const size_t *)b];
	const int order = compare_double(x->arrival_gps, y->arrival_gps);
	return order != 0 ? order : strcmp(x->id, y->id);
}

static int drills_by_time(const void *a, const void *b, void *ctx)
{
	const struct assign_drill *d = ctx;
	const size_t i = *(const size_t *)a, k = *(const size_t *)b;
	const int order = compare_double(d[i].arrival_gps, d[k].arrival_gps);
	return order != 0 ? order : (i > k) - (i < k);
}

/* Best first: stated rates before none, low before high, early before late, then the identifier. */
static int by_rank(const void *a, const void *b)
{
	const struct assign_claim *x = ((const struct ranked *)a)->claim, *y = ((const struct ranked *)b)->claim;
	if (isnan(x->far_per_year) != isnan(y->far_per_year))
		return isnan(x->far_per_year) ? 1 : -1;
	int order = isnan(x->far_per_year) ? 0 : compare_double(x->far_per_year, y->far_per_year);
	if (order == 0)
		order = compare_double(x->first_submitted_gps, y->first_submitted_gps);
	return order != 0 ? order : strcmp(x->id, y->id);
}

static size_t find_root(size_t *parent, size_t i)
{
	while (parent[i] != i) {
		parent[i] = parent[parent[i]];
		i = parent[i];
	}
	return i;
}

static void add_edge(struct work *w, size_t claim, size_t drill, int64_t weight)
{
	if (w->n_edges == w->cap_edges) {
		w->cap_edges = w->cap_edges == 0 ? 64 : w->cap_edges * 2;
		w->edges = qb_realloc(w->edges, w->cap_edges, sizeof *w->edges);
	}
	w->edges[w->n_edges++] = (struct edge){claim, drill, weight};
	const size_t a = find_root(w->parent, claim), b = find_root(w->parent, w->n_claims + drill);
	if (a != b)
		w->parent[a > b ? a : b] = a > b ? b : a;
}

/* A hopeless crowd stops before its pairs fill the memory. */
static enum qb_status crowd(const struct work *w, size_t claim, size_t drills, struct qb_error *e)
{
	const double t = w->claims[w->claim_at[claim]].arrival_gps;
	return qb_fail(e, QB_RANGE, "matching", "keep the slots at least four matching windows apart",
	               "the crowd near GPS %.3f is too dense: %zu or more drills in the window of one claim", t,
	               drills);
}

static enum qb_status find_edges(struct work *w, double max_window_s, struct qb_error *e)
{
	const double reach = max_window_s + 1e-6; /* the exact test is on the difference, below */
	size_t lo = 0;
	for (size_t i = 0; i < w->n_claims; i++) {
		const struct assign_claim *c = &w->claims[w->claim_at[i]];
		size_t seen = 0;
		while (lo < w->n_drills && w->drills[w->drill_at[lo]].arrival_gps < c->arrival_gps - reach)
			lo++;
		for (size_t k = lo; k < w->n_drills; k++) {
			const double t = w->drills[w->drill_at[k]].arrival_gps, dt = c->arrival_gps - t;
			if (t > c->arrival_gps + reach)
				break;
			if (!(fabs(dt) <= c->window_s))
				continue;
			if (++seen > ASSIGN_MAX_SIDE || w->n_edges == MAX_EDGES)
				return crowd(w, i, seen, e);
			add_edge(w, i, k, assign_weight(dt, c->window_s));
		}
	}
	return QB_OK;
}

/* A component: places of its claims and drills in time order, and the slice of its edges. */
struct part {
	size_t *claims, n_claims, *drills, n_drills;
	const struct edge *edges;
	size_t n_edges;
};

static audit_wide pair_value(const struct part *p, int64_t weight, size_t rank, size_t drill)
{
	return ((audit_wide)weight << 64) + ((audit_wide)(p->n_claims - rank) << 32) +
	       (audit_wide)(p->n_drills - drill);
}

/* Identical claims (same time and window) are interchangeable: the better-ranked takes the earlier drill. */
static void settle_identical(const struct work *w, const struct part *p, const size_t *rank, ptrdiff_t *drill_of)
{
	for (size_t a = 0; a < p->n_claims; a++) {
		for (size_t b = a + 1; b < p->n_claims; b++) {
			const size_t i = w->claim_at[p->claims[a]], k = w->claim_at[p->claims[b]];
			const struct assign_claim *x = &w->claims[i], *y = &w->claims[k];
			if (y->arrival_gps > x->arrival_gps)
				break; /* time order: no further equal times */
			if (!(x->window_s <= y->window_s && x->window_s >= y->window_s) || drill_of[i] < 0 ||
			    drill_of[k] < 0)
				continue;
			if ((rank[a] < rank[b]) != (drill_of[i] < drill_of[k])) {
				const ptrdiff_t swap = drill_of[i];
				drill_of[i] = drill_of[k];
				drill_of[k] = swap;
			}
		}
	}
}

/* Solves one component; drill_of receives places of drills, indexed by claim. */
static void solve_part(const struct work *w, const struct part *p, ptrdiff_t *drill_of)
{
	const bool upright = p->n_claims <= p->n_drills; /* rows are the shorter side */
	const size_t rows = upright ? p->n_claims : p->n_drills, columns = upright ? p->n_drills : p->n_claims;
	struct ranked *order = QB_NEW_ARRAY(struct ranked, p->n_claims);
	size_t *rank = QB_NEW_ARRAY(size_t, p->n_claims), *column_of = QB_NEW_ARRAY(size_t, rows);
	audit_wide *value = qb_alloc(rows * columns, sizeof *value);
	for (size_t i = 0; i < p->n_claims; i++)
		order[i] = (struct ranked){&w->claims[w->claim_at[p->claims[i]]], i};
	qsort(order, p->n_claims, sizeof *order, by_rank);
	for (size_t i = 0; i < p->n_claims; i++)
		rank[order[i].place] = i;
	for (size_t i = 0; i < p->n_edges; i++) {
		const struct edge *edge = &p->edges[i];
		const size_t c = w->local[edge->claim], d = w->local[w->n_claims + edge->drill];
		value[upright ? c * columns + d : d * columns + c] = pair_value(p, edge->weight, rank[c], d);
	}
	hungarian_assign(value, rows, columns, column_of);
	for (size_t row = 0; row < rows; row++) {
		const size_t c = upright ? row : column_of[row], d = upright ? column_of[row] : row;
		if (value[row * columns + column_of[row]] > 0) /* zero: not admissible, so unmatched */
			drill_of[w->claim_at[p->claims[c]]] = (ptrdiff_t)p->drills[d];
	}
	settle_identical(w, p, rank, drill_of);
	qb_free(order);
	qb_free(rank);
	qb_free(column_of);
	qb_free(value);
}

static int sizes_ascend(const void *a, const void *b)
{
	const struct assign_size *x = a, *y = b;
	if (x->claims != y->claims)
		return x->claims < y->claims ? -1 : 1;
	return (x->drills > y->drills) - (x->drills < y->drills);
}

static void count_size(struct assign_result *out, size_t claims, size_t drills)
{
	out->components++;
	for (size_t i = 0; i < out->n_sizes; i++) {
		if (out->sizes[i].claims == claims && out->sizes[i].drills == drills) {
			out->sizes[i].count++;
			return;
		}
	}
	out->sizes = qb_realloc(out->sizes, out->n_sizes + 1, sizeof *out->sizes);
	out->sizes[out->n_sizes++] = (struct assign_size){claims, drills, 1};
}

static enum qb_status too_crowded(const struct work *w, const struct part *p, struct qb_error *e)
{
	const double first =
	    fmin(w->claims[w->claim_at[p->claims[0]]].arrival_gps, w->drills[w->drill_at[p->drills[0]]].arrival_gps);
	const double last = fmax(w->claims[w->claim_at[p->claims[p->n_claims - 1]]].arrival_gps,
	                         w->drills[w->drill_at[p->drills[p->n_drills - 1]]].arrival_gps);
	return qb_fail(e, QB_RANGE, "matching", "keep the slots at least four matching windows apart",
	               "%zu claims and %zu drills cannot be told apart from GPS %.3f to %.3f (limit %d of each)",
	               p->n_claims, p->n_drills, first, last, ASSIGN_MAX_SIDE);
}

/* Buckets places by component root (a counting sort), so that each component is one slice. */
static void bucket(const size_t *root_of, size_t n, size_t n_roots, size_t *start, size_t *sorted)
{
	for (size_t i = 0; i < n; i++)
		start[root_of[i] + 1]++;
	for (size_t i = 0; i < n_roots; i++)
		start[i + 1] += start[i];
	size_t *next = qb_memdup(start, (n_roots + 1) * sizeof *start);
	for (size_t i = 0; i < n; i++)
		sorted[next[root_of[i]]++] = i;
	qb_free(next);
}

static enum qb_status solve_all(struct work *w, struct assign_result *out, struct qb_error *e)
{
	const size_t all = w->n_claims + w->n_drills;
	size_t *root = QB_NEW_ARRAY(size_t, all + w->n_edges), *edge_root = root + all;
	size_t *claim_start = QB_NEW_ARRAY(size_t, all + 2), *drill_start = QB_NEW_ARRAY(size_t, all + 2);
	size_t *edge_start = QB_NEW_ARRAY(size_t, all + 2), *sorted = QB_NEW_ARRAY(size_t, all + w->n_edges);
	size_t *drills = sorted + w->n_claims, *edge_sorted = sorted + all;
	struct edge *edges = QB_NEW_ARRAY(struct edge, w->n_edges);
	enum qb_status st = QB_OK;
	for (size_t i = 0; i < all; i++)
		root[i] = find_root(w->parent, i);
	for (size_t i = 0; i < w->n_edges; i++)
		edge_root[i] = root[w->edges[i].claim];
	bucket(root, w->n_claims, all, claim_start, sorted);
	bucket(root + w->n_claims, w->n_drills, all, drill_start, drills);
	bucket(edge_root, w->n_edges, all, edge_start, edge_sorted);
	for (size_t i = 0; i < w->n_edges; i++)
		edges[i] = w->edges[edge_sorted[i]];
	for (size_t r = 0; st == QB_OK && r < all; r++) {
		const struct part p = {
		    sorted + claim_start[r], claim_start[r + 1] - claim_start[r],
		    drills + drill_start[r], drill_start[r + 1] - drill_start[r],
		    edges + edge_start[r],   edge_start[r + 1] - edge_start[r],
		};
		if (p.n_edges == 0)
			continue;
		for (size_t i = 0; i < p.n_claims; i++)
			w->local[p.claims[i]] = i;
		for (size_t i = 0; i < p.n_drills; i++)
			w->local[w->n_claims + p.drills[i]] = i;
		count_size(out, p.n_claims, p.n_drills);
		if (p.n_claims > ASSIGN_MAX_SIDE || p.n_drills > ASSIGN_MAX_SIDE)
			st = too_crowded(w, &p, e);
		else
			solve_part(w, &p, out->drill_of);
	}
	qb_free(root);
	qb_free(claim_start);
	qb_free(drill_start);
	qb_free(edge_start);
	qb_free(sorted);
	qb_free(edges);
	return st;
}

enum qb_status assign_claims(const struct assign_claim *claims, size_t n_claims, const struct assign_drill *drills,
                             size_t n_drills, double max_window_s, struct assign_result *out, struct qb_error *e)
{
	const size_t all = n_claims + n_drills;
	struct work w = {.claims = claims, .drills = drills, .n_claims = n_claims, .n_drills = n_drills};
	w.claim_at = QB_NEW_ARRAY(size_t, n_claims);
	w.drill_at = QB_NEW_ARRAY(size_t, n_drills);
	w.parent = QB_NEW_ARRAY(size_t, all);
	w.local = QB_NEW_ARRAY(size_t, all);
	*out = (struct assign_result){.drill_of = QB_NEW_ARRAY(ptrdiff_t, n_claims)};
	for (size_t i = 0; i < n_claims; i++) {
		w.claim_at[i] = i;
		out->drill_of[i] = -1;
	}
	for (size_t i = 0; i < n_drills; i++)
		w.drill_at[i] = i;
	for (size_t i = 0; i < all; i++)
		w.parent[i] = i;
	qsort_r(w.claim_at, n_claims, sizeof *w.claim_at, claims_by_time, (void *)(uintptr_t)claims);
	qsort_r(w.drill_at, n_drills, sizeof *w.drill_at, drills_by_time, (void *)(uintptr_t)drills);
	enum qb_status st = find_edges(&w, max_window_s, e);
	if (st == QB_OK)
		st = solve_all(&w, out, e);
	out->edges = w.n_edges;
	for (size_t i = 0; st == QB_OK && i < n_claims; i++) {
		if (out->drill_of[i] < 0)
			continue;
		out->drill_of[i] = (ptrdiff_t)w.drill_at[out->drill_of[i]];
		const double dt = claims[i].arrival_gps - drills[out->drill_of[i]].arrival_gps;
		out->total_weight += assign_weight(dt, claims[i].window_s);
	}
	if (out->n_sizes > 0)
		qsort(out->sizes, out->n_sizes, sizeof *out->sizes, sizes_ascend);
	qb_free(w.claim_at);
	qb_free(w.drill_at);
	qb_free(w.parent);
	qb_free(w.local);
	qb_free(w.edges);
	if (st != QB_OK)
		assign_result_free(out);
	return st;
}

void assign_result_free(struct assign_result *r)
{
	qb_free(r->drill_of);
	qb_free(r->sizes);
	*r = (struct assign_result){0};
}
