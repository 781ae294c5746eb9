/* Rendering, actuation and reading of sources and noise, against themselves and against what must hold. */
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/wave/actuation.h"
#include "server/wave/fft.h"
#include "server/wave/network.h"
#include "server/wave/noise.h"
#include "server/wave/render.h"
#include "server/wave/snr.h"
#include "tests/near.h"

#include <stdio.h>
#include <string.h>

#define RATE  4096.0
#define N     (32 * 4096)
#define START (INT64_C(1487894418) * NS_PER_S)

static struct wave_network *fells(void)
{
	struct buf b = {0};
	struct wave_network *n = NULL;
	struct qb_error e = {0};
	assert_int_equal(file_read("deploy/demo/network.yaml", 1 << 20, &b, &e), QB_OK);
	assert_int_equal(network_parse((char *)b.data, b.len, "network.yaml", NULL, NULL, &n, &e), QB_OK);
	buf_free(&b);
	return n;
}

static struct wave_source pair(void)
{
	struct wave_source s;
	assert_int_equal(source_init(&s, "compact-binary", "IMRPhenomD", "test", NULL), QB_OK);
	s.p[CB_PRIMARY_MASS] = 36;
	s.p[CB_SECONDARY_MASS] = 29;
	s.p[CB_DISTANCE] = 410;
	s.p[CB_INCLINATION] = 0.5;
	s.right_ascension_rad = 4.2;
	s.declination_rad = 0.4;
	s.polarization_rad = 1;
	s.arrival_gps_ns = START + INT64_C(20123456789);
	return s;
}

static struct wave_source glint(void)
{
	struct wave_source s;
	assert_int_equal(source_init(&s, "sine-gaussian", NULL, "test", NULL), QB_OK);
	s.p[SG_FREQUENCY] = 153;
	s.p[SG_QUALITY] = 8.9;
	s.p[SG_HRSS] = 1e-21;
	s.p[SG_ELLIPTICITY] = 0.6;
	s.right_ascension_rad = 1.2;
	s.declination_rad = -0.7;
	s.arrival_gps_ns = START + 16 * NS_PER_S;
	return s;
}

/* rho^2 of a time series: 4 sum |X|^2 / S df above the source's lowest frequency. */
static double series_snr(const double *x, const struct wave_noise *noise, double low_hz)
{
	double *in = fft_real_new(N), sum = 0;
	double complex *out = fft_complex_new(N / 2 + 1);
	memcpy(in, x, N * sizeof *in);
	fft_forward(N, in, out);
	for (size_t k = 1; k < N / 2; k++) {
		double f = (double)k * RATE / N, a = cabs(out[k]) / RATE;
		if (f >= low_hz)
			sum += a * a / noise_psd(noise, f);
	}
	fft_free(in);
	fft_free(out);
	return sqrt(4 * sum * RATE / N);
}

static void series_have_the_snr_of_the_spectrum(void **state)
{
	struct wave_network *n = fells();
	double *x = fft_real_new(N), snr[WAVE_MAX_STATIONS], total;
	struct wave_source sources[2] = {pair(), glint()};
	(void)state;
	for (int k = 0; k < 2; k++) {
		assert_int_equal(snr_network(n, &sources[k], RATE / 2, snr, &total, NULL), QB_OK);
		double square = 0;
		for (int i = 0; i < n->n_stations; i++) {
			assert_int_equal(render_strain(&n->stations[i], &sources[k], RATE, START, N, true, x, NULL),
			                 QB_OK);
			near_rel(series_snr(x, &n->stations[i].noise, sources[k].lowest_frequency_hz), snr[i], 1e-3);
			square += snr[i] * snr[i];
		}
		near_rel(sqrt(square), total, 1e-12);
	}
	fft_free(x);
	wave_network_free(&n);
}

