/* How loud: the scale that gives the drawn network SNR, with the redshift that goes with it, and the weight of C1. */
#include <math.h>
#include <string.h>

#include "server/drill/draw_parts.h"

/* Distances between which a network SNR is looked for. */
#define NEAREST_MPC  1e-3
#define FARTHEST_MPC 1e5
#define LEAST_EXCESS 50.0
#define SOLVED       1e-12 /* relative, of the distance */
#define STEP         1e-4  /* relative, of the numerical slope */

struct cosmology draw_cosmology(const struct drill_plan *plan)
{
	return (struct cosmology){plan->hubble_km_per_s_per_mpc, plan->matter_density};
}

static bool by_distance(const struct draw_attempt *a)
{
	return strcmp(a->family->scale, "distance_mpc") == 0;
}

/* tan alpha = 2 cos iota / (1 + cos^2 iota): the ellipticity of a burst seen at an inclination (signals, c). */
static double ellipticity(double inclination_rad)
{
	double c = cos(inclination_rad);
	return atan2(2 * c, 1 + c * c);
}

enum qb_status draw_fill(struct draw_attempt *a, struct qb_error *e)
{
	const struct plan_family *f = a->family;
	enum qb_status st = signal_init(&a->source, f->family, f->model, f->name, e);
	if (st != QB_OK)
		return st;
	(void)signal_put(&a->source, "inclination_rad", a->place[PLACE_INCLINATION]);
	(void)signal_put(&a->source, "ellipticity_rad", ellipticity(a->place[PLACE_INCLINATION]));
	(void)signal_put(&a->source, "phase_rad", a->place[PLACE_PHASE]);
	for (int i = 0; i < f->parameters.n; i++)
		(void)signal_put(&a->source, f->parameters.p[i].key, a->values[i]);
	a->source.right_ascension_rad = a->place[PLACE_RIGHT_ASCENSION];
	a->source.declination_rad = a->place[PLACE_DECLINATION];
	a->source.polarization_rad = a->place[PLACE_POLARIZATION];
	a->source.lowest_frequency_hz = a->place[f->place.n - 1];
	a->redshift = 0;
	return QB_OK;
}

void draw_set_scale(struct draw_attempt *a, double scale)
{
	a->scale = scale;
	(void)signal_put(&a->source, a->family->scale, scale);
	if (!a->family->source_frame)
		return;
	struct cosmology c = draw_cosmology(a->plan);
	a->redshift = cosmology_redshift(&c, scale);
	const struct population *p = &a->family->parameters;
	for (int i = 0; i < p->n; i++) {
		if (strstr(p->p[i].key, "_mass_msun") != NULL)
			(void)signal_put(&a->source, p->p[i].key, a->values[i] * (1 + a->redshift));
	}
}

static enum qb_status snr_at(struct draw_attempt *a, double scale, double *snr, struct qb_error *e)
{
	draw_set_scale(a, scale);
	return draw_snr(a, snr, e);
}

/* ln(rho / wanted) at a distance; an SNR of nothing counts as very far below. */
static enum qb_status excess_at(struct draw_attempt *a, double log_distance, double wanted, double *excess,
                                struct qb_error *e)
{
	double snr;
	enum qb_status st = snr_at(a, exp(log_distance), &snr, e);
	*excess = snr > 0 ? fmax(log(snr / wanted), -LEAST_EXCESS) : -LEAST_EXCESS;
	return st;
}

/* Two log distances with the wanted SNR between them, starting where it would be without redshift. */
static enum qb_status bracket(struct draw_attempt *a, double wanted, double x[2], double f[2], struct qb_error *e)
{
	double start;
	enum qb_status st = excess_at(a, log(NEAREST_MPC), wanted, &start, e);
	x[0] = log(NEAREST_MPC) + start - M_LN2;
	x[1] = x[0] + 2 * M_LN2;
	if (st == QB_OK)
		st = excess_at(a, x[0], wanted, &f[0], e);
	while (st == QB_OK && f[0] <= 0 && x[0] > log(NEAREST_MPC)) {
		x[0] -= M_LN2;
		st = excess_at(a, x[0], wanted, &f[0], e);
	}
	if (st == QB_OK)
		st = excess_at(a, x[1], wanted, &f[1], e);
	while (st == QB_OK && f[1] >= 0 && x[1] < log(FARTHEST_MPC)) {
		x[1] += M_LN2;
		st = excess_at(a, x[1], wanted, &f[1], e);
	}
	if (st == QB_OK && !(f[0] > 0 && f[1] < 0))
		return qb_fail(e, QB_RANGE, a->plan->campaign, "narrow the masses or the network SNR",
		               "family '%s' has no distance that gives a network SNR of %.6g", a->family->name, wanted);
	return st;
}

