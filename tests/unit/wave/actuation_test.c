/* The actuator: a drive through the forward transfer gives the strain back; limits and their margins; signs. */
#include "server/wave/actuation.h"

#include <math.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/wave/fft.h"
#include "server/wave/render.h"
#include "tests/unit/wave/wave_fixture.h"

#define RATE 4096.0

static const struct actuator_limits usual = {.largest_drive = 0.8};

static void forward_undoes_the_drive_in_band(void **state)
{
	(void)state;
	static const char *const texts[] = {fixture_pair, fixture_burst};
	struct wave_network *net = fixture_open();
	struct qb_error e = {0};
	const size_t n = (size_t)1 << 16;
	for (int t = 0; t < 2; t++) {
		struct wave_source s = fixture_source(texts[t]);
		int64_t start = s.arrival_gps_ns - 10 * NS_PER_S;
		double *counts = fft_real_new(n), *want = fft_real_new(n), *got = fft_real_new(n), error = 0, size = 0;
		double complex *a = fft_complex_new(n / 2 + 1), *b = fft_complex_new(n / 2 + 1);
		net->stations[0].actuator.sign = t == 0 ? 1 : -1;
		assert_int_equal(render_drive(&net->stations[0], &s, RATE, start, n, counts, &e), QB_OK);
		assert_int_equal(render_strain(&net->stations[0], &s, RATE, start, n, true, want, &e), QB_OK);
		assert_int_equal(actuator_apply(&net->stations[0], RATE, counts, n, got, &e), QB_OK);
		fft_forward(n, want, a);
		fft_forward(n, got, b);
		for (size_t k = 0; k <= n / 2; k++) {
			double hz = (double)k * RATE / (double)n;
			if (hz >= 20 && hz <= 1400) {
				error +=
				    creal(b[k] - a[k]) * creal(b[k] - a[k]) + cimag(b[k] - a[k]) * cimag(b[k] - a[k]);
				size += creal(a[k]) * creal(a[k]) + cimag(a[k]) * cimag(a[k]);
			}
		}
		/* a pair's strain series is cut at its extent, at 1e-5 of its peak; its drive goes on for the tails */
		near_abs(sqrt(error / size), 0, t == 0 ? 3e-5 : 1e-6);
		fft_free(counts);
		fft_free(want);
		fft_free(got);
		fft_free(a);
		fft_free(b);
	}
	wave_network_free(&net);
}

static void inverse_is_inverse(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	const struct wave_station *s = &net->stations[0];
	for (double f = 18; f <= 1400; f *= 1.1) {
		double complex one = actuator_inverse(s, f) * actuator_forward(s, f);
		near_abs(creal(one), 1, 1e-12);
		near_abs(cimag(one), 0, 1e-12);
	}
	assert_true(actuator_inverse(s, 11.9) == 0);
	assert_true(actuator_inverse(s, 1700.1) == 0);
	assert_true(cabs(actuator_inverse(s, 15)) > 0);
	near_rel(actuator_tail_s(&s->actuator), 10.0 / 6, 1e-12);
	wave_network_free(&net);
}

/* The kernel of the inverse is over when its stated tail is: below 1e-6 of its peak. */
static void kernel_ends_with_its_tail(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	const struct wave_station *s = &net->stations[0];
	const size_t n = (size_t)1 << 16;
	double *x = fft_real_new(n), peak = 0, beyond = 0, tail = actuator_tail_s(&s->actuator);
	double complex *f = fft_complex_new(n / 2 + 1);
	for (size_t k = 0; k < n / 2; k++)
		f[k] = actuator_inverse(s, (double)k * RATE / (double)n);
	fft_inverse(n, f, x);
	for (size_t k = 0; k < n; k++) {
		double t = (double)(k < n / 2 ? k : n - k) / RATE;
		peak = fmax(peak, fabs(x[k]));
		if (t > tail)
			beyond = fmax(beyond, fabs(x[k]));
	}
	assert_true(beyond < 1e-6 * peak);
	fft_free(x);
	fft_free(f);
	wave_network_free(&net);
}