/* Arrivals between samples: rendering on a grid that begins a fraction of a sample later is the same signal there. */
static void arrivals_between_samples_are_exact(void **state)
{
	struct wave_network *n = fells();
	struct wave_source s = glint();
	double *x = fft_real_new(N), *y = fft_real_new(N), peak = 0, worst = 0;
	int64_t quarter = (int64_t)(1e9 / RATE / 4);
	(void)state;
	assert_int_equal(render_strain(&n->stations[0], &s, RATE * 4, START + 15 * NS_PER_S, N, true, x, NULL), QB_OK);
	for (int part = 0; part < 4; part++) {
		assert_int_equal(render_strain(&n->stations[0], &s, RATE, START + 15 * NS_PER_S + part * quarter, N / 4,
		                               true, y, NULL),
		                 QB_OK);
		for (size_t i = 0; i < N / 4; i++) {
			peak = fmax(peak, fabs(y[i]));
			worst = fmax(worst, fabs(y[i] - x[4 * i + (size_t)part]));
		}
	}
	/* a quarter of a sample is 61035.15625 ns and is rounded to whole ones: 2 pi 153 Hz x 0.47 ns */
	assert_true(peak > 1e-22);
	near_abs(worst / peak, 0, 2e-6);
	fft_free(x);
	fft_free(y);
	wave_network_free(&n);
}

/* What the actuator makes of a drive is the strain that was asked for, within the inverse's flat band. */
static void drives_give_back_the_strain(void **state)
{
	struct wave_network *n = fells();
	struct wave_station *t = &n->stations[1];
	struct wave_source s = glint();
	double *drive = fft_real_new(N), *got = fft_real_new(N), *want = fft_real_new(N), peak = 0, worst = 0;
	(void)state;
	s.p[SG_QUALITY] = 20; /* well inside the band */
	assert_int_equal(render_drive(t, &s, RATE, START, N, drive, NULL), QB_OK);
	assert_int_equal(render_strain(t, &s, RATE, START, N, true, want, NULL), QB_OK);
	assert_int_equal(actuator_apply(t, RATE, drive, N, got, NULL), QB_OK);
	for (size_t i = 0; i < N; i++) {
		peak = fmax(peak, fabs(want[i]));
		worst = fmax(worst, fabs(want[i] - got[i]));
	}
	near_abs(worst / peak, 0, 1e-6);
	t->actuator.sign = -t->actuator.sign;
	double *turned = fft_real_new(N);
	assert_int_equal(render_drive(t, &s, RATE, START, N, turned, NULL), QB_OK);
	for (size_t i = 0; i < N; i++)
		near_abs(turned[i], -drive[i], 0);
	fft_free(turned);
	fft_free(drive);
	fft_free(got);
	fft_free(want);
	wave_network_free(&n);
}

static void every_limit_is_reported(void **state)
{
	struct wave_network *n = fells();
	struct wave_actuator *a = &n->stations[0].actuator;
	struct actuator_limits limits = {.largest_drive = 0.8, .n_bands = 1, .excluded_bands_hz = {{495, 515}}};
	struct actuator_report r;
	double *x = fft_real_new(N), full = exp2(a->converter_bits - 1);
	(void)state;
	actuator_check(a, &limits, RATE, x, N, &r);
	assert_true(r.within && isinf(r.least_margin) && r.n == 4);
	for (size_t i = 0; i < N; i++)
		x[i] = 0.9 * full * sin(2 * 3.14159265358979 * 505 * (double)i / RATE);
	actuator_check(a, &limits, RATE, x, N, &r);
	assert_false(r.within);
	assert_string_equal(r.limit[0].name, "peak");
	assert_false(r.limit[0].within);
	near_rel(r.limit[0].margin, 0.8 / 0.9, 1e-3);
	near_rel(r.limit[3].value, 0.9 * full / sqrt(2), 1e-3); /* all of it lies in the excluded band */
	assert_false(r.limit[3].within);
	a->slew_counts_per_s = 1;
	actuator_check(a, &limits, RATE, x, N, &r);
	assert_false(r.limit[1].within);
	fft_free(x);
	wave_network_free(&n);
}

