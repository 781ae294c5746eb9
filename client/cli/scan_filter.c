/*
 * One station: noise level, matched filters by overlap and save, and the maxima of |z|. Work is divided among threads
 * by template, so that the triggers don't depend on their number.
 */
#include <math.h>
#include <pthread.h>
#include <stdlib.h>
#include <string.h>

#include "client/cli/scan.h"
#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/wave/fft.h"
#include "server/wave/noise.h"
#include "server/wave/render.h"
#include "server/wave/spectrum.h"

#define WELCH_S      8.0   /* length of a segment for the noise estimate */
#define EDGE_S       4.0   /* beside the template's length: how far the inverse noise spectrum smears */
#define SEPARATION_S 0.1   /* one trigger a template in this time to either side */
#define MEDIAN_BIAS  M_LN2 /* median over mean of an exponential variable */
#define LEAST_S      64.0
#define THREADS_MAX  16

struct filter {
	const struct scan_bank *bank;
	const struct scan_settings *settings;
	const double *strain;
	size_t n_in;
	size_t decimate; /* samples of the data for one of the search */
	size_t n;        /* samples of the search */
	size_t block, edge, hop;
	double rate_hz;
	double *inverse; /* 1 / S per bin of a block */
};

/* ---- noise ---- */

static int ascending(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return (x > y) - (x < y);
}

/* Median over half-overlapping Hann segments: a signal lifts few of them and so hardly moves it (Welch 1967). */
static double *median_psd(const struct filter *f, double data_rate_hz, size_t *bins)
{
	size_t n = (size_t)(WELCH_S * data_rate_hz), half = n / 2, segments = (f->n_in - n) / half + 1;
	/* enough segments for 5 %: more would only cost memory */
	size_t stride = segments > 400 ? segments / 400 : 1, used = (segments + stride - 1) / stride;
	double *x = fft_real_new(n), *psd = QB_NEW_ARRAY(double, half + 1), *column = QB_NEW_ARRAY(double, used);
	float *power = QB_NEW_ARRAY(float, used *(half + 1));
	double complex *y = fft_complex_new(half + 1);
	/* one-sided: 2 |X|^2 / (rate sum w^2); Hann's sum of squares is 3 n / 8; scaled so that it fits a float */
	const double scale = 2 / (data_rate_hz * 0.375 * (double)n), fit = 1e40;
	for (size_t s = 0; s < used; s++) {
		for (size_t i = 0; i < n; i++)
			x[i] = f->strain[s * stride * half + i] * (0.5 - 0.5 * cos(2 * M_PI * (double)i / (double)n));
		fft_forward(n, x, y);
		for (size_t k = 0; k <= half; k++)
			power[k * used + s] =
			    (float)(fit * scale * (creal(y[k]) * creal(y[k]) + cimag(y[k]) * cimag(y[k])));
	}
	for (size_t k = 0; k <= half; k++) {
		for (size_t s = 0; s < used; s++)
			column[s] = power[k * used + s];
		qsort(column, used, sizeof *column, ascending);
		psd[k] = (column[used / 2] + column[(used - 1) / 2]) / 2 / fit / MEDIAN_BIAS;
	}
	*bins = half + 1;
	qb_free(power);
	qb_free(column);
	fft_free(x);
	fft_free(y);
	return psd;
}

static void level_noise(struct filter *f, const struct wave_station *station, double data_rate_hz)
{
	size_t bins = 0;
	double *psd = f->settings->design_noise ? NULL : median_psd(f, data_rate_hz, &bins);
	f->inverse = QB_NEW_ARRAY(double, f->block / 2 + 1);
	for (size_t k = 0; k <= f->block / 2; k++) {
		double hz = (double)k * f->rate_hz / (double)f->block, s;
		if (psd == NULL) {
			s = noise_psd(&station->noise, hz);
		} else {
			double at = hz * WELCH_S;
			size_t lo = (size_t)at;
			s = lo + 1 < bins ? psd[lo] + (at - (double)lo) * (psd[lo + 1] - psd[lo]) : psd[bins - 1];
		}
		f->inverse[k] = isfinite(s) && s > 0 ? 1 / s : 0;
	}
	qb_free(psd);
}

/* ---- triggers ---- */

static void add_trigger(struct scan_list *l, double t_s, double snr, int template)
{
	if (l->n == l->cap) {
		l->cap = l->cap > 0 ? 2 * l->cap : 256;
		l->trigger = qb_realloc(l->trigger, l->cap, sizeof *l->trigger);
	}
	l->trigger[l->n++] = (struct scan_trigger){t_s, snr, template, SCAN_NONE};
}

