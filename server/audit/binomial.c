/* Counting statistics on GSL's distributions; only arguments inside their domain ever reach GSL. */
#include "server/audit/binomial.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_randist.h>
#include <math.h>

#include "server/base/check.h"

double audit_normal_quantile(double confidence)
{
	CHECK(confidence > 0 && confidence < 1);
	return gsl_cdf_ugaussian_Qinv((1 - confidence) / 2);
}

struct audit_interval audit_wilson(uint64_t k, uint64_t n, double confidence)
{
	CHECK(k <= n);
	if (n == 0)
		return (struct audit_interval){0, 1};
	const double z = audit_normal_quantile(confidence), m = (double)n, p = (double)k / m;
	const double centre = p + z * z / (2 * m), scale = 1 + z * z / m;
	const double half = z * sqrt(p * (1 - p) / m + z * z / (4 * m * m));
	return (struct audit_interval){
	    .lower = k == 0 ? 0 : (centre - half) / scale,
	    .upper = k == n ? 1 : (centre + half) / scale,
	};
}

/* Inverse of the regularised incomplete beta function by bisection: slow, monotone and safe. */
static double beta_quantile(double probability, double a, double b)
{
	double lo = 0, hi = 1;
	for (int i = 0; i < 200 && hi - lo > 1e-15 * hi; i++) {
		const double mid = lo + (hi - lo) / 2;
		if (mid <= lo || mid >= hi)
			break;
		if (gsl_cdf_beta_P(mid, a, b) < probability)
			lo = mid;
		else
			hi = mid;
	}
	return lo + (hi - lo) / 2;
}

struct audit_interval audit_clopper_pearson(uint64_t k, uint64_t n, double confidence)
{
	CHECK(k <= n && confidence > 0 && confidence < 1);
	if (n == 0)
		return (struct audit_interval){0, 1};
	const double tail = (1 - confidence) / 2, found = (double)k, missed = (double)(n - k);
	/* The upper limit comes from the mirrored problem, so that both limits keep full relative precision. */
	return (struct audit_interval){
	    .lower = k == 0 ? 0 : beta_quantile(tail, found, missed + 1),
	    .upper = k == n ? 1 : 1 - beta_quantile(tail, missed, found + 1),
	};
}

double audit_poisson_at_least(uint64_t n, double mean)
{
	if (n == 0)
		return 1;
	return mean > 0 ? gsl_cdf_gamma_P(mean, (double)n, 1) : 0;
}

/* ln of the binomial probability; logs, since the terms underflow for long campaigns. */
static double log_pmf(uint64_t k, uint64_t n, double p)
{
	const double x = (double)k, m = (double)n;
	return lgamma(m + 1) - lgamma(x + 1) - lgamma(m - x + 1) + (k > 0 ? x * log(p) : 0) +
	       (n > k ? (m - x) * log1p(-p) : 0);
}

double audit_binomial_two_sided(uint64_t k, uint64_t n, double p)
{
	CHECK(k <= n && p > 0 && p < 1);
	const double bar = log_pmf(k, n, p) + log1p(1e-7);
	double sum = 0;
	for (uint64_t i = 0; i <= n; i++) {
		const double term = log_pmf(i, n, p);
		if (term <= bar)
			sum += exp(term);
	}
	return fmin(1, sum);
}

double audit_without_accidental(double observed, double accidental)
{
	const double x = (observed - accidental) / (1 - accidental);
	return fmin(1, fmax(0, x));
}