static void bad_sources_are_one_clear_line(void **state)
{
	static const char *const good =
	    "family: compact-binary\nprimary_mass_msun: 30\nsecondary_mass_msun: 20\ndistance_mpc: 500\n"
	    "right_ascension_rad: 1\ndeclination_rad: 0\narrival_gps: \"1488789012\"\n";
	static const struct {
		const char *from, *to, *where, *what;
		enum qb_status status;
	} bad[] = {
	    {"primary_mass_msun: 30", "primary_mass_msun: -3", "s.yaml:2: primary_mass_msun", "'-3'", QB_RANGE},
	    {"compact-binary", "whistle", "s.yaml:1: family", "whistle", QB_FORMAT},
	    {"distance_mpc: 500\n", "", "s.yaml:1", "'distance_mpc' is missing", QB_FORMAT},
	    {"declination_rad: 0", "declination_rad: 2", "s.yaml:6: declination_rad", "'2'", QB_RANGE},
	    {"declination_rad: 0", "declination: 0", "s.yaml:1", "'declination_rad' is missing", QB_FORMAT},
	    {"secondary_mass_msun: 20", "secondary_mass_msun: 1", "s.yaml:1", "mass ratio", QB_RANGE},
	    {"distance_mpc: 500", "distance_mpc: 500\nspin: 1", "s.yaml:5: spin", "unknown key", QB_FORMAT},
	    {"\"1488789012\"", "soon", "s.yaml:7: arrival_gps", "soon", QB_FORMAT},
	};
	struct wave_source s;
	(void)state;
	assert_int_equal(source_parse(good, strlen(good), "s.yaml", &s, NULL), QB_OK);
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		char text[600];
		const char *at = strstr(good, bad[i].from);
		struct qb_error e = {0};
		assert_non_null(at);
		snprintf(text, sizeof text, "%.*s%s%s", (int)(at - good), good, bad[i].to, at + strlen(bad[i].from));
		assert_int_equal(source_parse(text, strlen(text), "s.yaml", &s, &e), bad[i].status);
		if (strstr(e.where, bad[i].where) == NULL || strstr(e.what, bad[i].what) == NULL)
			fail_msg("case %zu: %s: %s", i, e.where, e.what);
	}
}

static void noise_tables_are_strict(void **state)
{
	struct wave_noise noise;
	struct qb_error e = {0};
	(void)state;
	assert_int_equal(noise_table_parse("# Hz, 1/sqrt(Hz)\n10 1e-22\n100, 1e-23\n1000 1e-22\n", "a.txt", &noise, &e),
	                 QB_OK);
	near_rel(noise_psd(&noise, 100), 1e-46, 1e-9);
	near_rel(noise_psd(&noise, sqrt(10.0 * 100)), 1e-45, 1e-9); /* straight in the logarithms */
	assert_true(isinf(noise_psd(&noise, 9)) && isinf(noise_psd(&noise, 1001)));
	noise_free(&noise);
	static const char *const bad[] = {"10 1e-22\n",     "10 1e-22\n9 1e-22\n", "10 -1\n20 1\n",
	                                  "10 1 2\n20 1\n", "ten one\n",           ""};
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		struct qb_error one = {0};
		assert_int_equal(noise_table_parse(bad[i], "a.txt", &noise, &one), QB_FORMAT);
		assert_non_null(strstr(one.where, "a.txt"));
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(series_have_the_snr_of_the_spectrum), cmocka_unit_test(arrivals_between_samples_are_exact),
	    cmocka_unit_test(drives_give_back_the_strain),         cmocka_unit_test(every_limit_is_reported),
	    cmocka_unit_test(bad_sources_are_one_clear_line),      cmocka_unit_test(noise_tables_are_strict),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
