/* Binned efficiencies and the monotone band; both work on drills sorted by the covariate. */
#include "server/audit/efficiency.h"

#include <math.h>
#include <stdlib.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

struct audit_efficiency audit_efficiency_of(uint64_t found, uint64_t of, double confidence)
{
	return (struct audit_efficiency){
	    .found = found,
	    .of = of,
	    .estimate = of > 0 ? (double)found / (double)of : NAN,
	    .clopper_pearson = audit_clopper_pearson(found, of, confidence),
	    .wilson = audit_wilson(found, of, confidence),
	};
}

static bool found_by(const struct audit_match *m, const struct audit_input *in, int pipeline, size_t slot)
{
	if (pipeline >= 0)
		return audit_found_by(m, in, (size_t)pipeline, slot) >= 0;
	for (size_t p = 0; p < m->n_pipelines; p++)
		if (audit_found_by(m, in, p, slot) >= 0)
			return true;
	return false;
}

struct audit_outcomes audit_outcomes_of(const struct audit_input *in, const struct audit_match *m, int pipeline,
                                        const char *covariate)
{
	struct audit_outcomes o = {.x = QB_NEW_ARRAY(double, in->n_slots), .found = QB_NEW_ARRAY(bool, in->n_slots)};
	for (size_t i = 0; i < in->n_slots; i++) {
		if (in->slots[i].state != AUDIT_LIVE)
			continue;
		const double x = covariate != NULL ? audit_truth(in, &in->slots[i], covariate) : 0;
		if (!isfinite(x))
			continue;
		o.x[o.n] = x;
		o.found[o.n++] = found_by(m, in, pipeline, i);
	}
	return o;
}

void audit_outcomes_free(struct audit_outcomes *o)
{
	qb_free(o->x);
	qb_free(o->found);
	*o = (struct audit_outcomes){0};
}

static int by_covariate(const void *a, const void *b, void *ctx)
{
	const size_t i = *(const size_t *)a, k = *(const size_t *)b;
	const double x = ((const double *)ctx)[i], y = ((const double *)ctx)[k];
	if (x < y || x > y)
		return x < y ? -1 : 1;
	return (i > k) - (i < k);
}

/* Indices of the drills in ascending x; owned by the caller. */
static size_t *ascending(const struct audit_outcomes *o)
{
	size_t *order = QB_NEW_ARRAY(size_t, o->n);
	for (size_t i = 0; i < o->n; i++)
		order[i] = i;
	qsort_r(order, o->n, sizeof *order, by_covariate, o->x);
	return order;
}

size_t audit_bins(const struct audit_outcomes *o, size_t bins, double confidence, struct audit_bin **out)
{
	if (bins == 0)
		bins = o->n / 20 < 1 ? 1 : o->n / 20 > 10 ? 10 : o->n / 20;
	size_t *order = ascending(o), made = 0;
	*out = QB_NEW_ARRAY(struct audit_bin, bins);
	for (size_t b = 0; b < bins; b++) {
		const size_t from = b * o->n / bins, to = (b + 1) * o->n / bins;
		if (from == to)
			continue;
		uint64_t found = 0;
		double sum = 0;
		for (size_t i = from; i < to; i++) {
			found += o->found[order[i]];
			sum += o->x[order[i]];
		}
		(*out)[made++] = (struct audit_bin){
		    .first = o->x[order[from]],
		    .last = o->x[order[to - 1]],
		    .mean = sum / (double)(to - from),
		    .efficiency = audit_efficiency_of(found, to - from, confidence),
		};
	}
	qb_free(order);
	return made;
}

/* Smallest m with m^3 >= n^2, in integers. */
static size_t two_thirds_power(size_t n)
{
	size_t m = (size_t)cbrt((double)n * (double)n);
	m = m > 1 ? m - 1 : 0;
	while ((double)m * (double)m * (double)m < (double)n * (double)n)
		m++;
	return m;
}

/* Clopper-Pearson limits of the m drills nearest to the point on one side; *any is false when there are none. */
static struct audit_interval side(const struct audit_outcomes *o, const size_t *order, double at, bool below, size_t m,
                                  double confidence, bool *any)
{
	uint64_t n = 0, found = 0;
	for (size_t i = 0; i < o->n && n < m; i++) {
		const size_t drill = order[below ? o->n - 1 - i : i];
		if (below ? o->x[drill] > at : o->x[drill] < at)
			continue;
		n++;
		found += o->found[drill];
	}
	*any = n > 0;
	return audit_clopper_pearson(found, n, confidence);
}

struct audit_interval audit_monotone_band(const struct audit_outcomes *o, double at, bool rising, double confidence)
{
	size_t *order = ascending(o);
	const size_t m = two_thirds_power(o->n);
	bool any_low, any_high;
	const struct audit_interval low = side(o, order, at, rising, m, confidence, &any_low);
	const struct audit_interval high = side(o, order, at, !rising, m, confidence, &any_high);
	qb_free(order);
	return (struct audit_interval){any_low ? low.lower : 0, any_high ? high.upper : 1};
}

struct placed {
	double gps;
	size_t slot;
};

static int by_gps(const void *a, const void *b)
{
	const struct placed *x = a, *y = b;
	return (x->gps > y->gps) - (x->gps < y->gps);
}

void audit_mark_crowded(const struct audit_input *in, bool *flags)
{
	struct placed *at = QB_NEW_ARRAY(struct placed, in->n_slots);
	size_t n = 0;
	const double reach = 2 * in->settings.match_max_s;
	for (size_t i = 0; i < in->n_slots; i++)
		if (audit_state_actuated(in->slots[i].state))
			at[n++] = (struct placed){in->slots[i].arrival_gps, i};
	qsort(at, n, sizeof *at, by_gps);
	for (size_t i = 0; i < n; i++) {
		const bool before = i > 0 && at[i].gps - at[i - 1].gps <= reach;
		const bool after = i + 1 < n && at[i + 1].gps - at[i].gps <= reach;
		flags[at[i].slot] = in->slots[at[i].slot].state == AUDIT_LIVE && (before || after);
	}
	qb_free(at);
}
