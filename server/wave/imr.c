/* Coefficients, joins, amplitude and phase of the merger model. Section numbers are those of docs/signals.md. */
#include "server/wave/imr.h"

#include <math.h>
#include <string.h>

#include "server/wave/constants.h"
#include "server/wave/imr_table.h"

#define PI             WAVE_PI
#define AMPLITUDE_JOIN 0.014 /* M f where the inspiral amplitude ends */
#define PHASE_JOIN     0.018 /* M f where the inspiral phase ends */

void ringdown_of(double spin, double *re, double *im)
{
	/* Own fit to an own solution of Leaver's (1985) continued fraction, error < 1e-6 for -0.99 <= a <= 0.995. */
	static const double f[] = {0.999914088, -1.51583052, 1.87691545,  -2.16744884, 1.12623012,  2.5939722,
	                           -7.74667809, 10.0491855,  -7.42121826, 3.03364701,  -0.537135587};
	static const double g[] = {-0.000102663019, 0.373922766, -0.778684524, 1.25976745,  -1.616254, 0.786570232,
	                           2.03281882,      -4.90220042, 4.82578373,   -2.36697861, 0.47338299};
	double k = sqrt(log(2 - spin) / log(3));
	*re = *im = 0;
	for (int i = 10; i >= 0; i--) {
		*re = *re * k + f[i];
		*im = *im * k + g[i];
	}
}

void remnant_of(double x1, double x2, double chi1, double chi2, double *final_spin, double *final_mass)
{
	/* Husa et al. 2016, eqs. 3.6-3.8 */
	double n = x1 * x2, s = x1 * x1 * chi1 + x2 * x2 * chi2, h = s / (x1 * x1 + x2 * x2);
	*final_spin = 2 * sqrt(3) * n - 4.39925 * n * n + 9.39729 * n * n * n - 13.1809 * n * n * n * n +
	              (1 - 0.0850918 * n - 5.83703 * n * n) * s + (0.101467 * n - 2.09677 * n * n) * s * s +
	              (-1.35468 * n + 4.10896 * n * n) * s * s * s + (-0.867697 * n + 2.06405 * n * n) * s * s * s * s;
	double radiated = n * (0.0559745 + 0.580951 * n - 0.960673 * n * n + 3.35241 * n * n * n) *
	                  (1 + (-0.00303023 - 2.00661 * n + 7.70506 * n * n) * h) /
	                  (1 + (-0.67144 - 1.47569 * n + 7.30468 * n * n) * h);
	*final_mass = 1 - radiated;
}

static double polynomial(const double t[static 11], double eta, double x)
{
	double a = t[0] + t[1] * eta, b = t[2] + t[3] * eta + t[4] * eta * eta;
	double c = t[5] + t[6] * eta + t[7] * eta * eta, d = t[8] + t[9] * eta + t[10] * eta * eta;
	return a + x * (b + x * (c + x * d));
}

/* Khan et al. 2016, eqs. B14-B20, re-derived from post-Newtonian energy, flux and (2,2) mode. */
static void amplitude_coefficients(double n, double d, double cs, double ca, double a[static 7])
{
	a[0] = 1;
	a[1] = 0;
	a[2] = -323.0 / 224 + 451 * n / 168;
	a[3] = 27 * d * ca / 8 + (27.0 / 8 - 11 * n / 6) * cs;
	a[4] = -27312085.0 / 8128512 - 1975055 * n / 338688 + 105271 * n * n / 24192 + (-81.0 / 32 + 8 * n) * ca * ca -
	       81.0 / 16 * d * ca * cs + (-81.0 / 32 + 17 * n / 8) * cs * cs;
	a[5] = -85 * PI / 64 + 85 * PI * n / 16 + d * (285197.0 / 16128 - 1579 * n / 4032) * ca +
	       (285197.0 / 16128 - 15317 * n / 672 - 2227 * n * n / 1008) * cs;
	a[6] = -177520268561.0 / 8583708672 + (545384828789.0 / 5007163392 - 205 * PI * PI / 48) * n -
	       3248849057 * n * n / 178827264 + 34473079 * n * n * n / 6386688 +
	       (1614569.0 / 64512 - 1873643 * n / 16128 + 2167 * n * n / 42) * ca * ca +
	       (31 * PI / 12 - 7 * PI * n / 3) * cs +
	       (1614569.0 / 64512 - 61391 * n / 1344 + 57451 * n * n / 4032) * cs * cs +
	       d * ca * (31 * PI / 12 + (1614569.0 / 32256 - 165961 * n / 2688) * cs);
}

