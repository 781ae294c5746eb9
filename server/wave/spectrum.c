/* Polarisations in the frequency domain. Section letters are those of docs/signals.md. */
#include "server/wave/spectrum.h"

#include <math.h>

#include "server/wave/constants.h"
#include "server/wave/imr.h"

#define PI        WAVE_PI
#define GAUSS_END 5.0 /* a Gaussian spectrum exp(-pi^2 tau^2 f^2) is followed to exp(-25) */

double planck_taper(double x)
{
	if (x <= 0)
		return 0;
	return x >= 1 ? 1 : 1 / (exp(1 / x - 1 / (1 - x)) + 1);
}

double newtonian_time_s(double chirp_mass_msun, double f)
{
	return 5.0 / 256 * pow(chirp_mass_msun * WAVE_SUN_S, -5.0 / 3) * pow(PI * f, -8.0 / 3);
}

static double low_taper(const struct wave_source *s, double f)
{
	return planck_taper((f / s->lowest_frequency_hz - 0.7) / 0.3);
}

/* Both polarisations of a binary from amplitude and phase of the carrier: hx = -i cos(iota) H, h+ = (1 + cos^2)/2 H. */
static void put_binary(const struct wave_source *s, double amplitude, double phase, double complex *plus,
                       double complex *cross)
{
	double c = cos(s->p[CB_INCLINATION]);
	double complex h = amplitude * (cos(phase) - I * sin(phase));
	*plus = 0.5 * (1 + c * c) * h;
	*cross = -I * c * h;
}

static enum qb_status merger_spectrum(const struct wave_source *s, const double *f, size_t n, bool taper,
                                      double complex *plus, double complex *cross, struct qb_error *e)
{
	double m1 = s->p[CB_PRIMARY_MASS], m2 = s->p[CB_SECONDARY_MASS], total = m1 + m2;
	struct imr m;
	enum qb_status st = imr_prepare(m1 / m2, s->p[CB_PRIMARY_SPIN], s->p[CB_SECONDARY_SPIN], &m, e);
	if (st != QB_OK)
		return st;
	double scale =
	    0.5 * sqrt(5 / (4 * PI)) * (total * WAVE_SUN_M / (s->p[CB_DISTANCE] * WAVE_MPC_M)) * total * WAVE_SUN_S;
	for (size_t i = 0; i < n; i++) {
		double mf = f[i] * total * WAVE_SUN_S, w = taper ? low_taper(s, f[i]) : 1;
		plus[i] = cross[i] = 0;
		if (!(mf > 0) || mf > IMR_END || w == 0)
			continue;
		put_binary(s, w * scale * imr_amplitude(&m, mf), imr_phase(&m, mf) - 2 * s->p[CB_PHASE], &plus[i],
		           &cross[i]);
	}
	return QB_OK;
}

static double isco_hz(const struct wave_source *s)
{
	return 1 / (pow(6, 1.5) * PI * (s->p[CB_PRIMARY_MASS] + s->p[CB_SECONDARY_MASS]) * WAVE_SUN_S);
}

/* Tidal phase (Vines, Flanagan & Hinderer 2011) of one body, without the common factor. */
static double tide(double x_a, double lambda, double x)
{
	return lambda * pow(x_a, 5) *
	       (24 / x_a * (12 - 11 * x_a) +
	        5 / (28 * x_a) * (3179 - 919 * x_a - 2286 * x_a * x_a + 260 * x_a * x_a * x_a) * x);
}