/*
 * ln rho falls steadily with ln D, also with redshift (rho ~ (1+z)^(5/6) / D and D grows faster). Regula falsi in the
 * logarithms with the Illinois change.
 */
static enum qb_status solve_distance(struct draw_attempt *a, double wanted, struct qb_error *e)
{
	double x[2], f[2];
	enum qb_status st = bracket(a, wanted, x, f, e);
	for (int i = 0, last = -1; st == QB_OK && i < 200 && x[1] - x[0] > SOLVED; i++) {
		double f_mid, mid = (x[0] * f[1] - x[1] * f[0]) / (f[1] - f[0]);
		st = excess_at(a, mid, wanted, &f_mid, e);
		if (fabs(f_mid) < SOLVED)
			break;
		int end = f_mid > 0 ? 0 : 1;
		x[end] = mid;
		f[end] = f_mid;
		if (last == end)
			f[1 - end] /= 2;
		last = end;
	}
	return st;
}

/* |d rho / d D| by central difference in ln D, leaving the source at `scale` again. */
static enum qb_status find_slope(struct draw_attempt *a, struct qb_error *e)
{
	double scale = a->scale, near, far;
	if (!by_distance(a) || !a->family->source_frame) {
		a->snr_slope = a->network_snr / scale;
		return QB_OK;
	}
	enum qb_status st = snr_at(a, scale * exp(-STEP), &near, e);
	if (st == QB_OK)
		st = snr_at(a, scale * exp(STEP), &far, e);
	if (st != QB_OK)
		return st;
	a->snr_slope = fabs(far - near) / (2 * STEP * scale);
	return snr_at(a, scale, &a->network_snr, e);
}

enum qb_status draw_loudness(struct draw_attempt *a, double u, struct qb_error *e)
{
	double drawn = dist_sample(&a->family->loud, NULL, u), snr;
	enum qb_status st;
	a->loud = drawn;
	if (a->family->loudness == LOUD_BY_SCALE)
		st = snr_at(a, drawn, &a->network_snr, e);
	else if (a->family->source_frame)
		st = solve_distance(a, drawn, e);
	else {
		/* SNR is proportional to hrss and to 1 / distance: one look at a reference is enough. */
		double reference = by_distance(a) ? 100 : 1e-22;
		st = snr_at(a, reference, &snr, e);
		if (st == QB_OK && !(snr > 0))
			return qb_fail(e, QB_RANGE, a->plan->campaign, "draw it inside the stations' band",
			               "family '%s' gives no SNR at any station", a->family->name);
		if (st == QB_OK)
			draw_set_scale(a, by_distance(a) ? reference * snr / drawn : reference * drawn / snr);
	}
	if (st == QB_OK)
		st = draw_snr(a, &a->network_snr, e);
	return st == QB_OK ? find_slope(a, e) : st;
}

bool draw_family_has_weight(const struct drill_plan *plan, const struct plan_family *family)
{
	const struct population *target = &plan->audit.population;
	if (target->n == 0 || strcmp(family->scale, "distance_mpc") != 0)
		return false;
	for (int i = 0; i < target->n; i++) {
		int k = population_find(&family->parameters, target->p[i].key);
		if (k < 0 || family->parameters.p[k].dist.kind == DIST_FIXED)
			return false;
	}
	return true;
}

/* Volume element v(D) per Mpc of luminosity distance, Mpc^2. */
static double volume_element(const struct draw_attempt *a)
{
	double d = a->scale, z = a->redshift;
	if (!a->family->source_frame)
		return 4 * M_PI * d * d;
	struct cosmology c = draw_cosmology(a->plan);
	double hubble = cosmology_hubble_distance_mpc(&c) / cosmology_expansion(&c, z);
	double dd_dz = d / (1 + z) + (1 + z) * hubble; /* D_L = (1+z) D_C */
	return cosmology_volume_mpc3_per_redshift(&c, z) / dd_dz / (1 + z);
}

bool draw_weight(const struct draw_attempt *a, double *weight_mpc3)
{
	const struct population *target = &a->plan->audit.population, *drawn = &a->family->parameters;
	double p = 1, q, values[POPULATION_MAX];
	*weight_mpc3 = 0;
	if (!draw_family_has_weight(a->plan, a->family))
		return false;
	q = dist_density(&a->family->loud, NULL, a->loud);
	if (a->family->loudness == LOUD_BY_SNR)
		q *= a->snr_slope;
	for (int i = 0; i < target->n; i++) {
		int k = population_find(drawn, target->p[i].key);
		values[i] = a->values[k];
		p *= dist_density(&target->p[i].dist, values, values[i]);
		q *= dist_density(&drawn->p[k].dist, a->values, a->values[k]);
	}
	if (!(q > 0) || !isfinite(p * volume_element(a) / q))
		return false;
	*weight_mpc3 = p * volume_element(a) / q;
	return true;
}
