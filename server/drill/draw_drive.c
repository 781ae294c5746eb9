/* What a draw asks of the stations: SNRs, the reach of the drives, and each drive against its limits. */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/drill/draw_parts.h"
#include "server/wave/actuation.h"
#include "server/wave/render.h"
#include "server/wave/snr.h"

#define LIGHT_M_PER_S    299792458.0
#define MAX_CORNERS_BITS 10 /* of a family's parameters, for the longest drive */

/* SNRs are counted up to what every drive can carry: half the slowest drive rate. */
static double highest_hz(const struct drill_plan *plan)
{
	double rate = INFINITY;
	for (int i = 0; i < plan->network->n_stations; i++)
		rate = fmin(rate, plan->network->stations[i].actuator.rate_hz);
	return rate / 2;
}

enum qb_status draw_snr(struct draw_attempt *a, double *network, struct qb_error *e)
{
	return snr_network(a->plan->network, &a->source, highest_hz(a->plan), a->station_snr, network, e);
}

/* A time on the grid of the slot's drive samples at or before / at or after t. */
static int64_t grid_ns(int64_t slot_start_ns, double rate_hz, int64_t t_ns, bool up)
{
	double samples = (double)(t_ns - slot_start_ns) / (double)NS_PER_S * rate_hz;
	samples = up ? ceil(samples) : floor(samples);
	return slot_start_ns + (int64_t)llround(samples / rate_hz * (double)NS_PER_S);
}

enum qb_status draw_drive_reach(const struct drill_plan *plan, const struct wave_source *s, double *before_s,
                                double *after_s, struct qb_error *e)
{
	*before_s = *after_s = 0;
	for (int i = 0; i < plan->network->n_stations; i++) {
		const struct wave_station *w = &plan->network->stations[i];
		double before, after;
		if (!w->actuator.present)
			return qb_fail(e, QB_RANGE, w->name, "describe its actuator in the network file",
			               "station '%s' has no actuator", w->name);
		/* The wave may reach the station earlier or later than Earth's centre, and a sample is lost to the
		 * grid. */
		double slack = sqrt(w->position_m[0] * w->position_m[0] + w->position_m[1] * w->position_m[1] +
		                    w->position_m[2] * w->position_m[2]) /
		                   LIGHT_M_PER_S +
		               2 / w->actuator.rate_hz;
		wave_drive_extent(w, s, &before, &after);
		*before_s = fmax(*before_s, before + slack);
		*after_s = fmax(*after_s, after + slack);
	}
	return QB_OK;
}

enum qb_status draw_longest_drive(const struct drill_plan *plan, const struct plan_family *family, double *before_s,
                                  double *after_s, struct qb_error *e)
{
	const struct population *pop = &family->parameters;
	int bits = pop->n < MAX_CORNERS_BITS ? pop->n : MAX_CORNERS_BITS;
	struct wave_source s;
	*before_s = *after_s = 0;
	enum qb_status st = signal_init(&s, family->family, family->model, family->name, e);
	if (st != QB_OK)
		return st;
	s.lowest_frequency_hz = family->place.p[family->place.n - 1].dist.from.value;
	s.arrival_gps_ns = plan->slots.start_gps_ns;
	for (int corner = 0; corner < 1 << bits; corner++) {
		for (int i = 0; i < pop->n; i++) {
			double ends[2];
			dist_extremes(pop, &pop->p[i].dist, &ends[0], &ends[1]);
			(void)signal_put(&s, pop->p[i].key, ends[i < bits ? corner >> i & 1 : 0]);
		}
		double before, after;
		st = draw_drive_reach(plan, &s, &before, &after, e);
		if (st != QB_OK)
			return st;
		*before_s = fmax(*before_s, before);
		*after_s = fmax(*after_s, after);
	}
	return QB_OK;
}

static struct actuator_limits limits_of(const struct drill_plan *plan)
{
	struct actuator_limits l = {.largest_drive = plan->largest_drive, .n_bands = plan->n_excluded_bands};
	_Static_assert((int)PLAN_MAX_LIST <= (int)ACTUATOR_MAX_BANDS, "every excluded band of a plan is checked");
	for (int i = 0; i < l.n_bands; i++) {
		l.excluded_bands_hz[i][0] = plan->excluded_bands_hz[i][0];
		l.excluded_bands_hz[i][1] = plan->excluded_bands_hz[i][1];
	}
	return l;
}

static double peak(const double *x, size_t n)
{
	double p = 0;
	for (size_t i = 0; i < n; i++)
		p = fmax(p, fabs(x[i]));
	return p;
}

enum qb_status draw_station(const struct drill_plan *plan, const struct wave_source *s, int i,
                            struct truth_station *out, bool *within, char limit[80], struct qb_error *e)
{
	const struct wave_station *w = &plan->network->stations[i];
	const double rate = w->actuator.rate_hz;
	const struct actuator_limits limits = limits_of(plan);
	struct actuator_report report;
	double before, after;
	int64_t slot = slots_start(&plan->slots, slots_at(&plan->slots, s->arrival_gps_ns));
	int64_t arrival = wave_arrival_gps_ns(w, s);
	wave_drive_extent(w, s, &before, &after);
	out->drive_from_ns = grid_ns(slot, rate, arrival - (int64_t)ceil(before * (double)NS_PER_S), false);
	out->drive_to_ns = grid_ns(slot, rate, arrival + (int64_t)ceil(after * (double)NS_PER_S), true);
	(void)snprintf(out->name, sizeof out->name, "%s", w->name);
	size_t n = (size_t)llround((double)(out->drive_to_ns - out->drive_from_ns) / (double)NS_PER_S * rate);
	double *x = QB_NEW_ARRAY(double, n);
	enum qb_status st = render_strain(w, s, rate, out->drive_from_ns, n, true, x, e);
	if (st == QB_OK) {
		out->peak_strain = peak(x, n);
		st = render_drive(w, s, rate, out->drive_from_ns, n, x, e);
	}
	if (st == QB_OK) {
		actuator_check(&w->actuator, &limits, rate, x, n, &report);
		out->peak_drive_counts = report.peak_counts;
		*within = report.within;
		for (int k = 0; k < report.n && !report.within; k++) {
			if (report.limit[k].within)
				continue;
			(void)snprintf(limit, 80, "%s at station %.30s", report.limit[k].name, w->name);
			break;
		}
	}
	qb_free(x);
	return st;
}
