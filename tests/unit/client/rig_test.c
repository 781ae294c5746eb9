/*
 * The simulated instrument: its noise has the station's spectrum and no joints, the same seed gives the same bytes, and
 * a drive comes out as the strain that it was made for, at any rate and on any grid.
 */
#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "client/cli/npy.h"
#include "client/cli/rig.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/wave/fft.h"
#include "server/wave/noise.h"
#include "server/wave/render.h"
#include "tests/unit/wave/wave_fixture.h"

#define START INT64_C(1488789000000000000)

static char dir[64];
static struct wave_network *network;

static int fresh(void **state)
{
	(void)state;
	snprintf(dir, sizeof dir, "/tmp/rig-XXXXXX");
	network = fixture_open();
	return mkdtemp(dir) == NULL;
}

static void empty(const char *path)
{
	DIR *d = opendir(path);
	struct dirent *entry;
	assert_non_null(d);
	while ((entry = readdir(d)) != NULL) {
		char *file = text_printf("%s/%s", path, entry->d_name);
		if (strcmp(entry->d_name, ".") != 0 && strcmp(entry->d_name, "..") != 0 && unlink(file) != 0) {
			empty(file);
			assert_int_equal(rmdir(file), 0);
		}
		qb_free(file);
	}
	closedir(d);
}

static int drop(void **state)
{
	(void)state;
	wave_network_free(&network);
	empty(dir);
	return rmdir(dir);
}

static struct rig_run run_of(double seconds, double rate_hz, uint64_t seed, bool noise)
{
	return (struct rig_run){
	    .start_gps_ns = START, .seconds = seconds, .rate_hz = rate_hz, .seed = seed, .noise = noise};
}

/* Records station i and maps what was written. */
static struct npy_in record(int i, const struct rig_run *run, const char *drives, int *slots)
{
	struct npy_in in = {0};
	struct qb_error e = {0};
	struct npy_side side = {.unit = "strain"};
	char *path = text_printf("%s/out.npy", dir);
	assert_int_equal(rig_station(&network->stations[i], run, drives, path, slots, &e), QB_OK);
	assert_int_equal(npy_side_read(path, &side, &e), QB_OK);
	assert_int_equal(side.start_gps_ns, run->start_gps_ns);
	near_abs(side.rate_hz, run->rate_hz, 0);
	assert_int_equal(npy_map(path, &in, &e), QB_OK);
	assert_int_equal(in.n, (size_t)llround(run->seconds * run->rate_hz));
	qb_free(path);
	return in;
}

/* ---- noise ---- */

/* Mean of the measured spectrum over the curve in a band: Hann segments, half overlapped, one-sided. */
static double level(const struct npy_in *in, double rate_hz, const struct wave_noise *noise, double from_hz,
                    double to_hz)
{
	size_t n = (size_t)(4 * rate_hz), bins = 0;
	double *x = fft_real_new(n), sum = 0;
	double complex *y = fft_complex_new(n / 2 + 1);
	for (size_t at = 0; at + n <= in->n; at += n / 2) {
		for (size_t i = 0; i < n; i++)
			x[i] = in->values[at + i] * (0.5 - 0.5 * cos(2 * M_PI * (double)i / (double)n));
		fft_forward(n, x, y);
		for (size_t k = (size_t)(from_hz * 4); k < (size_t)(to_hz * 4); k++, bins++)
			sum += 2 * creal(y[k] * conj(y[k])) / (rate_hz * 0.375 * (double)n) /
			       noise_psd(noise, (double)k / 4);
	}
	fft_free(x);
	fft_free(y);
	return sum / (double)bins;
}

static void noise_has_the_spectrum_of_the_station(void **state)
{
	(void)state;
	static const double bands_hz[][2] = {{15, 30}, {30, 60}, {60, 150}, {150, 500}, {500, 1900}};
	const struct rig_run run = run_of(256, 4096, 7, true);
	struct npy_in in = record(0, &run, NULL, NULL);
	for (size_t b = 0; b < sizeof bands_hz / sizeof bands_hz[0]; b++)
		near_abs(level(&in, run.rate_hz, &network->stations[0].noise, bands_hz[b][0], bands_hz[b][1]), 1, 0.05);
	npy_unmap(&in);
}

