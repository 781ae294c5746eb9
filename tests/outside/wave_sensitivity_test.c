/*
 * Noise curves, horizons, ranges with and without redshift, orientations, volumes, actuation and cosmology, held to an
 * independent implementation, to Astropy's numbers and to published horizons.
 */
#include <complex.h>
#include <stdlib.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/wave/actuation.h"
#include "server/wave/constants.h"
#include "server/wave/cosmology.h"
#include "server/wave/imr.h"
#include "server/wave/noise.h"
#include "server/wave/reach.h"
#include "server/wave/render.h"
#include "server/wave/response.h"
#include "server/wave/snr.h"
#include "tests/near.h"
#include "tests/vectors/wave_sensitivity.h"

#define COUNT(a)   (sizeof(a) / sizeof(a)[0])
#define HIGHEST_HZ 100000.0 /* above every model's end */
#define ARRIVAL    INT64_C(1488789012000000000)

static struct wave_source pair(const char *model, double m1, double m2, double distance_mpc, double low_hz)
{
	struct wave_source s;
	struct qb_error e = {0};
	assert_int_equal(source_init(&s, "compact-binary", model, "test", &e), QB_OK);
	s.p[CB_PRIMARY_MASS] = m1;
	s.p[CB_SECONDARY_MASS] = m2;
	s.p[CB_DISTANCE] = distance_mpc;
	s.lowest_frequency_hz = low_hz;
	s.arrival_gps_ns = ARRIVAL;
	return s;
}

static struct wave_station with_curve(const char *word)
{
	struct wave_station s = {.name = "tarn", .arm_length_m = 4000, .y_arm_azimuth_rad = WAVE_PI / 2};
	assert_true(noise_curve_find(word, &s.noise.curve));
	station_survey(&s);
	return s;
}

static double best(const char *curve, const struct wave_source *s)
{
	struct wave_station station = with_curve(curve);
	struct qb_error e = {0};
	double snr;
	assert_int_equal(snr_best(&station, s, HIGHEST_HZ, &snr, &e), QB_OK);
	return snr;
}

static double horizon(const char *curve, const char *model, double m1, double m2, double low_hz)
{
	struct wave_source s = pair(model, m1, m2, 100, low_hz);
	return 100 * best(curve, &s) / 8;
}

static void curves(void **state)
{
	(void)state;
	assert_int_equal(COUNT(noise_cases), WAVE_CURVES);
	for (size_t i = 0; i < COUNT(noise_cases); i++) {
		const struct noise_case *c = &noise_cases[i];
		struct wave_station s = with_curve(c->curve);
		for (int k = 0; k < 10; k++)
			near_rel(noise_psd(&s.noise, c->f_hz[k]), c->s[k], 1e-12);
		assert_true(isinf(noise_psd(&s.noise, 0.99 * noise_curve_lowest_hz(s.noise.curve))));
	}
}

static void horizons(void **state)
{
	(void)state;
	static const double light[3][2] = {{1.4, 1.4}, {10, 1.4}, {10, 10}};
	static const double heavy[5][2] = {{1.4, 1.4}, {10, 10}, {30, 30}, {36, 29}, {60, 60}};
	for (size_t i = 0; i < COUNT(noise_cases); i++) {
		const struct noise_case *c = &noise_cases[i];
		for (int k = 0; k < 3; k++)
			near_rel(horizon(c->curve, "TaylorF2", light[k][0], light[k][1], c->low_hz), c->taylor[k],
			         1e-5);
		for (int k = 0; k < 5; k++)
			near_rel(horizon(c->curve, "IMRPhenomD", heavy[k][0], heavy[k][1], c->low_hz), c->merger[k],
			         1e-5);
		near_rel(c->taylor[0] / WAVE_RANGE_FACTOR, c->range_mpc, 1e-5);
		struct wave_source one = pair("TaylorF2", 1.4, 1.4, 100, c->low_hz);
		near_rel(best(c->curve, &one), c->snr_light, 1e-5);
		one = pair("IMRPhenomD", 30, 30, 1000, c->low_hz);
		near_rel(best(c->curve, &one), c->snr_heavy, 1e-5);
	}
}

