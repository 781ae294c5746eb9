/* Residuals of found claims, their summary and the sign test. */
#include "server/audit/recovery.h"

#include <gsl/gsl_cdf.h>
#include <math.h>
#include <stdlib.h>

#include "server/audit/binomial.h"
#include "server/base/alloc.h"

#define HALF_WIDTH_SIGMAS 1.6448536269514722 /* of the normal distribution, 5 to 50 % */

static int by_value(const void *a, const void *b)
{
	const double x = *(const double *)a, y = *(const double *)b;
	return (x > y) - (x < y);
}

static void summarise(struct audit_residuals *r, double *x)
{
	const double n = (double)r->n;
	double sum = 0, squares = 0;
	r->mean = r->sd = r->mean_se = r->p_mean_zero = r->median = NAN;
	for (size_t i = 0; i < r->n; i++)
		sum += x[i];
	if (r->n > 0) {
		r->mean = sum / n;
		qsort(x, r->n, sizeof *x, by_value);
		r->median = (x[(r->n - 1) / 2] + x[r->n / 2]) / 2;
	}
	for (size_t i = 0; i < r->n; i++)
		squares += (x[i] - r->mean) * (x[i] - r->mean);
	if (r->n > 1) {
		r->sd = sqrt(squares / (n - 1));
		r->mean_se = r->sd / sqrt(n);
		if (r->mean_se > 0)
			r->p_mean_zero = 2 * gsl_cdf_tdist_Q(fabs(r->mean) / r->mean_se, n - 1);
	}
	r->sign_p = r->above + r->below > 0 ? audit_binomial_two_sided(r->above, r->above + r->below, 0.5) : NAN;
}

/* Fills z; false when the quantiles can't be used. */
static bool standardise(const struct audit_quantiles *q, double truth, bool log_scale, double *z)
{
	double low = q->q[0], mid = q->q[2], high = q->q[4];
	if (!q->increasing)
		return false;
	if (log_scale) {
		if (!(low > 0) || !(truth > 0))
			return false;
		low = log(low);
		mid = log(mid);
		high = log(high);
		truth = log(truth);
	}
	const double sigma = (high - low) / (2 * HALF_WIDTH_SIGMAS);
	*z = (mid - truth) / sigma;
	return sigma > 0 && isfinite(*z);
}

static void add(struct audit_residuals *r, size_t claim, size_t slot, double stated, double truth, double z)
{
	r->above += stated > truth;
	r->below += stated < truth;
	r->at[r->n++] = (struct audit_residual){claim, slot, stated, truth, z};
}

struct audit_residuals audit_residuals_of(const struct audit_input *in, const struct audit_match *m, size_t pipeline,
                                          const char *parameter)
{
	struct audit_residuals r = {.at = QB_NEW_ARRAY(struct audit_residual, in->n_slots)};
	const bool log_scale = audit_is_log(&in->settings, parameter);
	double *z = QB_NEW_ARRAY(double, in->n_slots);
	for (size_t s = 0; s < in->n_slots; s++) {
		const ptrdiff_t claim = audit_found_by(m, in, pipeline, s);
		const double truth = audit_truth(in, &in->slots[s], parameter);
		const struct audit_quantiles *q = claim >= 0 ? audit_stated(in, &in->claims[claim], parameter) : NULL;
		if (q == NULL || !isfinite(truth))
			continue;
		if (standardise(q, truth, log_scale, &z[r.n]))
			add(&r, (size_t)claim, s, q->q[2], truth, z[r.n]);
		else
			r.unusable++;
	}
	summarise(&r, z);
	qb_free(z);
	return r;
}

struct audit_residuals audit_arrivals_of(const struct audit_input *in, const struct audit_match *m, size_t pipeline)
{
	struct audit_residuals r = {.at = QB_NEW_ARRAY(struct audit_residual, in->n_slots)};
	double *difference_s = QB_NEW_ARRAY(double, in->n_slots);
	for (size_t s = 0; s < in->n_slots; s++) {
		const ptrdiff_t claim = audit_found_by(m, in, pipeline, s);
		if (claim < 0)
			continue;
		const struct audit_claim *c = &in->claims[claim];
		const double truth = in->slots[s].arrival_gps;
		difference_s[r.n] = c->arrival_gps - truth;
		add(&r, (size_t)claim, s, c->arrival_gps, truth,
		    c->sigma_s > 0 ? (c->arrival_gps - truth) / c->sigma_s : NAN);
	}
	summarise(&r, difference_s);
	qb_free(difference_s);
	return r;
}

void audit_residuals_free(struct audit_residuals *r)
{
	qb_free(r->at);
	*r = (struct audit_residuals){0};
}
