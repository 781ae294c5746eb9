/*
 * How many live drills were found, in all and along a covariate (audit clauses A10, B1-B3, B8, B11). Takes plain arrays
 * of covariate and outcome, so that fitted curves can join without touching the matching.
 */
#ifndef QB_AUDIT_EFFICIENCY_H
#define QB_AUDIT_EFFICIENCY_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/audit/binomial.h"
#include "server/audit/match.h"

struct audit_efficiency {
	uint64_t found, of;
	double estimate; /* NaN when `of` is 0 */
	struct audit_interval clopper_pearson, wilson;
};

struct audit_efficiency audit_efficiency_of(uint64_t found, uint64_t of, double confidence);

/* Live drills with their outcome: x may be NaN where a drill has no such covariate; such drills are left out. */
struct audit_outcomes {
	double *x;   /* owned */
	bool *found; /* owned */
	size_t n;
};

/*
 * Outcomes of live drills along a truth parameter.
 *
 * Given:    pipeline    index, or -1 for "found by at least one"
 *           covariate   a column ("network_snr"), or NULL: every live drill, x = 0
 */
struct audit_outcomes audit_outcomes_of(const struct audit_input *in, const struct audit_match *m, int pipeline,
                                        const char *covariate);
void audit_outcomes_free(struct audit_outcomes *o);

struct audit_bin {
	double first, last, mean;
	struct audit_efficiency efficiency;
};

/*
 * Equal-count bins in ascending x; ties keep their input order.
 *
 * Given:    bins   number of bins; 0: n / 20, between 1 and 10
 * Returned: number of bins written (empty ones are left out); *out owned by the caller
 */
size_t audit_bins(const struct audit_outcomes *o, size_t bins, double confidence, struct audit_bin **out);

/*
 * Band for the efficiency at one point that needs monotony only (Kim, Fay & Proschan 2018, the "valid" interval).
 *
 * Given:    rising   the efficiency rises with x (signal-to-noise ratio) or falls (distance)
 * Returned: limits; 0 or 1 on a side without drills
 */
struct audit_interval audit_monotone_band(const struct audit_outcomes *o, double at, bool rising, double confidence);

/* Marks live drills that have another actuated slot within 2 match_max_s; flags has one entry per slot. */
void audit_mark_crowded(const struct audit_input *in, bool *flags);

#endif