static const struct actuator_limit *limit(const struct actuator_report *r, const char *name)
{
	for (int i = 0; i < r->n; i++) {
		if (strcmp(r->limit[i].name, name) == 0)
			return &r->limit[i];
	}
	fail_msg("no limit '%s'", name);
	return NULL;
}

static void limits_are_reported(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	const struct wave_actuator *a = &net->stations[0].actuator;
	const size_t n = 4096;
	double *x = QB_NEW_ARRAY(double, n);
	struct actuator_report r;
	/* silence: everything within, margins infinite */
	actuator_check(a, &usual, RATE, x, n, &r);
	assert_true(r.within && isinf(r.least_margin) && r.peak_counts == 0);
	/* 100 Hz, amplitude 1000 under a slow envelope, quiet at both ends */
	for (size_t k = 0; k < n; k++) {
		double w = sin(M_PI * (double)k / (double)(n - 1));
		x[k] = 1000 * w * w * sin(2 * M_PI * 100 * (double)k / RATE);
	}
	actuator_check(a, &usual, RATE, x, n, &r);
	assert_true(r.within);
	near_rel(r.peak_counts, 1000.0, 1e-3);
	near_rel(r.rms_counts, 1000 * sqrt(3.0 / 16), 1e-3);
	near_rel(r.slew_counts_per_s, 1000 * 2 * M_PI * 100, 1e-2);
	near_rel(limit(&r, "peak")->limit, 0.8 * 131072, 1e-12);
	near_rel(limit(&r, "peak")->margin, 0.8 * 131072 / r.peak_counts, 1e-12);
	/* beyond the peak */
	x[2000] = 110000;
	actuator_check(a, &usual, RATE, x, n, &r);
	assert_false(r.within);
	assert_false(limit(&r, "peak")->within);
	assert_true(limit(&r, "peak")->margin < 1 && r.least_margin < 1);
	/* and that step is also too fast: 110000 counts in a sample */
	assert_false(limit(&r, "slew")->within);
	/* not quiet at the end */
	x[2000] = 0;
	x[n - 1] = 5;
	actuator_check(a, &usual, RATE, x, n, &r);
	assert_false(r.within);
	assert_false(limit(&r, "edges")->within);
	assert_true(limit(&r, "peak")->within);
	qb_free(x);
	wave_network_free(&net);
}

static void excluded_bands_are_reported(void **state)
{
	(void)state;
	struct wave_network *net = fixture_open();
	const struct wave_actuator *a = &net->stations[0].actuator;
	const struct actuator_limits bands = {
	    .largest_drive = 0.8, .n_bands = 2, .excluded_bands_hz = {{495, 515}, {995, 1030}}};
	const size_t n = 8192;
	double *x = QB_NEW_ARRAY(double, n);
	struct actuator_report r;
	for (size_t k = 0; k < n; k++) {
		double w = sin(M_PI * (double)k / (double)(n - 1));
		x[k] = 20 * w * w * sin(2 * M_PI * 505 * (double)k / RATE);
	}
	actuator_check(a, &bands, RATE, x, n, &r);
	assert_false(r.within);
	assert_false(limit(&r, "band 495-515 Hz")->within);
	assert_true(limit(&r, "band 995-1030 Hz")->within);
	/* all of the drive's power is there */
	near_rel(limit(&r, "band 495-515 Hz")->value, r.rms_counts, 1e-3);
	qb_free(x);
	wave_network_free(&net);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(forward_undoes_the_drive_in_band), cmocka_unit_test(inverse_is_inverse),
	    cmocka_unit_test(kernel_ends_with_its_tail),        cmocka_unit_test(limits_are_reported),
	    cmocka_unit_test(excluded_bands_are_reported),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
