/*
 * Stations, sidereal time, antenna functions, delays and finite arms, held to an independent implementation, to printed
 * survey values and to Astropy's sidereal time.
 */
#include <complex.h>

#include "server/base/clock.h"
#include "server/wave/constants.h"
#include "server/wave/response.h"
#include "tests/near.h"
#include "tests/vectors/wave_response.h"

#define COUNT(a) (sizeof(a) / sizeof(a)[0])
#define RAD      (WAVE_PI / 180)

static struct wave_station station(char letter)
{
	const struct station_case *c = &station_cases[letter - 'A'];
	struct wave_station s = {.latitude_rad = c->latitude_deg * RAD,
	                         .longitude_rad = c->longitude_deg * RAD,
	                         .height_m = c->height_m,
	                         .x_arm_azimuth_rad = c->x_azimuth_deg * RAD,
	                         .y_arm_azimuth_rad = c->y_azimuth_deg * RAD,
	                         .x_arm_tilt_rad = c->x_tilt,
	                         .y_arm_tilt_rad = c->y_tilt,
	                         .arm_length_m = c->length_m};
	station_survey(&s);
	return s;
}

static void survey(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(station_cases); i++) {
		const struct station_case *c = &station_cases[i];
		struct wave_station s = station((char)('A' + i));
		for (int k = 0; k < 3; k++) {
			near_abs(s.position_m[k], c->r[k], 1e-8);
			near_abs(s.x_arm[k], c->ux[k], 1e-14);
			near_abs(s.y_arm[k], c->uy[k], 1e-14);
			near_abs(s.position_m[k], c->published_r[k], c->tolerance_r);
			near_abs(s.x_arm[k], c->published_ux[k], c->tolerance_u);
			near_abs(s.y_arm[k], c->published_uy[k], c->tolerance_u);
		}
	}
}

static void light_times(void **state)
{
	(void)state;
	struct wave_station a = station('A'), b = station('B'), c = station('C');
	near_rel(1e3 * station_light_time_s(&a, &b), light_time_ab_ms, 1e-10);
	near_rel(1e3 * station_light_time_s(&a, &c), light_time_ac_ms, 1e-10);
	near_rel(1e3 * station_light_time_s(&b, &c), light_time_bc_ms, 1e-10);
	near_abs(1e3 * station_light_time_s(&a, &b), 10.01, 0.005); /* published */
}

static void sidereal_time(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(sidereal_cases); i++) {
		const struct sidereal_case *c = &sidereal_cases[i];
		assert_int_equal(clock_leap_seconds(c->gps_ns), c->leap);
		near_abs(earth_sidereal_rad(c->gps_ns, 0), c->gmst06, 1e-9);
	}
}

static void antenna_simple_and_precise(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(antenna_cases); i++) {
		const struct antenna_case *c = &antenna_cases[i];
		struct wave_station s = station(c->station);
		struct wave_earth earth;
		struct wave_response r;
		earth_at(c->gps_ns, 0, WAVE_SIMPLE, &earth);
		near_abs(earth.sidereal_rad, c->gmst, 1e-9);
		response_at(&s, &earth, c->ra, c->dec, c->psi, &r);
		near_abs(r.f_plus, c->f_plus, 1e-9);
		near_abs(r.f_cross, c->f_cross, 1e-9);
		near_abs(r.delay_s, c->delay_s, 1e-10);
		for (int k = 0; k < 3; k++) {
			/* the reference keeps the common delay of one arm; response_finite takes it out */
			double complex fp, fc, common = cexp(-2 * I * WAVE_PI * c->f_hz[k] * r.travel_s);
			response_finite(&r, c->f_hz[k], &fp, &fc);
			near_abs(creal(fp * common), c->finite_plus[k][0], 1e-9);
			near_abs(cimag(fp * common), c->finite_plus[k][1], 1e-9);
			near_abs(creal(fc * common), c->finite_cross[k][0], 1e-9);
			near_abs(cimag(fc * common), c->finite_cross[k][1], 1e-9);
		}
		earth_at(c->gps_ns, 0, WAVE_PRECISE, &earth);
		response_at(&s, &earth, c->ra, c->dec, c->psi, &r);
		near_abs(r.f_plus, c->precise_plus, 1e-8);
		near_abs(r.f_cross, c->precise_cross, 1e-8);
		near_abs(r.delay_s, c->precise_delay_s, 1e-10);
	}
}

static void one_arm(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(arm_cases); i++) {
		const struct arm_case *c = &arm_cases[i];
		double complex d = arm_transfer(c->f_hz, c->mu, c->length_m / WAVE_C_M_PER_S);
		near_abs(creal(d), c->re, 1e-12);
		near_abs(cimag(d), c->im, 1e-12);
	}
}

/* Sky averages known in closed form: <F+^2> = <Fx^2> = 1/5, <F+ Fx> = 0, and never more than 1. */
static void sky_averages(void **state)
{
	(void)state;
	struct wave_station s = {.arm_length_m = 4000,
	                         .latitude_rad = 0.9,
	                         .longitude_rad = -0.1,
	                         .x_arm_azimuth_rad = 0.6,
	                         .y_arm_azimuth_rad = 0.6 + WAVE_PI / 2};
	struct wave_earth earth;
	struct wave_response r;
	double pp = 0, cc = 0, pc = 0, largest = 0;
	const int n = 64;
	station_survey(&s);
	earth_at(INT64_C(1488789012000000000), 0, WAVE_PRECISE, &earth);
	for (int i = 0; i < n * n * 4; i++) {
		/* the mid-point rule in sin(dec) converges as 1/n^2; right ascension and four polarisations are exact
		 */
		double dec = asin(-1 + (2 * (i % n) + 1) / (double)n), ra = 2 * WAVE_PI * (i / n % n) / n;
		response_at(&s, &earth, ra, dec, WAVE_PI / 8 * (i / n / n), &r);
		pp += r.f_plus * r.f_plus / (4 * n * n);
		cc += r.f_cross * r.f_cross / (4 * n * n);
		pc += r.f_plus * r.f_cross / (4 * n * n);
		largest = fmax(largest, hypot(r.f_plus, r.f_cross));
	}
	near_abs(pp, 0.2, 1e-4);
	near_abs(cc, 0.2, 1e-4);
	near_abs(pc, 0, 1e-4);
	assert_true(largest <= 1 && largest > 0.97);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(survey),        cmocka_unit_test(light_times),
	    cmocka_unit_test(sidereal_time), cmocka_unit_test(antenna_simple_and_precise),
	    cmocka_unit_test(one_arm),       cmocka_unit_test(sky_averages),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