/* Abadie et al. 2010 (CQG 27 173001): 445, 927, 2187 Mpc for design sensitivity from 10 Hz. */
static void published_horizons(void **state)
{
	(void)state;
	static const double masses[3][2] = {{1.4, 1.4}, {10, 1.4}, {10, 10}};
	for (int k = 0; k < 3; k++) {
		double got = horizon("advanced-broadband-b", "TaylorF2", masses[k][0], masses[k][1], 10);
		near_rel(got, reference_horizon_mpc[k], 1e-5);
		near_rel(got, published_horizon_mpc[k], 0.01);
	}
}

/* Projections w of a station over isotropic sky and orientation, sorted; a fixed sequence. */
static double *projections(size_t n)
{
	struct wave_station s = with_curve("advanced-broadband-b");
	struct wave_earth earth;
	struct wave_response r;
	double *w = QB_NEW_ARRAY(double, n);
	earth_at(ARRIVAL, 0, WAVE_SIMPLE, &earth);
	for (size_t k = 0; k < n; k++) {
		double u[4];
		for (int i = 0; i < 4; i++)
			u[i] = uniform_from_u64(splitmix64(splitmix64(k) + (uint64_t)i));
		double c = 2 * u[3] - 1, a = (1 + c * c) / 2;
		response_at(&s, &earth, 2 * WAVE_PI * u[0], asin(2 * u[1] - 1), WAVE_PI * u[2], &r);
		w[k] = sqrt(r.f_plus * r.f_plus * a * a + r.f_cross * r.f_cross * c * c);
	}
	return w;
}

static int ascending(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return (x > y) - (x < y);
}

static double share_above(const double *sorted, size_t n, double w)
{
	size_t lo = 0, hi = n;
	while (lo < hi) {
		size_t mid = (lo + hi) / 2;
		if (sorted[mid] > w)
			hi = mid;
		else
			lo = mid + 1;
	}
	return (double)(n - lo) / (double)n;
}

static void orientations(void **state)
{
	(void)state;
	const size_t n = 1000000;
	double *w = projections(n), square = 0, cube = 0;
	qsort(w, n, sizeof *w, ascending);
	for (size_t k = 0; k < n; k++) {
		square += w[k] * w[k] / (double)n;
		cube += w[k] * w[k] * w[k] / (double)n;
	}
	near_rel(square, mean_omega2, 3e-3);
	near_rel(cube, mean_omega3, 5e-3);
	near_rel(pow(cube, -1.0 / 3), range_factor, 2e-3);
	near_abs(WAVE_RANGE_FACTOR, range_factor, 1e-6);
	near_abs(range_factor, 2.26, 0.005); /* Finn & Chernoff 1993 (PRD 47 2198) */
	for (size_t i = 0; i < COUNT(orientation_cases); i++)
		near_abs(share_above(w, n, orientation_cases[i].omega), orientation_cases[i].greater, 0.0015);
	qb_free(w);
}

static const struct cosmology flat = {67.74, 0.3075};

/* Largest SNR of a pair with source-frame masses at redshift z. */
static double redshifted_snr(const char *curve, double m1, double m2, double low_hz, double z)
{
	struct wave_source s =
	    pair("IMRPhenomD", m1 * (1 + z), m2 * (1 + z), cosmology_luminosity_distance_mpc(&flat, z), low_hz);
	return best(curve, &s);
}

