/*
 * Time series by one inverse transform: spectrum, response, shift to the exact arrival, and for drives the inverse
 * actuator, all in the frequency domain. The transform's grid is aligned with the caller's samples.
 */
#include "server/wave/render.h"

#include <math.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/wave/actuation.h"
#include "server/wave/constants.h"
#include "server/wave/fft.h"
#include "server/wave/response.h"
#include "server/wave/spectrum.h"

#define LENGTH_MAX     ((size_t)1 << 26)
#define GAUSS_EXTENT   5.0  /* exp(-25) */
#define INSPIRAL_SLACK 1.15 /* post-Newtonian inspirals last a little longer than Newtonian ones */

void wave_extent(const struct wave_source *s, double *before_s, double *after_s)
{
	if (s->family == WAVE_COMPACT_BINARY) {
		double total_s = (s->p[CB_PRIMARY_MASS] + s->p[CB_SECONDARY_MASS]) * WAVE_SUN_S;
		*before_s =
		    INSPIRAL_SLACK * newtonian_time_s(source_chirp_mass_msun(s), 0.7 * s->lowest_frequency_hz) + 0.5;
		*after_s = fmax(0.25, 600 * total_s);
		return;
	}
	double tau = s->family == WAVE_SINE_GAUSSIAN ? s->p[SG_QUALITY] / (sqrt(2) * WAVE_PI * s->p[SG_FREQUENCY])
	                                             : s->p[GP_WIDTH];
	*before_s = *after_s = GAUSS_EXTENT * tau;
}

void wave_drive_extent(const struct wave_station *station, const struct wave_source *s, double *before_s,
                       double *after_s)
{
	wave_extent(s, before_s, after_s);
	if (station->actuator.present) {
		*before_s += actuator_tail_s(&station->actuator);
		*after_s += actuator_tail_s(&station->actuator);
	}
}

int64_t wave_arrival_gps_ns(const struct wave_station *station, const struct wave_source *s)
{
	struct wave_earth earth;
	struct wave_response r;
	earth_at(s->arrival_gps_ns, 0, WAVE_PRECISE, &earth);
	response_at(station, &earth, s->right_ascension_rad, s->declination_rad, s->polarization_rad, &r);
	return s->arrival_gps_ns + (int64_t)llround(r.delay_s * 1e9);
}

struct grid {
	double rate_hz, before_s, after_s;
	int64_t start_gps_ns;
	size_t n;       /* the caller's */
	size_t length;  /* of the transform */
	long first;     /* the caller's index of the transform's first sample */
	double arrival; /* samples from the transform's start to the arrival */
	double *f;
	double complex *plus, *cross;
};

static enum qb_status make_grid(struct grid *g, const struct wave_source *s, double delay_s, struct qb_error *e)
{
	double span = (g->before_s + g->after_s) * g->rate_hz;
	if (!(g->rate_hz > 0) || !(span < (double)LENGTH_MAX))
		return qb_fail(e, QB_RANGE, "render", "raise the lowest frequency", "the signal is too long: %.0f s",
		               g->before_s + g->after_s);
	/* differences to the caller's start are small: no digits are lost */
	double at = ((double)(s->arrival_gps_ns - g->start_gps_ns) / 1e9 + delay_s) * g->rate_hz;
	g->length = fft_length((size_t)ceil(span) + 2);
	g->first = (long)floor(at - g->before_s * g->rate_hz);
	g->arrival = at - (double)g->first;
	size_t bins = g->length / 2 + 1;
	g->f = QB_NEW_ARRAY(double, bins);
	for (size_t k = 0; k < bins; k++)
		g->f[k] = (double)k * g->rate_hz / (double)g->length;
	g->plus = fft_complex_new(bins);
	g->cross = fft_complex_new(bins);
	enum qb_status st = spectrum_at(s, g->f, bins, true, g->plus, g->cross, e);
	/* e^(-2 pi i f t_arrival), and the scale of the inverse transform */
	for (size_t k = 0; st == QB_OK && k < bins; k++) {
		double phase = -2 * WAVE_PI * fmod((double)k * g->arrival / (double)g->length, 1);
		double complex shift = (cos(phase) + I * sin(phase)) * g->rate_hz / (double)g->length;
		g->plus[k] *= shift;
		g->cross[k] *= shift;
	}
	return st;
}

