/*
 * Intervals and tail probabilities for counts: the numbers behind every efficiency, coverage and null-slot line. Kept
 * apart because they are checked one by one against statistical software.
 */
#ifndef QB_AUDIT_BINOMIAL_H
#define QB_AUDIT_BINOMIAL_H

#include <stdint.h>

struct audit_interval {
	double lower, upper;
};

/* The two-sided normal quantile of a confidence level in (0,1): 1.95996... for 0.95. */
double audit_normal_quantile(double confidence);

/*
 * Intervals for a probability after k successes in n trials.
 *
 * Given:    k, n         0 <= k <= n
 *           confidence   in (0,1), two-sided
 * Returned: limits in [0,1]; [0,1] when n is 0
 * Ref:      Wilson 1927; Clopper & Pearson 1934
 */
struct audit_interval audit_wilson(uint64_t k, uint64_t n, double confidence);
struct audit_interval audit_clopper_pearson(uint64_t k, uint64_t n, double confidence);

/* P(X >= n) for X Poisson with this mean; 1 at n = 0, 0 for a mean of 0 and n > 0. */
double audit_poisson_at_least(uint64_t n, double mean);

/*
 * Exact two-sided binomial test of "the probability is p": total probability of outcomes no more probable than k, with
 * a relative slack of 1e-7 for ties. 1 when n is 0.
 */
double audit_binomial_two_sided(uint64_t k, uint64_t n, double p);

/*
 * Observed efficiency cleaned of accidental matches (Abbott 1925): (x - p) / (1 - p), cut to [0,1].
 *
 * Given:    observed   an efficiency or a limit of its interval
 *           accidental probability of an accidental match, in [0,1)
 */
double audit_without_accidental(double observed, double accidental);

#endif
