/*
 * One-to-one assignment of claims to drills (audit clauses A2-A4): windows, integer weights, components of the sparse
 * graph of admissible pairs, and an optimal assignment in each. Works on bare arrays, so that it can be tested against
 * outside solvers.
 */
#ifndef QB_AUDIT_ASSIGN_H
#define QB_AUDIT_ASSIGN_H

#include <stddef.h>
#include <stdint.h>

#include "server/base/err.h"

#define ASSIGN_MAX_SIDE 2000 /* claims, or drills, of one component */

/*
 * The matching window.
 *
 * Given:    base_s, factor, max_s   settings
 *           sigma_s                 stated timing uncertainty; missing, <= 0 or not finite counts as 0
 * Returned: min(max_s, base_s + factor sigma_s), s
 */
double assign_window_s(double base_s, double factor, double max_s, double sigma_s);

/* Weight of an admissible pair: floor((1 - (dt/w)^2) 2^30 + 1/2) + 1, from 1 to 2^30 + 1. */
int64_t assign_weight(double dt_s, double window_s);

struct assign_claim {
	const char *id;
	double arrival_gps, window_s;
	double far_per_year;        /* NaN: not stated, ranks last */
	double first_submitted_gps; /* breaks ties */
};

struct assign_drill {
	double arrival_gps;
};

/* Size of a component with at least one admissible pair, and how many there are of it. */
struct assign_size {
	size_t claims, drills, count;
};

struct assign_result {
	ptrdiff_t *drill_of; /* owned; per claim the index of its drill, or -1 */
	size_t edges, components;
	struct assign_size *sizes; /* owned; ascending by claims, then drills */
	size_t n_sizes;
	int64_t total_weight;
};

/*
 * Maximises the total weight; ties fall by the better-ranked claim, then by the earlier drill.
 *
 * Given:    claims, drills   any order, finite times; max_window_s bounds every window
 * Errors:   QB_RANGE         a component above 2000 x 2000, with its time range: the drills lie too close together
 * Owns:     release *out with assign_result_free()
 * Ref:      Kuhn 1955, Munkres 1957; gated weights after Bar-Shalom & Fortmann 1988 (from memory)
 */
enum qb_status assign_claims(const struct assign_claim *claims, size_t n_claims, const struct assign_drill *drills,
                             size_t n_drills, double max_window_s, struct assign_result *out,
                             struct qb_error *e) QB_MUST_USE;
void assign_result_free(struct assign_result *r);

#endif
