/*
 * Coloured Gaussian noise by overlapping segments: every segment is drawn in the frequency domain, windowed with a sine
 * and added half overlapped. sin^2 + cos^2 = 1 keeps the variance level, so the joints can't be seen.
 */
#include "client/cli/rig.h"

#include <math.h>
#include <string.h>

#include "client/cli/npy.h"
#include "client/cli/rig_drive.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/wave/fft.h"
#include "server/wave/noise.h"

#define SEGMENT_S 8.0 /* resolution of 1/8 Hz */

struct noise_source {
	size_t n, half; /* samples of a segment and of its hop */
	double *sigma;  /* per bin: standard deviation of real and imaginary part */
	double *window, *segment, *carry;
	double complex *bins;
	uint64_t key;
	uint64_t index; /* of the next segment */
};

static void noise_open(struct noise_source *s, const struct wave_station *station, const struct rig_run *run)
{
	s->n = fft_length((size_t)(SEGMENT_S * run->rate_hz));
	s->half = s->n / 2;
	s->sigma = QB_NEW_ARRAY(double, s->half + 1);
	s->window = QB_NEW_ARRAY(double, s->n);
	s->carry = QB_NEW_ARRAY(double, s->half);
	s->segment = fft_real_new(s->n);
	s->bins = fft_complex_new(s->half + 1);
	s->key = splitmix64(run->seed ^ text_fnv1a(station->name));
	s->index = 0;
	double seconds = (double)s->n / run->rate_hz;
	for (size_t k = 1; k < s->half; k++) {
		double psd = noise_psd(&station->noise, (double)k / seconds);
		/* sqrt(T S / 4) in 1/Hz, and 1/T for the inverse transform; nothing is recorded where the curve ends */
		s->sigma[k] = isfinite(psd) ? sqrt(psd / (4 * seconds)) : 0;
	}
	for (size_t i = 0; i < s->n; i++)
		s->window[i] = sin(M_PI * ((double)i + 0.5) / (double)s->n);
}

static void noise_close(struct noise_source *s)
{
	qb_free(s->sigma);
	qb_free(s->window);
	qb_free(s->carry);
	fft_free(s->segment);
	fft_free(s->bins);
}

/* Box and Muller's pairs (1958) from numbers that are a function of seed, station, segment and bin alone. */
static void draw_segment(struct noise_source *s)
{
	uint64_t key = splitmix64(s->key + s->index++);
	for (size_t k = 0; k <= s->half; k++) {
		s->bins[k] = 0;
		if (s->sigma[k] == 0)
			continue;
		double u = uniform_from_u64(splitmix64(key + 2 * k)), v = uniform_from_u64(splitmix64(key + 2 * k + 1));
		double r = s->sigma[k] * sqrt(-2 * log(u));
		s->bins[k] = r * (cos(2 * M_PI * v) + I * sin(2 * M_PI * v));
	}
	fft_inverse(s->n, s->bins, s->segment);
	for (size_t i = 0; i < s->n; i++)
		s->segment[i] *= s->window[i];
}

/* The next `half` samples. */
static void noise_next(struct noise_source *s, double *out)
{
	if (s->index == 0) {
		draw_segment(s);
		memcpy(s->carry, s->segment + s->half, s->half * sizeof *out);
	}
	draw_segment(s);
	for (size_t i = 0; i < s->half; i++)
		out[i] = s->carry[i] + s->segment[i];
	memcpy(s->carry, s->segment + s->half, s->half * sizeof *out);
}

static enum qb_status record(const struct wave_station *station, const struct rig_run *run, struct rig_drives *drives,
                             size_t n, struct npy_out *out, struct qb_error *e)
{
	struct noise_source noise = {0};
	enum qb_status st = QB_OK;
	noise_open(&noise, station, run);
	double *block = QB_NEW_ARRAY(double, noise.half);
	for (size_t at = 0; st == QB_OK && at < n; at += noise.half) {
		size_t m = n - at < noise.half ? n - at : noise.half;
		if (run->noise)
			noise_next(&noise, block);
		else
			memset(block, 0, noise.half * sizeof *block);
		st = rig_drives_add(drives, (int64_t)at, block, m, e);
		if (st == QB_OK)
			st = npy_put(out, block, m, e);
	}
	qb_free(block);
	noise_close(&noise);
	return st;
}

enum qb_status rig_station(const struct wave_station *station, const struct rig_run *run, const char *dir,
                           const char *path, int *slots, struct qb_error *e)
{
	struct rig_drives *drives = NULL;
	struct npy_out *out = NULL;
	double samples = run->seconds * run->rate_hz;
	const struct npy_side side = {run->start_gps_ns, run->rate_hz, "strain", station->name};
	if (!(run->rate_hz >= 64 && run->rate_hz <= 65536) || !(samples >= 1 && samples < 1e12))
		return qb_fail(e, QB_RANGE, "rig", NULL, "the rate must be 64 to 65536 Hz and the time positive");
	size_t n = (size_t)llround(samples);
	enum qb_status st = rig_drives_open(dir, station, run, &drives, e);
	if (st == QB_OK)
		st = npy_create(path, 0, n, &out, e);
	if (st == QB_OK)
		st = record(station, run, drives, n, out, e);
	if (st == QB_OK)
		st = npy_close(&out, e);
	npy_abandon(&out);
	if (st == QB_OK)
		st = npy_side_write(path, &side, e);
	if (st == QB_OK && slots != NULL)
		*slots = rig_drives_played(drives);
	rig_drives_close(&drives);
	return st;
}
