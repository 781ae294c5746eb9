/* The actuator's transfer, its inverse, and the limits of a drive. */
#include "server/wave/actuation.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/wave/constants.h"
#include "server/wave/fft.h"
#include "server/wave/spectrum.h"

double complex actuator_compliance(double mass_kg, double pendulum_hz, double quality, double f)
{
	double w0 = 2 * WAVE_PI * pendulum_hz, w = 2 * WAVE_PI * f;
	return 1 / (mass_kg * (w0 * w0 - w * w + I * w * w0 / quality));
}

double complex actuator_forward(const struct wave_station *s, double f)
{
	const struct wave_actuator *a = &s->actuator;
	return a->sign * a->volt_per_count * a->newton_per_volt *
	       actuator_compliance(a->mass_kg, a->pendulum_hz, a->quality, f) / s->arm_length_m;
}

double complex actuator_inverse(const struct wave_station *s, double f)
{
	const double *b = s->actuator.band_hz;
	double w = planck_taper((f - b[0]) / (b[1] - b[0])) * planck_taper((b[3] - f) / (b[3] - b[2]));
	return w > 0 ? w / actuator_forward(s, f) : 0;
}

double actuator_tail_s(const struct wave_actuator *a)
{
	return 10 / (a->band_hz[1] - a->band_hz[0]);
}

enum qb_status actuator_apply(const struct wave_station *s, double rate_hz, const double *counts, size_t n,
                              double *strain, struct qb_error *e)
{
	if (!s->actuator.present || n == 0 || n > (size_t)1 << 28)
		return qb_fail(e, QB_RANGE, s->name, NULL, "has no actuator, or the drive has a bad length");
	double *x = fft_real_new(n);
	double complex *y = fft_complex_new(n / 2 + 1);
	memcpy(x, counts, n * sizeof *x);
	fft_forward(n, x, y);
	for (size_t k = 0; k <= n / 2; k++)
		y[k] *= actuator_forward(s, (double)k * rate_hz / (double)n) / (double)n;
	fft_inverse(n, y, x);
	memcpy(strain, x, n * sizeof *x);
	fft_free(x);
	fft_free(y);
	return QB_OK;
}

static void add_limit(struct actuator_report *r, const char *name, const char *unit, double value, double limit)
{
	struct actuator_limit *l = &r->limit[r->n++];
	(void)snprintf(l->name, sizeof l->name, "%s", name);
	l->unit = unit;
	l->value = value;
	l->limit = limit;
	l->margin = value > 0 ? limit / value : INFINITY;
	l->within = value <= limit;
	r->within = r->within && l->within;
	r->least_margin = fmin(r->least_margin, l->margin);
}

/* RMS of the drive inside a band, by Parseval's theorem. */
static double band_rms(const double complex *y, size_t length, size_t n, double rate_hz, double from, double to)
{
	double sum = 0;
	for (size_t k = 1; k < length / 2; k++) {
		double f = (double)k * rate_hz / (double)length, a = cabs(y[k]);
		if (f >= from && f <= to)
			sum += 2 * a * a;
	}
	return sqrt(sum / (double)length / (double)n);
}

void actuator_check(const struct wave_actuator *a, const struct actuator_limits *limits, double rate_hz,
                    const double *counts, size_t n, struct actuator_report *out)
{
	double sum = 0, slew = 0, edge = n > 0 ? fmax(fabs(counts[0]), fabs(counts[n - 1])) : 0;
	*out = (struct actuator_report){.within = true, .least_margin = INFINITY};
	for (size_t i = 0; i < n; i++) {
		out->peak_counts = fmax(out->peak_counts, fabs(counts[i]));
		sum += counts[i] * counts[i];
		if (i > 0)
			slew = fmax(slew, fabs(counts[i] - counts[i - 1]));
	}
	out->rms_counts = n > 0 ? sqrt(sum / (double)n) : 0;
	out->slew_counts_per_s = slew * rate_hz;
	add_limit(out, "peak", "counts", out->peak_counts, limits->largest_drive * exp2(a->converter_bits - 1));
	add_limit(out, "slew", "counts/s", out->slew_counts_per_s, a->slew_counts_per_s);
	add_limit(out, "edges", "counts", edge, 1);
	if (out->rms_counts > 0)
		out->quantisation_ratio = sqrt((a->band_hz[2] - a->band_hz[1]) / (6 * rate_hz)) / out->rms_counts;
	if (limits->n_bands == 0 || n == 0)
		return;
	size_t length = fft_length(n);
	double *x = fft_real_new(length);
	double complex *y = fft_complex_new(length / 2 + 1);
	memcpy(x, counts, n * sizeof *x);
	fft_forward(length, x, y);
	for (int i = 0; i < limits->n_bands; i++) {
		const double *b = limits->excluded_bands_hz[i];
		char name[64];
		(void)snprintf(name, sizeof name, "band %g-%g Hz", b[0], b[1]);
		/* one count of RMS: below what the converter resolves, and so nothing that a resonance could collect */
		add_limit(out, name, "counts RMS", band_rms(y, length, n, rate_hz, b[0], b[1]), 1);
	}
	fft_free(x);
	fft_free(y);
}