static void free_grid(struct grid *g)
{
	qb_free(g->f);
	fft_free(g->plus);
	fft_free(g->cross);
}

/* Inverse transform of `spectrum` (destroyed) and the overlap with the caller's samples. */
static void place(const struct grid *g, double complex *spectrum, double *out)
{
	double *x = fft_real_new(g->length);
	spectrum[0] = creal(spectrum[0]);
	spectrum[g->length / 2] = 0;
	fft_inverse(g->length, spectrum, x);
	memset(out, 0, g->n * sizeof *out);
	long last = (long)ceil(g->arrival + g->after_s * g->rate_hz);
	for (long j = 0; j < (long)g->length && j <= last; j++) {
		long i = g->first + j;
		if (i >= 0 && (size_t)i < g->n)
			out[i] = x[j];
	}
	fft_free(x);
}

static void project(const struct grid *g, const struct wave_response *r, bool finite)
{
	for (size_t k = 0; k <= g->length / 2; k++) {
		double complex fp = r->f_plus, fc = r->f_cross;
		if (g->plus[k] == 0 && g->cross[k] == 0)
			continue;
		if (finite)
			response_finite(r, g->f[k], &fp, &fc);
		g->plus[k] = fp * g->plus[k] + fc * g->cross[k];
	}
}

static enum qb_status at_station(const struct wave_station *station, const struct wave_source *s, struct grid *g,
                                 bool finite, bool drive, double *out, struct qb_error *e)
{
	struct wave_earth earth;
	struct wave_response r;
	earth_at(s->arrival_gps_ns, 0, WAVE_PRECISE, &earth);
	response_at(station, &earth, s->right_ascension_rad, s->declination_rad, s->polarization_rad, &r);
	enum qb_status st = make_grid(g, s, r.delay_s, e);
	if (st == QB_OK) {
		project(g, &r, finite);
		for (size_t k = 0; drive && k <= g->length / 2; k++) {
			if (g->plus[k] != 0)
				g->plus[k] *= actuator_inverse(station, g->f[k]);
		}
		place(g, g->plus, out);
	}
	free_grid(g);
	return st;
}

enum qb_status render_strain(const struct wave_station *station, const struct wave_source *s, double rate_hz,
                             int64_t start_gps_ns, size_t n, bool finite_arms, double *out, struct qb_error *e)
{
	struct grid g = {.rate_hz = rate_hz, .start_gps_ns = start_gps_ns, .n = n};
	enum qb_status st = source_check(s, "source", e);
	if (st != QB_OK)
		return st;
	wave_extent(s, &g.before_s, &g.after_s);
	return at_station(station, s, &g, finite_arms, false, out, e);
}

enum qb_status render_drive(const struct wave_station *station, const struct wave_source *s, double rate_hz,
                            int64_t start_gps_ns, size_t n, double *out, struct qb_error *e)
{
	struct grid g = {.rate_hz = rate_hz, .start_gps_ns = start_gps_ns, .n = n};
	enum qb_status st = source_check(s, "source", e);
	if (st != QB_OK)
		return st;
	if (!station->actuator.present)
		return qb_fail(e, QB_RANGE, station->name, "describe it in the network file",
		               "the station has no actuator");
	wave_drive_extent(station, s, &g.before_s, &g.after_s);
	return at_station(station, s, &g, true, true, out, e);
}

enum qb_status render_polarizations(const struct wave_source *s, double rate_hz, int64_t start_gps_ns, size_t n,
                                    double *plus, double *cross, struct qb_error *e)
{
	struct grid g = {.rate_hz = rate_hz, .start_gps_ns = start_gps_ns, .n = n};
	enum qb_status st = source_check(s, "source", e);
	if (st != QB_OK)
		return st;
	wave_extent(s, &g.before_s, &g.after_s);
	if ((st = make_grid(&g, s, 0, e)) == QB_OK) {
		place(&g, g.plus, plus);
		place(&g, g.cross, cross);
	}
	free_grid(&g);
	return st;
}
