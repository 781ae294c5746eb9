/*
 * How well found claims state the parameters (audit clause E1): residuals in units of the stated uncertainty, and an
 * exact sign test for bias, which needs no assumption about their distribution.
 */
#ifndef QB_AUDIT_RECOVERY_H
#define QB_AUDIT_RECOVERY_H

#include "server/audit/match.h"

struct audit_residual {
	size_t claim, slot;   /* indices */
	double stated, truth; /* the stated median and the drill's value */
	double z; /* (median - truth) / sigma, sigma from the 5-95 % interval; on the log scale where planned */
};

struct audit_residuals {
	struct audit_residual *at; /* owned; by slot order */
	size_t n;
	size_t unusable;                               /* stated quantiles that do not increase, or have no width */
	double mean, sd, mean_se, p_mean_zero, median; /* of z; NaN where n is too small */
	size_t above, below;                           /* stated median above, below the truth; ties in neither */
	double sign_p;                                 /* exact, two-sided; NaN without a pair */
};

/*
 * Given:    pipeline, parameter   found claims of that pipeline that state quantiles of the parameter
 * Returned: residuals, owned by the caller
 * Ref:      Student 1908 for p_mean_zero; the sign test is binomial
 */
struct audit_residuals audit_residuals_of(const struct audit_input *in, const struct audit_match *m, size_t pipeline,
                                          const char *parameter);

/*
 * The same for the arrival time as stated in the claim itself (arrival_gps, arrival_gps_sigma_s): z is NaN where no
 * uncertainty was stated, and mean, sd and median are of the difference in seconds.
 */
struct audit_residuals audit_arrivals_of(const struct audit_input *in, const struct audit_match *m, size_t pipeline);
void audit_residuals_free(struct audit_residuals *r);

#endif
