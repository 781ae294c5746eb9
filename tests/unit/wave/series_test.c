/* Rendering: time series against the frequency domain, exact arrivals, extents, grids. */
#include "server/wave/render.h"

#include <math.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/wave/fft.h"
#include "server/wave/noise.h"
#include "server/wave/response.h"
#include "server/wave/snr.h"
#include "server/wave/spectrum.h"
#include "tests/unit/wave/wave_fixture.h"

#define RATE 4096.0

static double *render(const struct wave_station *st, const struct wave_source *s, int64_t start, size_t n, double rate)
{
	struct qb_error e = {0};
	double *h = fft_real_new(n);
	assert_int_equal(render_strain(st, s, rate, start, n, true, h, &e), QB_OK);
	return h;
}

/* rho^2 = 4 sum |h(f)|^2 / S df of samples, from low to high. */
static double snr_of(const double *h, size_t n, double rate, const struct wave_noise *noise, double low)
{
	double *x = fft_real_new(n), sum = 0;
	double complex *f = fft_complex_new(n / 2 + 1);
	memcpy(x, h, n * sizeof *x);
	fft_forward(n, x, f);
	for (size_t k = 1; k < n / 2; k++) {
		double hz = (double)k * rate / (double)n, a = cabs(f[k]) / rate;
		if (hz >= low)
			sum += 4 * a * a / noise_psd(noise, hz) * rate / (double)n;
	}
	fft_free(x);
	fft_free(f);
	return sqrt(sum);
}

static void series_has_the_snr_of_the_spectrum(void **state)
{
	(void)state;
	static const char *const texts[] = {fixture_pair, fixture_burst};
	struct wave_network *net = fixture_open();
	const size_t n = (size_t)16 * 4096;
	for (int t = 0; t < 2; t++) {
		struct wave_source s = fixture_source(texts[t]);
		double snr[WAVE_MAX_STATIONS], total, squares = 0;
		struct qb_error e = {0};
		assert_int_equal(snr_network(net, &s, RATE / 2, snr, &total, &e), QB_OK);
		for (int i = 0; i < net->n_stations; i++) {
			double *h = render(&net->stations[i], &s, s.arrival_gps_ns - 10 * NS_PER_S, n, RATE);
			near_rel(snr_of(h, n, RATE, &net->stations[i].noise, 20), snr[i], 1e-3);
			squares += snr[i] * snr[i];
			fft_free(h);
		}
		near_rel(total, sqrt(squares), 1e-12);
	}
	wave_network_free(&net);
}

static void inspiral_series_has_the_snr_of_the_spectrum(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	struct qb_error e = {0};
	double snr[WAVE_MAX_STATIONS], total;
	const size_t n = (size_t)1 << 19; /* 128 s */
	s.model = WAVE_TAYLORF2;
	s.p[CB_PRIMARY_MASS] = 1.6;
	s.p[CB_SECONDARY_MASS] = 1.3;
	s.p[CB_PRIMARY_TIDE] = 300;
	s.lowest_frequency_hz = 40;
	assert_int_equal(snr_network(net, &s, RATE / 2, snr, &total, &e), QB_OK);
	double *h = render(&net->stations[0], &s, s.arrival_gps_ns - 120 * NS_PER_S, n, RATE);
	near_rel(snr_of(h, n, RATE, &net->stations[0].noise, 40), snr[0], 1e-3);
	fft_free(h);
	wave_network_free(&net);
}

/* A signal that arrives later by part of a sample is the same signal with a phase e^(-2 pi i f t). */
static void arrival_to_parts_of_a_sample(void **state)
{
	(void)state;
	static const int64_t later_ns[] = {1, 1000, 61035, 122070, 200000, 244141};
	struct wave_network *net = fixture_open();
	const size_t n = 8192;
	struct wave_source s = fixture_source(fixture_burst);
	const int64_t start = s.arrival_gps_ns - NS_PER_S;
	double *a = render(&net->stations[0], &s, start, n, RATE);
	double complex *fa = fft_complex_new(n / 2 + 1), *fb = fft_complex_new(n / 2 + 1);
	fft_forward(n, a, fa);
	for (size_t i = 0; i < sizeof later_ns / sizeof later_ns[0]; i++) {
		struct wave_source t = s;
		t.arrival_gps_ns += later_ns[i];
		double *b = render(&net->stations[0], &t, start, n, RATE), peak = 0;
		fft_forward(n, b, fb);
		for (size_t k = 0; k <= n / 2; k++)
			peak = fmax(peak, cabs(fa[k]));
		for (size_t k = 0; k <= n / 2; k++) {
			double hz = (double)k * RATE / (double)n;
			double complex want = fa[k] * cexp(-2 * M_PI * I * hz * (double)later_ns[i] / 1e9);
			near_abs(cabs(fb[k] - want), 0, 2e-7 * peak); /* the Earth also turns a little */
		}
		fft_free(b);
	}
	fft_free(a);
	fft_free(fa);
	fft_free(fb);
	wave_network_free(&net);
}