/* Keeps the louder of two maxima of one template that are close; triggers arrive in order of time. */
static void offer(struct scan_list *l, double t_s, double snr, int template)
{
	struct scan_trigger *last = l->n > 0 ? &l->trigger[l->n - 1] : NULL;
	if (last != NULL && last->template == template && t_s - last->t_s < SEPARATION_S) {
		if (snr > last->snr) {
			last->t_s = t_s;
			last->snr = snr;
		}
		return;
	}
	add_trigger(l, t_s, snr, template);
}

/* Maxima of |z|^2 in [from, to) of a block, refined by a parabola. */
static void find_maxima(const struct filter *f, const double complex *z, size_t from, size_t to, size_t block_at,
                        double sigma, int template, struct scan_list *out)
{
	double least = f->settings->threshold * sigma, square = least * least;
	for (size_t j = from; j < to; j++) {
		double b = creal(z[j]) * creal(z[j]) + cimag(z[j]) * cimag(z[j]);
		if (b < square)
			continue;
		double a = cabs(z[j - 1]), c = cabs(z[j + 1]), peak = sqrt(b);
		if (a > peak || c >= peak)
			continue;
		double bend = a - 2 * peak + c, shift = bend < 0 ? 0.5 * (a - c) / bend : 0;
		double snr = (peak - 0.25 * (a - c) * shift) / sigma;
		offer(out, ((double)(block_at + j) + shift) / f->rate_hz, snr, template);
	}
}

/* ---- filters ---- */

/* One block of data at the search's rate, as a spectrum in 1/Hz times 1/S. */
static void load_block(const struct filter *f, size_t at, double *x, double complex *wide, double complex *out)
{
	size_t wide_n = f->block * f->decimate, from = at * f->decimate;
	size_t have = from < f->n_in ? f->n_in - from : 0;
	if (have > wide_n)
		have = wide_n;
	memcpy(x, f->strain + from, have * sizeof *x);
	memset(x + have, 0, (wide_n - have) * sizeof *x);
	fft_forward(wide_n, x, wide);
	double dt = 1 / (f->rate_hz * (double)f->decimate);
	for (size_t k = 0; k <= f->block / 2; k++)
		out[k] = wide[k] * dt * f->inverse[k];
}

struct part {
	const struct filter *f;
	int first; /* this thread takes templates first, first + step ... */
	int step;
	struct scan_list *lists; /* one a template */
	enum qb_status status;
	struct qb_error error;
};

/* Conjugate template spectrum on the block's grid, and its norm sigma^2 = 4 sum |h|^2 / S df. */
static enum qb_status load_template(const struct filter *f, int i, const double *hz, double complex *h,
                                    double complex *scratch, double *sigma, struct qb_error *e)
{
	size_t bins = f->block / 2 + 1;
	double sum = 0, df = f->rate_hz / (double)f->block;
	enum qb_status st = spectrum_at(&f->bank->templates[i], hz, bins, true, h, scratch, e);
	for (size_t k = 0; st == QB_OK && k < bins; k++) {
		if (k == 0 || k + 1 == bins)
			h[k] = 0;
		sum += (creal(h[k]) * creal(h[k]) + cimag(h[k]) * cimag(h[k])) * f->inverse[k];
		h[k] = conj(h[k]);
	}
	*sigma = sqrt(4 * sum * df);
	return st;
}

/* All blocks through one template. The filter's own spectrum is kept; the data's is made again per template group. */
static void *work(void *state)
{
	struct part *p = state;
	const struct filter *f = p->f;
	size_t bins = f->block / 2 + 1, mine = 0;
	double *hz = QB_NEW_ARRAY(double, bins), *x = fft_real_new(f->block * f->decimate);
	double complex *wide = fft_complex_new(f->block * f->decimate / 2 + 1), *data = fft_complex_new(bins);
	double complex *product = fft_complex_new(f->block), *z = fft_complex_new(f->block);
	double complex **h = QB_NEW_ARRAY(double complex *, (size_t)f->bank->n);
	double *sigma = QB_NEW_ARRAY(double, (size_t)f->bank->n);
	for (size_t k = 0; k < bins; k++)
		hz[k] = (double)k * f->rate_hz / (double)f->block;
	for (int i = p->first; i < f->bank->n && p->status == QB_OK; i += p->step, mine++) {
		h[i] = fft_complex_new(bins);
		p->status = load_template(f, i, hz, h[i], product, &sigma[i], &p->error);
	}
	double df = f->rate_hz / (double)f->block;
	for (size_t at = 0; p->status == QB_OK && at + 2 * f->edge < f->n; at += f->hop) {
		size_t to = f->n - at < f->block ? f->n - at - f->edge : f->block - f->edge;
		load_block(f, at, x, wide, data);
		for (int i = p->first; i < f->bank->n; i += p->step) {
			if (sigma[i] == 0)
				continue;
			/* z(t) sigma = 4 int d h* / S exp(2 pi i f t) df over f > 0 */
			for (size_t k = 0; k < bins; k++)
				product[k] = 4 * df * data[k] * h[i][k];
			memset(product + bins, 0, (f->block - bins) * sizeof *product);
			fft_inverse_complex(f->block, product, z);
			find_maxima(f, z, f->edge, to, at, sigma[i], i, &p->lists[i]);
		}
	}
	for (int i = 0; i < f->bank->n; i++)
		fft_free(h[i]);
	qb_free(h);
	qb_free(sigma);
	qb_free(hz);
	fft_free(x);
	fft_free(wide);
	fft_free(data);
	fft_free(product);
	fft_free(z);
	return NULL;
}