static enum qb_status inspiral_spectrum(const struct wave_source *s, const double *f, size_t n, bool taper,
                                        double complex *plus, double complex *cross)
{
	double m1 = s->p[CB_PRIMARY_MASS], m2 = s->p[CB_SECONDARY_MASS], total = m1 + m2, x1 = m1 / total,
	       x2 = m2 / total;
	double eta = x1 * x2, chirp = source_chirp_mass_msun(s) * WAVE_SUN_S, end = isco_hz(s), c[8];
	double chi1 = s->p[CB_PRIMARY_SPIN], chi2 = s->p[CB_SECONDARY_SPIN];
	taylor_coefficients(eta, x1 - x2, (chi1 + chi2) / 2, (chi1 - chi2) / 2, c);
	double scale = sqrt(5.0 / 24) * pow(PI, -2.0 / 3) * WAVE_C_M_PER_S / (s->p[CB_DISTANCE] * WAVE_MPC_M) *
	               pow(chirp, 5.0 / 6);
	for (size_t i = 0; i < n; i++) {
		plus[i] = cross[i] = 0;
		double w = taper ? low_taper(s, f[i]) * (1 - planck_taper((f[i] / end - 0.9) / 0.1)) : 1;
		if (!(f[i] > 0) || f[i] > end || w == 0)
			continue;
		double mf = f[i] * total * WAVE_SUN_S, x = pow(PI * mf, 2.0 / 3);
		double phase = taylor_phase(c, eta, mf) -
		               3 / (128 * eta) * x * x * sqrt(x) *
		                   (tide(x1, s->p[CB_PRIMARY_TIDE], x) + tide(x2, s->p[CB_SECONDARY_TIDE], x));
		put_binary(s, w * scale * pow(f[i], -7.0 / 6), phase - 2 * s->p[CB_PHASE], &plus[i], &cross[i]);
	}
	return QB_OK;
}

/* Elliptical sine-Gaussian; K fixes the root-sum-square over both polarisations exactly. */
static void sine_gaussian(const struct wave_source *s, const double *f, size_t n, double complex *plus,
                          double complex *cross)
{
	double f0 = s->p[SG_FREQUENCY], q = s->p[SG_QUALITY], alpha = s->p[SG_ELLIPTICITY], d = s->p[SG_PHASE];
	double tau = q / (sqrt(2) * PI * f0), e = exp(-q * q), ca = cos(alpha), sa = sin(alpha);
	double norm = tau * sqrt(PI / 2) / 2 * (ca * ca * (1 + e * cos(2 * d)) + sa * sa * (1 - e * cos(2 * d)));
	double k = s->p[SG_HRSS] / sqrt(norm) * 0.5 * sqrt(PI) * tau;
	double complex up = cos(d) + I * sin(d), down = conj(up);
	for (size_t i = 0; i < n; i++) {
		double a = PI * tau * (f[i] - f0), b = PI * tau * (f[i] + f0);
		double complex near = exp(-a * a) * up, far = exp(-b * b) * down;
		plus[i] = k * ca * (near + far);
		cross[i] = k * sa * -I * (near - far);
	}
}

static void gaussian_pulse(const struct wave_source *s, const double *f, size_t n, double complex *plus,
                           double complex *cross)
{
	double tau = s->p[GP_WIDTH], a = s->p[GP_HRSS] / sqrt(tau * sqrt(PI / 2)) * sqrt(PI) * tau;
	for (size_t i = 0; i < n; i++) {
		double x = PI * tau * f[i];
		plus[i] = a * exp(-x * x);
		cross[i] = 0;
	}
}

enum qb_status spectrum_at(const struct wave_source *s, const double *f, size_t n, bool taper, double complex *plus,
                           double complex *cross, struct qb_error *e)
{
	enum qb_status st = source_check(s, "source", e);
	if (st != QB_OK)
		return st;
	if (s->family == WAVE_COMPACT_BINARY)
		return s->model == WAVE_TAYLORF2 ? inspiral_spectrum(s, f, n, taper, plus, cross)
		                                 : merger_spectrum(s, f, n, taper, plus, cross, e);
	if (s->family == WAVE_SINE_GAUSSIAN)
		sine_gaussian(s, f, n, plus, cross);
	else
		gaussian_pulse(s, f, n, plus, cross);
	return QB_OK;
}

double spectrum_end_hz(const struct wave_source *s)
{
	if (s->family == WAVE_COMPACT_BINARY)
		return s->model == WAVE_TAYLORF2
		           ? isco_hz(s)
		           : IMR_END / ((s->p[CB_PRIMARY_MASS] + s->p[CB_SECONDARY_MASS]) * WAVE_SUN_S);
	if (s->family == WAVE_SINE_GAUSSIAN) {
		double tau = s->p[SG_QUALITY] / (sqrt(2) * PI * s->p[SG_FREQUENCY]);
		return s->p[SG_FREQUENCY] + GAUSS_END / (PI * tau);
	}
	return GAUSS_END / (PI * s->p[GP_WIDTH]);
}
