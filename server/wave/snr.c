/* Optimal SNR by Gauss-Legendre quadrature over panels that follow the signal: smooth integrands need few points. */
#include "server/wave/snr.h"

#include <math.h>

#include "server/base/alloc.h"
#include "server/wave/constants.h"
#include "server/wave/noise.h"
#include "server/wave/response.h"
#include "server/wave/spectrum.h"

#define PANELS 40
#define POINTS 10
#define NODES  (PANELS * POINTS)

/* Nodes f and weights over [low, high], in ln f for binaries, in f for bursts; 0 when the band is empty. */
static size_t quadrature(const struct wave_source *s, double low, double high, double *f, double *w)
{
	static const double x[5] = {0.1488743389816312, 0.4333953941292472, 0.6794095682990244, 0.8650633666889845,
	                            0.9739065285171717};
	static const double c[5] = {0.2955242247147529, 0.2692667193099963, 0.2190863625159820, 0.1494513491505806,
	                            0.0666713443086881};
	bool logs = s->family == WAVE_COMPACT_BINARY;
	if (!(high > low))
		return 0;
	double a = logs ? log(low) : low, b = logs ? log(high) : high, h = (b - a) / PANELS / 2;
	size_t n = 0;
	for (int p = 0; p < PANELS; p++) {
		double mid = a + (2 * p + 1) * h;
		for (int i = 0; i < POINTS; i++) {
			double t = mid + (i < 5 ? -h * x[i] : h * x[i - 5]), weight = h * c[i < 5 ? i : i - 5];
			f[n] = logs ? exp(t) : t;
			w[n] = logs ? weight * f[n] : weight;
			n++;
		}
	}
	return n;
}

/* The part of the band that holds the signal, so that a narrow burst does not fall between the nodes. */
static void signal_band(const struct wave_source *s, double highest_hz, double *low, double *high)
{
	*low = s->lowest_frequency_hz;
	*high = fmin(highest_hz, spectrum_end_hz(s));
	if (s->family == WAVE_SINE_GAUSSIAN) {
		double f0 = s->p[SG_FREQUENCY];
		*low = fmax(*low, 2 * f0 - spectrum_end_hz(s));
	}
}

struct nodes {
	double f[NODES], w[NODES];
	double complex plus[NODES], cross[NODES];
	size_t n;
};

static enum qb_status prepare(const struct wave_source *s, double highest_hz, struct nodes *x, struct qb_error *e)
{
	double low, high;
	enum qb_status st = source_check(s, "source", e);
	if (st != QB_OK)
		return st;
	signal_band(s, highest_hz, &low, &high);
	x->n = quadrature(s, low, high, x->f, x->w);
	return spectrum_at(s, x->f, x->n, false, x->plus, x->cross, e);
}

enum qb_status snr_network(const struct wave_network *network, const struct wave_source *s, double highest_hz,
                           double *station_snr, double *network_snr, struct qb_error *e)
{
	struct nodes *x = QB_NEW(struct nodes);
	struct wave_earth earth;
	double total = 0;
	enum qb_status st = prepare(s, highest_hz, x, e);
	if (st == QB_OK)
		earth_at(s->arrival_gps_ns, 0, WAVE_PRECISE, &earth);
	for (int i = 0; st == QB_OK && i < network->n_stations; i++) {
		struct wave_response r;
		double sum = 0;
		response_at(&network->stations[i], &earth, s->right_ascension_rad, s->declination_rad,
		            s->polarization_rad, &r);
		for (size_t k = 0; k < x->n; k++) {
			double complex fp, fc;
			response_finite(&r, x->f[k], &fp, &fc);
			double a = cabs(fp * x->plus[k] + fc * x->cross[k]);
			sum += x->w[k] * a * a / noise_psd(&network->stations[i].noise, x->f[k]);
		}
		if (station_snr != NULL)
			station_snr[i] = sqrt(4 * sum);
		total += 4 * sum;
	}
	*network_snr = sqrt(total);
	qb_free(x);
	return st;
}

enum qb_status snr_best(const struct wave_station *station, const struct wave_source *s, double highest_hz, double *snr,
                        struct qb_error *e)
{
	struct nodes *x = QB_NEW(struct nodes);
	struct wave_source best = *s;
	double sum = 0;
	if (s->family == WAVE_COMPACT_BINARY)
		best.p[CB_INCLINATION] = 0;
	enum qb_status st = prepare(&best, highest_hz, x, e);
	for (size_t k = 0; st == QB_OK && k < x->n; k++) {
		double p = cabs(x->plus[k]), c = cabs(x->cross[k]), a = p > c ? p : c;
		sum += x->w[k] * a * a / noise_psd(&station->noise, x->f[k]);
	}
	*snr = sqrt(4 * sum);
	qb_free(x);
	return st;
}