/* Khan et al. 2016, eqs. B6-B13; [5] is the bracket that multiplies 1 + ln(pi f). */
void taylor_coefficients(double n, double d, double cs, double ca, double p[8])
{
	p[0] = 1;
	p[1] = 0;
	p[2] = 3715.0 / 756 + 55 * n / 9;
	p[3] = -16 * PI + 113 * d * ca / 3 + (113.0 / 3 - 76 * n / 3) * cs;
	p[4] = 15293365.0 / 508032 + 27145 * n / 504 + 3085 * n * n / 72 + (-405.0 / 8 + 200 * n) * ca * ca -
	       405.0 / 4 * d * ca * cs + (-405.0 / 8 + 5 * n / 2) * cs * cs;
	p[5] = 38645 * PI / 756 - 65 * PI * n / 9 + d * (-732985.0 / 2268 - 140 * n / 9) * ca +
	       (-732985.0 / 2268 + 24260 * n / 81 + 340 * n * n / 9) * cs;
	p[6] = 11583231236531.0 / 4694215680 - 6848 * WAVE_EULER_GAMMA / 21 - 640 * PI * PI / 3 +
	       (-15737765635.0 / 3048192 + 2255 * PI * PI / 12) * n + 76055 * n * n / 1728 - 127825 * n * n * n / 1296 +
	       2270 * PI / 3 * d * ca + (2270 * PI / 3 - 520 * PI * n) * cs;
	p[7] =
	    77096675 * PI / 254016 + 378515 * PI * n / 1512 - 74045 * PI * n * n / 756 +
	    d * (-25150083775.0 / 3048192 + 26804935 * n / 6048 - 1985 * n * n / 48) * ca +
	    (-25150083775.0 / 3048192 + 10566655595 * n / 762048 - 1042165 * n * n / 3024 + 5345 * n * n * n / 36) * cs;
}

double taylor_phase(const double c[8], double eta, double mf)
{
	double v = cbrt(PI * mf), l = log(PI * mf), sum = 0;
	double k6 = c[6] - 6848.0 / 63 * (log(64) + l);
	const double k[8] = {c[0], c[1], c[2], c[3], c[4], c[5] * (1 + l), k6, c[7]};
	for (int i = 7; i >= 0; i--)
		sum = sum * v + k[i];
	return -PI / 4 + 3 / (128 * eta) * sum / pow(v, 5);
}

double taylor_slope(const double c[8], double eta, double mf)
{
	double v = cbrt(PI * mf), l = log(PI * mf), sum = 0, k6 = c[6] - 6848.0 / 63 * (log(64) + l);
	static const int terms[] = {0, 2, 3, 4, 7};
	for (int i = 0; i < 5; i++)
		sum += c[terms[i]] * (terms[i] - 5) / 3.0 * pow(v, terms[i] - 5);
	sum += c[5] + (k6 / 3 - 6848.0 / 63) * v;
	return 3 / (128 * eta * mf) * sum;
}

/* ---- amplitude ---- */

static double inspiral_amplitude(const struct imr *m, double f)
{
	double u = cbrt(PI * f), t = cbrt(f), sum = 0;
	for (int k = 6; k >= 0; k--)
		sum = sum * u + m->amplitude_pn[k];
	double f2 = f * f;
	return sum + m->coefficient[IMR_RHO1] * f2 * t + m->coefficient[IMR_RHO2] * f2 * t * t +
	       m->coefficient[IMR_RHO3] * f2 * f;
}

static double inspiral_amplitude_slope(const struct imr *m, double f)
{
	double u = cbrt(PI * f), t = cbrt(f), sum = 0;
	for (int k = 6; k >= 1; k--)
		sum = sum * u + m->amplitude_pn[k] * k / 3.0;
	sum *= u;
	return sum / f + m->coefficient[IMR_RHO1] * 7 / 3 * f * t + m->coefficient[IMR_RHO2] * 8 / 3 * f * t * t +
	       m->coefficient[IMR_RHO3] * 3 * f * f;
}

static double merger_amplitude(const struct imr *m, double f)
{
	double w = m->coefficient[IMR_GAMMA3] * m->f_damp, x = f - m->f_ring;
	return m->coefficient[IMR_GAMMA1] * w / (x * x + w * w) * exp(-m->coefficient[IMR_GAMMA2] * x / w);
}