static void burst_peaks_at_its_arrival(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	struct wave_source s = fixture_source(fixture_burst);
	const size_t n = 16384;
	s.p[SG_ELLIPTICITY] = 0;
	for (int i = 0; i < net->n_stations; i++) {
		const struct wave_station *st = &net->stations[i];
		int64_t start = s.arrival_gps_ns - 500000000, arrival = wave_arrival_gps_ns(st, &s);
		double *h = render(st, &s, start, n, 16384), top = 0, moment = 0, power = 0;
		for (size_t k = 0; k < n; k++) {
			top = fmax(top, fabs(h[k]));
			moment += (double)k / 16384 * h[k] * h[k];
			power += h[k] * h[k];
		}
		/* centre of power of a symmetric burst: its arrival, but for 5e-6 s because of the arms' own delay */
		near_abs(moment / power, (double)(arrival - start) / 1e9, 2e-5);
		assert_true(top > 0);
		fft_free(h);
	}
	wave_network_free(&net);
}

/* The same samples whatever part of the signal the caller asks for. */
static void windows_agree(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	const int64_t start = (s.arrival_gps_ns / NS_PER_S - 6) * NS_PER_S;
	const size_t n = (size_t)10 * 4096, from = (size_t)5 * 4096, m = 8192;
	double *all = render(&net->stations[0], &s, start, n, RATE), peak = 0;
	double *part = render(&net->stations[0], &s, start + 5 * NS_PER_S, m, RATE);
	double *none = render(&net->stations[0], &s, start + 100 * NS_PER_S, m, RATE);
	for (size_t k = 0; k < n; k++)
		peak = fmax(peak, fabs(all[k]));
	assert_true(peak > 1e-23);
	for (size_t k = 0; k < m; k++) {
		near_abs(part[k], all[from + k], 1e-9 * peak);
		assert_true(none[k] == 0);
	}
	fft_free(all);
	fft_free(part);
	fft_free(none);
	wave_network_free(&net);
}

/* Nothing of weight lies outside the stated extent, and the series begins and ends quietly. */
static void extent_holds_the_signal(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	static const double masses[][2] = {{36, 29}, {80, 60}, {10, 8}, {45, 5}};
	for (size_t i = 0; i < sizeof masses / sizeof masses[0]; i++) {
		double before, after, peak = 0;
		s.p[CB_PRIMARY_MASS] = masses[i][0];
		s.p[CB_SECONDARY_MASS] = masses[i][1];
		wave_extent(&s, &before, &after);
		int64_t start = wave_arrival_gps_ns(&net->stations[0], &s) - (int64_t)(before * 1e9);
		size_t n = (size_t)ceil((before + after) * RATE);
		double *h = render(&net->stations[0], &s, start, n, RATE);
		for (size_t k = 0; k < n; k++)
			peak = fmax(peak, fabs(h[k]));
		for (size_t k = 0; k < 20; k++) {
			near_abs(h[k], 0, 1e-3 * peak);
			near_abs(h[n - 1 - k], 0, 1e-3 * peak);
		}
		fft_free(h);
	}
	wave_network_free(&net);
}

static void polarisations_combine_to_strain(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	struct wave_earth earth;
	struct wave_response r;
	struct qb_error e = {0};
	const size_t n = (size_t)8 * 4096;
	const int64_t start = s.arrival_gps_ns - 6 * NS_PER_S;
	double *plus = QB_NEW_ARRAY(double, n), *cross = QB_NEW_ARRAY(double, n), *h = QB_NEW_ARRAY(double, n),
	       peak = 0;
	earth_at(s.arrival_gps_ns, 0, WAVE_PRECISE, &earth);
	response_at(&net->stations[1], &earth, s.right_ascension_rad, s.declination_rad, s.polarization_rad, &r);
	assert_int_equal(render_polarizations(&s, RATE, start, n, plus, cross, &e), QB_OK);
	/* short arms, on a grid that is late by the station's delay */
	assert_int_equal(
	    render_strain(&net->stations[1], &s, RATE, start + (int64_t)llround(r.delay_s * 1e9), n, false, h, &e),
	    QB_OK);
	for (size_t k = 0; k < n; k++)
		peak = fmax(peak, hypot(plus[k], cross[k]));
	for (size_t k = 0; k < n; k++)
		near_abs(h[k], r.f_plus * plus[k] + r.f_cross * cross[k], 1e-5 * peak);
	qb_free(plus);
	qb_free(cross);
	qb_free(h);
	wave_network_free(&net);
}

static void too_long_is_refused(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	struct wave_source s = fixture_source(fixture_pair);
	struct qb_error e = {0};
	double x[4];
	s.p[CB_PRIMARY_MASS] = s.p[CB_SECONDARY_MASS] = 1;
	s.lowest_frequency_hz = 1;
	assert_int_equal(render_strain(&net->stations[0], &s, 16384, s.arrival_gps_ns, 4, true, x, &e), QB_RANGE);
	memset(&e, 0, sizeof e);
	s = fixture_source(fixture_pair);
	assert_int_equal(render_strain(&net->stations[0], &s, 0, s.arrival_gps_ns, 4, true, x, &e), QB_RANGE);
	memset(&e, 0, sizeof e);
	assert_int_equal(render_drive(&net->stations[1], &s, 4096, s.arrival_gps_ns, 4, x, &e), QB_RANGE);
	assert_non_null(strstr(e.what, "no actuator"));
	wave_network_free(&net);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(series_has_the_snr_of_the_spectrum),
	    cmocka_unit_test(inspiral_series_has_the_snr_of_the_spectrum),
	    cmocka_unit_test(arrival_to_parts_of_a_sample),
	    cmocka_unit_test(burst_peaks_at_its_arrival),
	    cmocka_unit_test(windows_agree),
	    cmocka_unit_test(extent_holds_the_signal),
	    cmocka_unit_test(polarisations_combine_to_strain),
	    cmocka_unit_test(too_long_is_refused),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