static void redshifted_horizons(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(redshifted_horizon_cases); i++) {
		const struct redshifted_horizon_case *c = &redshifted_horizon_cases[i];
		double lo = c->z / 2, hi = c->z * 1.5;
		for (int k = 0; k < 60; k++) {
			double mid = (lo + hi) / 2;
			if (redshifted_snr(c->curve, c->m1, c->m2, c->low_hz, mid) > 8)
				lo = mid;
			else
				hi = mid;
		}
		near_rel(lo, c->z, 1e-4);
		near_rel(cosmology_luminosity_distance_mpc(&flat, lo), c->luminosity_mpc, 1e-4);
	}
}

static void redshifted_ranges(void **state)
{
	(void)state;
	const size_t n = 400000;
	double *w = projections(n);
	qsort(w, n, sizeof *w, ascending);
	for (size_t i = 0; i < COUNT(redshifted_cases); i++) {
		const struct redshifted_case *c = &redshifted_cases[i];
		double volume = 0, step = c->m1 > 20 ? 0.005 : 0.0005;
		for (double z = step / 2;; z += step) {
			double share =
			    share_above(w, n, 8 / redshifted_snr("advanced-broadband-b", c->m1, c->m2, 20, z));
			if (share == 0)
				break;
			volume += cosmology_volume_mpc3_per_redshift(&flat, z) / (1 + z) * share * step;
		}
		near_rel(cbrt(3 * volume / (4 * WAVE_PI)), c->range_mpc, 0.005);
	}
	qb_free(w);
}

/* common practice, no source: ten times the sensitivity is a thousand times the volume */
static void ten_times_is_a_thousand(void **state)
{
	(void)state;
	struct wave_network one = {.n_stations = 1};
	struct wave_source s = pair("IMRPhenomD", 30, 30, 1000, 20), half;
	struct qb_error e = {0};
	struct reach near, far, again;
	const char better[] = "10 1e-24\n100 1e-24\n4000 1e-24\n", worse[] = "10 1e-23\n100 1e-23\n4000 1e-23\n";
	one.stations[0] = with_curve("advanced-broadband-b");
	assert_int_equal(noise_table_parse(worse, "worse", &one.stations[0].noise, &e), QB_OK);
	assert_int_equal(reach_of(&one, &s, 8, 20000, 5, &near, &e), QB_OK);
	noise_free(&one.stations[0].noise);
	assert_int_equal(noise_table_parse(better, "better", &one.stations[0].noise, &e), QB_OK);
	assert_int_equal(reach_of(&one, &s, 8, 20000, 5, &far, &e), QB_OK);
	near_rel(far.volume_mpc3, 1000 * near.volume_mpc3, 1e-9);
	near_rel(far.horizon_mpc[0], 10 * near.horizon_mpc[0], 1e-9);
	/* the volume of one station is that of a ball of its range */
	near_abs(far.volume_mpc3, 4 * WAVE_PI / 3 * pow(far.range_mpc[0], 3), 4 * far.volume_mpc3_standard_error);
	assert_true(far.volume_mpc3_standard_error < 0.02 * far.volume_mpc3);
	/* the same for a seed; the distance of the source does not matter; another seed is within the error */
	half = s;
	half.p[CB_DISTANCE] = 500;
	assert_int_equal(reach_of(&one, &half, 8, 20000, 5, &again, &e), QB_OK);
	near_rel(again.volume_mpc3, far.volume_mpc3, 1e-12);
	assert_int_equal(reach_of(&one, &s, 8, 20000, 6, &again, &e), QB_OK);
	assert_true(again.volume_mpc3 != far.volume_mpc3);
	near_abs(again.volume_mpc3, far.volume_mpc3, 6 * far.volume_mpc3_standard_error);
	noise_free(&one.stations[0].noise);
}

