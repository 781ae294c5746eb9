/* SNR: scaling, additivity, independence of the band's details; transforms and their cache under threads. */
#include "server/wave/snr.h"

#include <math.h>
#include <pthread.h>

#include "server/wave/fft.h"
#include "server/wave/noise.h"
#include "server/wave/reach.h"
#include "server/wave/spectrum.h"
#include "tests/unit/wave/wave_fixture.h"

static double network_snr(const struct wave_network *n, const struct wave_source *s, double highest)
{
	struct qb_error e = {0};
	double snr;
	assert_int_equal(snr_network(n, s, highest, NULL, &snr, &e), QB_OK);
	return snr;
}

static void loudness_scales(void **state)
{
	(void)state;
	struct wave_network *n = fixture_open();
	struct wave_source pair = fixture_source(fixture_pair), burst = fixture_source(fixture_burst);
	double a = network_snr(n, &pair, 8192), b = network_snr(n, &burst, 8192);
	assert_true(a > 10 && b > 1);
	pair.p[CB_DISTANCE] *= 2.5;
	burst.p[SG_HRSS] *= 2.5;
	near_rel(network_snr(n, &pair, 8192), a / 2.5, 1e-12); /* common practice, no source: SNR goes as 1/distance */
	near_rel(network_snr(n, &burst, 8192), b * 2.5, 1e-12);
	wave_network_free(&n);
}

static void a_narrow_band_has_less(void **state)
{
	(void)state;
	struct wave_network *n = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	double all = network_snr(n, &s, 8192), low = network_snr(n, &s, 60);
	assert_true(low < all);
	s.lowest_frequency_hz = 60;
	near_rel(hypot(low, network_snr(n, &s, 8192)), all, 1e-6); /* two halves of the band make the whole */
	s.lowest_frequency_hz = 1000;
	near_abs(network_snr(n, &s, 900), 0, 0);
	wave_network_free(&n);
}

static void best_is_an_upper_bound(void **state)
{
	(void)state;
	struct wave_network *n = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	struct qb_error e = {0};
	double best, snr[WAVE_MAX_STATIONS], total;
	assert_int_equal(snr_best(&n->stations[0], &s, 8192, &best, &e), QB_OK);
	for (int k = 0; k < 200; k++) {
		s.right_ascension_rad = fmod(k * 2.399963, 6.28318);
		s.declination_rad = asin(2 * (k + 0.5) / 200 - 1);
		s.p[CB_INCLINATION] = acos(1 - 2 * fmod(k * 0.618034, 1));
		s.polarization_rad = fmod(k * 0.7, 3.14);
		assert_int_equal(snr_network(n, &s, 8192, snr, &total, &e), QB_OK);
		assert_true(snr[0] <= best * (1 + 1e-9));
	}
	wave_network_free(&n);
}

/* White noise: rho^2 = 2 hrss^2 / S for a polarised burst at a station that sees it whole. */
static void white_noise_by_hand(void **state)
{
	(void)state;
	struct wave_network *n = fixture_open();
	struct wave_source s = fixture_source(fixture_burst);
	struct qb_error e = {0};
	double snr;
	s.p[SG_ELLIPTICITY] = 0;
	assert_int_equal(noise_table_parse("1 1e-23\n8000 1e-23\n", "white", &n->stations[0].noise, &e), QB_OK);
	assert_int_equal(snr_best(&n->stations[0], &s, 8000, &snr, &e), QB_OK);
	near_rel(snr, sqrt(2) * 1e-22 / 1e-23, 1e-6);
	wave_network_free(&n);
}

static void refusals(void **state)
{
	(void)state;
	struct wave_network *n = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	struct qb_error e = {0};
	double snr;
	s.p[CB_SECONDARY_MASS] = 50; /* above the primary */
	assert_int_equal(snr_network(n, &s, 8192, NULL, &snr, &e), QB_RANGE);
	memset(&e, 0, sizeof e);
	s = fixture_source(fixture_pair);
	s.p[CB_DISTANCE] = NAN;
	assert_int_equal(snr_network(n, &s, 8192, NULL, &snr, &e), QB_RANGE);
	assert_non_null(strstr(e.where, "distance_mpc"));
	memset(&e, 0, sizeof e);
	struct reach r;
	s = fixture_source(fixture_burst);
	assert_int_equal(reach_of(n, &s, 8, 1000, 1, &r, &e), QB_RANGE);
	wave_network_free(&n);
}

static void transform_pairs(void **state)
{
	(void)state;
	static const size_t lengths[] = {16, 1000, 4096};
	for (size_t l = 0; l < 3; l++) {
		size_t n = lengths[l];
		double *x = fft_real_new(n), *y = fft_real_new(n);
		double complex *f = fft_complex_new(n / 2 + 1), *z = fft_complex_new(n), *w = fft_complex_new(n);
		for (size_t k = 0; k < n; k++)
			y[k] = x[k] = sin(0.1 * (double)(k * k % 77)) + 0.2;
		fft_forward(n, x, f);
		double complex direct = 0;
		for (size_t k = 0; k < n; k++)
			direct += y[k] * cexp(-2 * M_PI * I * 3 * (double)k / (double)n);
		near_abs(cabs(f[3] - direct), 0, 1e-9 * (double)n);
		/* a spectrum of positive frequencies alone gives the analytic signal, whose real part is the series */
		for (size_t k = 0; k <= n / 2; k++)
			z[k] = (k == 0 || 2 * k == n ? 1 : 2) * f[k];
		fft_inverse_complex(n, z, w);
		fft_inverse(n, f, x);
		for (size_t k = 0; k < n; k++) {
			near_abs(x[k] / (double)n, y[k], 1e-12);
			near_abs(creal(w[k]) / (double)n, y[k], 1e-12);
		}
		fft_free(x);
		fft_free(y);
		fft_free(f);
		fft_free(z);
		fft_free(w);
	}
	assert_int_equal(fft_length(1), 16);
	assert_int_equal(fft_length(4097), 8192);
}

static void *transforms(void *arg)
{
	double *sum = arg;
	for (size_t n = 64; n < 64 + 200; n += 2) { /* more lengths than the cache holds */
		double *x = fft_real_new(n);
		double complex *f = fft_complex_new(n / 2 + 1);
		for (size_t k = 0; k < n; k++)
			x[k] = (double)(k % 7);
		fft_forward(n, x, f);
		fft_inverse(n, f, x);
		*sum += x[5] / (double)n;
		fft_free(x);
		fft_free(f);
	}
	return NULL;
}

static void plans_are_shared_by_threads(void **state)
{
	(void)state;
	pthread_t id[4];
	double sum[5] = {0};
	transforms(&sum[4]);
	for (int i = 0; i < 4; i++)
		assert_int_equal(pthread_create(&id[i], NULL, transforms, &sum[i]), 0);
	for (int i = 0; i < 4; i++) {
		assert_int_equal(pthread_join(id[i], NULL), 0);
		assert_true(sum[i] == sum[4]); /* to the last bit */
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(loudness_scales),
	    cmocka_unit_test(a_narrow_band_has_less),
	    cmocka_unit_test(best_is_an_upper_bound),
	    cmocka_unit_test(white_noise_by_hand),
	    cmocka_unit_test(refusals),
	    cmocka_unit_test(transform_pairs),
	    cmocka_unit_test(plans_are_shared_by_threads),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