/* Segments join every 4 s: the power of the second difference, nearly white, must not depend on the place between. */
static void joints_can_not_be_seen(void **state)
{
	(void)state;
	enum { PHASES = 8, HOP = 4 * 4096 };
	double power[PHASES] = {0}, mean = 0;
	const struct rig_run run = run_of(256, 4096, 3, true);
	struct npy_in in = record(0, &run, NULL, NULL);
	for (size_t i = 1; i + 1 < in.n; i++) {
		double d = in.values[i - 1] - 2 * in.values[i] + in.values[i + 1];
		power[i % HOP * PHASES / HOP] += d * d;
	}
	for (int p = 0; p < PHASES; p++)
		mean += power[p] / PHASES;
	assert_true(mean > 0);
	for (int p = 0; p < PHASES; p++)
		near_rel(power[p], mean, 0.05);
	npy_unmap(&in);
}

static double correlation(const double *a, const double *b, size_t n)
{
	double ab = 0, aa = 0, bb = 0;
	for (size_t i = 0; i < n; i++) {
		ab += a[i] * b[i];
		aa += a[i] * a[i];
		bb += b[i] * b[i];
	}
	return ab / sqrt(aa * bb);
}

static void same_seed_same_bytes(void **state)
{
	(void)state;
	const struct rig_run run = run_of(32, 4096, 5, true), longer = run_of(50, 4096, 5, true),
	                     other = run_of(32, 4096, 6, true);
	struct npy_in a = record(0, &run, NULL, NULL), b = record(0, &run, NULL, NULL),
	              c = record(0, &longer, NULL, NULL), d = record(0, &other, NULL, NULL),
	              f = record(1, &run, NULL, NULL);
	assert_memory_equal(a.values, b.values, a.n * sizeof *a.values);
	assert_memory_equal(a.values, c.values, a.n * sizeof *a.values);
	/* the noise is red: some hundred independent values in 32 s */
	near_abs(correlation(a.values, d.values, a.n), 0, 0.25);
	near_abs(correlation(a.values, f.values, a.n), 0, 0.25);
	npy_unmap(&a);
	npy_unmap(&b);
	npy_unmap(&c);
	npy_unmap(&d);
	npy_unmap(&f);
}

/* ---- drives ---- */

static void write_slot(const char *drives, int slot, int64_t start_gps_ns, double rate_hz, const double *counts,
                       size_t n, const char *unit)
{
	struct qb_error e = {0};
	struct npy_out *out = NULL;
	const struct npy_side side = {start_gps_ns, rate_hz, unit, "tarn"};
	char *path = text_printf("%s/slot-%06d.npy", drives, slot);
	assert_int_equal(npy_create(path, 0, n, &out, &e), QB_OK);
	assert_int_equal(npy_put(out, counts, n, &e), QB_OK);
	assert_int_equal(npy_close(&out, &e), QB_OK);
	assert_int_equal(npy_side_write(path, &side, &e), QB_OK);
	qb_free(path);
}

static char *drive_dir(void)
{
	char *path = text_printf("%s/drive", dir);
	assert_int_equal(mkdir(path, 0700), 0);
	return path;
}

/*
 * A slot that begins `late_ns` after the run, with the burst of the fixtures in it, recorded without noise: the strain
 * is what the source itself gives at this station.
 */
static void plays(double rate_out_hz, int64_t late_ns)
{
	struct wave_source s = fixture_source(fixture_burst);
	struct qb_error e = {0};
	int slots = -1;
	size_t n = 24 * 4096, m = (size_t)(32 * rate_out_hz);
	double *counts = QB_NEW_ARRAY(double, n), *want = QB_NEW_ARRAY(double, m), miss = 0, whole = 0;
	char *drives = drive_dir();
	const struct rig_run run = run_of(32, rate_out_hz, 1, false);
	assert_int_equal(render_drive(&network->stations[0], &s, 4096, START + late_ns, n, counts, &e), QB_OK);
	write_slot(drives, 4, START + late_ns, 4096, counts, n, "counts");
	assert_int_equal(render_strain(&network->stations[0], &s, rate_out_hz, START, m, true, want, &e), QB_OK);
	struct npy_in in = record(0, &run, drives, &slots);
	assert_int_equal(slots, 1);
	for (size_t i = 0; i < m; i++) {
		miss += (in.values[i] - want[i]) * (in.values[i] - want[i]);
		whole += want[i] * want[i];
	}
	assert_true(whole > 0);
	near_abs(sqrt(miss / whole), 0, 0.01);
	npy_unmap(&in);
	qb_free(counts);
	qb_free(want);
	qb_free(drives);
}