static double merger_amplitude_slope(const struct imr *m, double f)
{
	double w = m->coefficient[IMR_GAMMA3] * m->f_damp, x = f - m->f_ring;
	return -merger_amplitude(m, f) * (2 * x / (x * x + w * w) + m->coefficient[IMR_GAMMA2] / w);
}

/* Gaussian elimination with pivots on the five conditions of the intermediate polynomial. */
static void solve5(double a[5][6], double out[static 5])
{
	for (int i = 0; i < 5; i++) {
		int best = i;
		for (int r = i + 1; r < 5; r++)
			best = fabs(a[r][i]) > fabs(a[best][i]) ? r : best;
		for (int c = 0; c < 6; c++) {
			double swap = a[i][c];
			a[i][c] = a[best][c];
			a[best][c] = swap;
		}
		for (int r = i + 1; r < 5; r++) {
			double q = a[r][i] / a[i][i];
			for (int c = i; c < 6; c++)
				a[r][c] -= q * a[i][c];
		}
	}
	for (int i = 4; i >= 0; i--) {
		out[i] = a[i][5];
		for (int c = i + 1; c < 5; c++)
			out[i] -= a[i][c] * out[c];
		out[i] /= a[i][i];
	}
}

static void join_amplitude(struct imr *m)
{
	double f1 = AMPLITUDE_JOIN, f3 = m->f_peak, f2 = (f1 + f3) / 2, a[5][6];
	const double at[3] = {f1, f2, f3};
	const double value[3] = {inspiral_amplitude(m, f1), m->coefficient[IMR_V2], merger_amplitude(m, f3)};
	for (int i = 0; i < 3; i++) {
		for (int k = 0; k < 5; k++)
			a[i][k] = pow(at[i], k);
		a[i][5] = value[i];
	}
	for (int i = 0; i < 2; i++) {
		double f = i == 0 ? f1 : f3;
		a[3 + i][0] = 0;
		for (int k = 1; k < 5; k++)
			a[3 + i][k] = k * pow(f, k - 1);
		a[3 + i][5] = i == 0 ? inspiral_amplitude_slope(m, f1) : merger_amplitude_slope(m, f3);
	}
	solve5(a, m->delta);
}

double imr_amplitude_norm(const struct imr *m, double f)
{
	if (f < AMPLITUDE_JOIN)
		return inspiral_amplitude(m, f);
	if (f >= m->f_peak)
		return merger_amplitude(m, f);
	return m->delta[0] + f * (m->delta[1] + f * (m->delta[2] + f * (m->delta[3] + f * m->delta[4])));
}

double imr_amplitude(const struct imr *m, double f)
{
	double t = cbrt(f);
	return f > IMR_END ? 0 : sqrt(2 * m->eta / (3 * cbrt(PI))) / (f * sqrt(t)) * imr_amplitude_norm(m, f);
}

/* ---- phase ---- */

static double inspiral_phase(const struct imr *m, double f)
{
	const double *c = m->coefficient;
	double t = cbrt(f);
	return taylor_phase(m->phase_pn, m->eta, f) + (c[IMR_SIGMA1] * f + 0.75 * c[IMR_SIGMA2] * f * t +
	                                               0.6 * c[IMR_SIGMA3] * f * t * t + 0.5 * c[IMR_SIGMA4] * f * f) /
	                                                  m->eta;
}

static double inspiral_slope(const struct imr *m, double f)
{
	const double *c = m->coefficient;
	double t = cbrt(f);
	return taylor_slope(m->phase_pn, m->eta, f) +
	       (c[IMR_SIGMA1] + c[IMR_SIGMA2] * t + c[IMR_SIGMA3] * t * t + c[IMR_SIGMA4] * f) / m->eta;
}

static double middle_phase(const struct imr *m, double f)
{
	const double *c = m->coefficient;
	return (c[IMR_BETA1] * f + c[IMR_BETA2] * log(f) - c[IMR_BETA3] / (3 * f * f * f)) / m->eta + m->c1_int +
	       m->c2_int * f;
}

static double middle_slope(const struct imr *m, double f)
{
	const double *c = m->coefficient;
	return (c[IMR_BETA1] + c[IMR_BETA2] / f + c[IMR_BETA3] / (f * f * f * f)) / m->eta + m->c2_int;
}