/* 36+29 solar masses at z = 0.09, 410 Mpc, face-on and overhead: peak of |h| about 2.0e-21. */
static void heavy_pair(void **state)
{
	(void)state;
	struct wave_source s = pair("IMRPhenomD", 36 * 1.09, 29 * 1.09, 410, 28);
	struct qb_error e = {0};
	const size_t n = 4 * 4096;
	double *p = QB_NEW_ARRAY(double, n), *c = QB_NEW_ARRAY(double, n), peak = 0, spin, mass, re, im;
	assert_int_equal(render_polarizations(&s, 4096, ARRIVAL - INT64_C(3000000000), n, p, c, &e), QB_OK);
	for (size_t k = 0; k < n; k++)
		peak = fmax(peak, hypot(p[k], c[k]));
	near_rel(peak, heavy_pair_peak, 0.01);
	near_rel(peak, 2.0e-21, 0.03);
	remnant_of(36.0 / 65, 29.0 / 65, 0, 0, &spin, &mass);
	near_abs(spin, heavy_pair_spin, 1e-9);
	near_rel(65 * (1 - mass), heavy_pair_radiated_msun, 1e-9);
	near_rel(65 * mass, heavy_pair_final_msun, 1e-9);
	ringdown_of(spin, &re, &im);
	near_rel(re / (2 * WAVE_PI * mass * 65 * 1.09 * WAVE_SUN_S), heavy_pair_ring_hz, 1e-6);
	qb_free(p);
	qb_free(c);
}

static void pendulum_and_force(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(pendulum_cases); i++) {
		const struct pendulum_case *c = &pendulum_cases[i];
		double complex x = actuator_compliance(c->mass_kg, c->pendulum_hz, c->quality, c->f_hz);
		double size = hypot(c->re, c->im);
		near_abs(creal(x), c->re, 1e-9 * size);
		near_abs(cimag(x), c->im, 1e-9 * size);
	}
	/* far above the pendulum a strain needs the force of a free mass: inverse times gains, one mirror pushed */
	for (size_t i = 0; i < COUNT(force_cases); i++) {
		const struct force_case *c = &force_cases[i];
		struct wave_station s = {.arm_length_m = c->length_m,
		                         .actuator = {.present = true,
		                                      .mass_kg = c->mass_kg,
		                                      .pendulum_hz = 1e-3,
		                                      .quality = 1e6,
		                                      .newton_per_volt = 2e-9,
		                                      .volt_per_count = 1.5e-4,
		                                      .sign = 1,
		                                      .rate_hz = 16384,
		                                      .band_hz = {10, 20, 2000, 3000}}};
		near_rel(c->displacement_m, c->strain * c->length_m, 1e-12);
		near_rel(cabs(actuator_inverse(&s, c->f_hz)) * c->strain * 2e-9 * 1.5e-4, c->force_n, 1e-9);
	}
}

static void distances(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(distance_cases); i++) {
		const struct distance_case *c = &distance_cases[i];
		const struct cosmology u = {c->h0, c->matter};
		near_rel(cosmology_luminosity_distance_mpc(&u, c->z), c->luminosity_mpc, 1e-8);
		near_rel(cosmology_comoving_distance_mpc(&u, c->z), c->comoving_mpc, 1e-8);
		near_rel(cosmology_volume_mpc3_per_redshift(&u, c->z), c->volume_mpc3_per_z, 1e-8);
		near_rel(cosmology_redshift(&u, c->luminosity_mpc), c->z, 1e-8);
	}
	for (size_t i = 0; i < COUNT(redshift_cases); i++) {
		const struct redshift_case *c = &redshift_cases[i];
		const struct cosmology u = {c->h0, c->matter};
		near_rel(cosmology_redshift(&u, c->luminosity_mpc), c->z, 1e-8);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(curves),
	    cmocka_unit_test(horizons),
	    cmocka_unit_test(published_horizons),
	    cmocka_unit_test(orientations),
	    cmocka_unit_test(redshifted_horizons),
	    cmocka_unit_test(redshifted_ranges),
	    cmocka_unit_test(ten_times_is_a_thousand),
	    cmocka_unit_test(heavy_pair),
	    cmocka_unit_test(pendulum_and_force),
	    cmocka_unit_test(distances),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