static void drive_comes_out_as_strain(void **state)
{
	(void)state;
	plays(4096, 0);
}
static void drive_off_the_grid_comes_out_in_time(void **state)
{
	(void)state;
	plays(4096, 1000100000); /* 0.41 of a sample */
}
static void drive_is_resampled_down(void **state)
{
	(void)state;
	plays(2048, 0);
}
static void drive_is_resampled_up(void **state)
{
	(void)state;
	plays(16384, 0);
}

static void no_drive_is_silence(void **state)
{
	(void)state;
	int slots = -1;
	double zeros[4096] = {0};
	char *drives = drive_dir(), *missing = text_printf("%s/nothing-here", dir);
	const char *const from[] = {NULL, missing, drives};
	const struct rig_run run = run_of(16, 4096, 1, false);
	write_slot(drives, 0, START, 4096, zeros, 4096, "counts");
	for (int i = 0; i < 3; i++) {
		struct npy_in in = record(0, &run, from[i], &slots);
		assert_int_equal(slots, 0);
		for (size_t k = 0; k < in.n; k++)
			assert_true(in.values[k] == 0);
		npy_unmap(&in);
	}
	qb_free(drives);
	qb_free(missing);
}

/* ---- refusals: one line that says what and where, and no recording ---- */

static void refused(int station, const struct rig_run *run, const char *drives, enum qb_status want, const char *word)
{
	struct qb_error e = {0};
	char *path = text_printf("%s/refused.npy", dir), line[900];
	assert_int_equal(rig_station(&network->stations[station], run, drives, path, NULL, &e), want);
	assert_non_null(strstr(qb_error_line(&e, line, sizeof line), word));
	assert_null(strchr(line, '\n'));
	assert_int_not_equal(access(path, F_OK), 0);
	qb_free(path);
}

static void bad_drives_are_refused(void **state)
{
	(void)state;
	double counts[4096] = {0};
	char *drives = drive_dir();
	const struct rig_run run = run_of(16, 4096, 1, false);
	counts[2000] = 1;
	write_slot(drives, 0, START, 4096, counts, 4096, "strain");
	refused(0, &run, drives, QB_FORMAT, "slot-000000");
	write_slot(drives, 0, START, 4096.5, counts, 4096, "counts");
	refused(0, &run, drives, QB_RANGE, "slot-000000");
	write_slot(drives, 0, START, 4096, counts, 4096, "counts");
	refused(1, &run, drives, QB_RANGE, "heron"); /* has no actuator */
	qb_free(drives);
}

static void bad_runs_are_refused(void **state)
{
	(void)state;
	const struct rig_run runs[] = {run_of(0, 4096, 1, true),   run_of(-4, 4096, 1, true),
	                               run_of(8, 0, 1, true),      run_of(8, 1e6, 1, true),
	                               run_of(NAN, 4096, 1, true), run_of(1e12, 4096, 1, true)};
	for (size_t i = 0; i < sizeof runs / sizeof runs[0]; i++)
		refused(0, &runs[i], NULL, QB_RANGE, "rate");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup_teardown(noise_has_the_spectrum_of_the_station, fresh, drop),
	    cmocka_unit_test_setup_teardown(joints_can_not_be_seen, fresh, drop),
	    cmocka_unit_test_setup_teardown(same_seed_same_bytes, fresh, drop),
	    cmocka_unit_test_setup_teardown(drive_comes_out_as_strain, fresh, drop),
	    cmocka_unit_test_setup_teardown(drive_off_the_grid_comes_out_in_time, fresh, drop),
	    cmocka_unit_test_setup_teardown(drive_is_resampled_down, fresh, drop),
	    cmocka_unit_test_setup_teardown(drive_is_resampled_up, fresh, drop),
	    cmocka_unit_test_setup_teardown(no_drive_is_silence, fresh, drop),
	    cmocka_unit_test_setup_teardown(bad_drives_are_refused, fresh, drop),
	    cmocka_unit_test_setup_teardown(bad_runs_are_refused, fresh, drop),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