static double merger_phase(const struct imr *m, double f)
{
	const double *c = m->coefficient;
	return (c[IMR_ALPHA1] * f - c[IMR_ALPHA2] / f + 4.0 / 3 * c[IMR_ALPHA3] * sqrt(f * sqrt(f)) +
	        c[IMR_ALPHA4] * atan((f - c[IMR_ALPHA5] * m->f_ring) / m->f_damp)) /
	           m->eta +
	       m->c1_mr + m->c2_mr * f;
}

static double merger_slope(const struct imr *m, double f)
{
	const double *c = m->coefficient;
	double x = (f - c[IMR_ALPHA5] * m->f_ring) / m->f_damp;
	return (c[IMR_ALPHA1] + c[IMR_ALPHA2] / (f * f) + c[IMR_ALPHA3] / sqrt(sqrt(f)) +
	        c[IMR_ALPHA4] / (m->f_damp * (1 + x * x))) /
	           m->eta +
	       m->c2_mr;
}

double imr_phase_raw(const struct imr *m, double f)
{
	if (f < PHASE_JOIN)
		return inspiral_phase(m, f);
	return f < m->f_ring / 2 ? middle_phase(m, f) : merger_phase(m, f);
}

double imr_phase_slope(const struct imr *m, double f)
{
	if (f < PHASE_JOIN)
		return inspiral_slope(m, f);
	return f < m->f_ring / 2 ? middle_slope(m, f) : merger_slope(m, f);
}

double imr_phase(const struct imr *m, double f)
{
	return imr_phase_raw(m, f) - m->t0 * (f - m->f_peak) - m->phase_peak;
}

static void join_phase(struct imr *m)
{
	double f1 = PHASE_JOIN, f2 = m->f_ring / 2;
	m->c1_int = m->c2_int = m->c1_mr = m->c2_mr = 0;
	m->c2_int = inspiral_slope(m, f1) - middle_slope(m, f1);
	m->c1_int = inspiral_phase(m, f1) - middle_phase(m, f1);
	m->c2_mr = middle_slope(m, f2) - merger_slope(m, f2);
	m->c1_mr = middle_phase(m, f2) - merger_phase(m, f2);
	m->t0 = imr_phase_slope(m, m->f_peak);
	m->phase_peak = imr_phase_raw(m, m->f_peak);
}

enum qb_status imr_prepare(double q, double chi1, double chi2, struct imr *out, struct qb_error *e)
{
	memset(out, 0, sizeof *out);
	if (!(q >= 1) || q > 100)
		return qb_fail(e, QB_RANGE, "IMRPhenomD", "the model is calibrated to 18", "mass ratio %g", q);
	if (!(fabs(chi1) <= 0.99) || !(fabs(chi2) <= 0.99))
		return qb_fail(e, QB_RANGE, "IMRPhenomD", "|spin| <= 0.99", "spins %g, %g", chi1, chi2);
	double eta = q / ((1 + q) * (1 + q)), d = sqrt(fmax(0, 1 - 4 * eta)), x1 = (1 + d) / 2, x2 = (1 - d) / 2;
	double cs = (chi1 + chi2) / 2, ca = (chi1 - chi2) / 2, re, im;
	out->eta = eta;
	out->chi_eff = x1 * chi1 + x2 * chi2;
	out->chi_pn = out->chi_eff - 38 * eta / 113 * (chi1 + chi2);
	for (int i = 0; i < IMR_COEFFICIENTS; i++)
		out->coefficient[i] = polynomial(imr_table[i], eta, out->chi_pn - 1);
	remnant_of(x1, x2, chi1, chi2, &out->final_spin, &out->final_mass);
	ringdown_of(out->final_spin, &re, &im);
	out->f_ring = re / (2 * PI * out->final_mass);
	out->f_damp = im / (2 * PI * out->final_mass);
	double g2 = out->coefficient[IMR_GAMMA2], w = out->coefficient[IMR_GAMMA3] * out->f_damp;
	out->f_peak = g2 <= 1 ? fabs(out->f_ring + w * (sqrt(1 - g2 * g2) - 1) / g2) : fabs(out->f_ring - w / g2);
	amplitude_coefficients(eta, d, cs, ca, out->amplitude_pn);
	taylor_coefficients(eta, d, cs, ca, out->phase_pn);
	join_amplitude(out);
	join_phase(out);
	return QB_OK;
}