static enum qb_status run_parts(const struct filter *f, struct scan_list *out, struct qb_error *e)
{
	int threads = f->settings->threads < 1 ? 1 : f->settings->threads;
	struct part parts[THREADS_MAX];
	pthread_t id[THREADS_MAX];
	bool started[THREADS_MAX] = {false};
	struct scan_list *lists = QB_NEW_ARRAY(struct scan_list, (size_t)f->bank->n);
	enum qb_status st = QB_OK;
	if (threads > THREADS_MAX)
		threads = THREADS_MAX;
	if (threads > f->bank->n)
		threads = f->bank->n;
	for (int i = 0; i < threads; i++) {
		parts[i] = (struct part){.f = f, .first = i, .step = threads, .lists = lists};
		if (i + 1 < threads)
			started[i] = pthread_create(&id[i], NULL, work, &parts[i]) == 0;
		if (!started[i])
			(void)work(&parts[i]);
	}
	for (int i = 0; i < threads; i++) {
		if (started[i])
			CHECK(pthread_join(id[i], NULL) == 0);
		if (st == QB_OK && parts[i].status != QB_OK) {
			st = parts[i].status;
			if (e != NULL)
				*e = parts[i].error;
		}
	}
	for (int i = 0; i < f->bank->n; i++) {
		for (size_t k = 0; st == QB_OK && k < lists[i].n; k++)
			add_trigger(out, lists[i].trigger[k].t_s, lists[i].trigger[k].snr, i);
		qb_free(lists[i].trigger);
	}
	qb_free(lists);
	return st;
}

enum qb_status scan_station(const struct wave_station *station, const struct scan_bank *bank,
                            const struct scan_settings *settings, const double *strain, size_t n, double data_rate_hz,
                            struct scan_list *out, struct qb_error *e)
{
	struct filter f = {
	    .bank = bank, .settings = settings, .strain = strain, .n_in = n, .rate_hz = settings->rate_hz};
	double ratio = data_rate_hz / settings->rate_hz, longest = 0;
	*out = (struct scan_list){0};
	if (!(ratio >= 1) || ratio != floor(ratio) || ratio > 64 || data_rate_hz != floor(data_rate_hz))
		return qb_fail(e, QB_RANGE, station->name, "give --rate-hz a whole part of it",
		               "the strain's rate of %g Hz does not suit a search at %g Hz", data_rate_hz,
		               settings->rate_hz);
	f.decimate = (size_t)ratio;
	f.n = n / f.decimate;
	for (int i = 0; i < bank->n; i++) {
		double before, after;
		wave_extent(&bank->templates[i], &before, &after);
		longest = fmax(longest, fmax(before, after));
	}
	f.edge = (size_t)ceil((longest + EDGE_S) * f.rate_hz);
	f.block = fft_length(8 * f.edge);
	if (f.block < (size_t)1 << 17)
		f.block = (size_t)1 << 17;
	while (f.block > 4 * f.edge && f.block / 2 >= f.n)
		f.block /= 2;
	f.hop = f.block - 2 * f.edge;
	if ((double)n < LEAST_S * data_rate_hz || f.n < 4 * f.edge || f.block > (size_t)1 << 25)
		return qb_fail(e, QB_RANGE, station->name, "give more strain, or shorter templates",
		               "%.0f s of strain are too short for templates of %.1f s", (double)n / data_rate_hz,
		               longest);
	level_noise(&f, station, data_rate_hz);
	enum qb_status st = run_parts(&f, out, e);
	qb_free(f.inverse);
	if (st != QB_OK) {
		qb_free(out->trigger);
		*out = (struct scan_list){0};
	}
	return st;
}
