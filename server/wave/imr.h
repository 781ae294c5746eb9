/*
 * Aligned-spin inspiral, merger and ringdown of a binary black hole, (2,2) mode, in geometric units (total mass 1).
 *
 * Ref: Husa et al. 2016 (PRD 93 044006), Khan et al. 2016 (PRD 93 044007), published as IMRPhenomD
 */
#ifndef QB_WAVE_IMR_H
#define QB_WAVE_IMR_H

#include "server/base/err.h"

enum {
	IMR_RHO1,
	IMR_RHO2,
	IMR_RHO3,
	IMR_V2,
	IMR_GAMMA1,
	IMR_GAMMA2,
	IMR_GAMMA3,
	IMR_SIGMA1,
	IMR_SIGMA2,
	IMR_SIGMA3,
	IMR_SIGMA4,
	IMR_BETA1,
	IMR_BETA2,
	IMR_BETA3,
	IMR_ALPHA1,
	IMR_ALPHA2,
	IMR_ALPHA3,
	IMR_ALPHA4,
	IMR_ALPHA5,
	IMR_COEFFICIENTS
};

struct imr {
	double eta, chi_eff, chi_pn;
	double coefficient[IMR_COEFFICIENTS];
	double final_spin, final_mass, f_ring, f_damp, f_peak; /* dimensionless frequencies M f */
	double amplitude_pn[7], phase_pn[8];                   /* phase_pn[5] multiplies 1 + ln(pi f) */
	double delta[5];
	double c1_int, c2_int, c1_mr, c2_mr; /* joins */
	double t0, phase_peak;               /* alignment at f_peak */
};

#define IMR_END 0.2 /* M f where the model ends */

/*
 * Given:    x1 >= x2      mass fractions, x1 + x2 = 1
 *           chi1, chi2    dimensionless spins, |chi| <= 0.99
 * Errors:   QB_RANGE
 */
enum qb_status imr_prepare(double mass_ratio, double chi1, double chi2, struct imr *out,
                           struct qb_error *e) QB_MUST_USE;
double imr_amplitude_norm(const struct imr *m, double mf); /* a(f): amplitude over its leading order */
double imr_amplitude(const struct imr *m, double mf);      /* |h22|(f), total mass 1, unit distance */
double imr_phase_raw(const struct imr *m, double mf);
double imr_phase_slope(const struct imr *m, double mf);
double imr_phase(const struct imr *m, double mf); /* aligned: value and slope zero at f_peak */

/* TaylorF2 phase with these coefficients (imr phases below use it), v = (pi mf)^(1/3). */
void taylor_coefficients(double eta, double delta, double chi_s, double chi_a, double out[8]);
double taylor_phase(const double c[8], double eta, double mf);
double taylor_slope(const double c[8], double eta, double mf);
/* Final spin and mass; quasi-normal mode of Kerr, l = m = 2, n = 0: M omega. */
void remnant_of(double x1, double x2, double chi1, double chi2, double *final_spin, double *final_mass);
void ringdown_of(double spin, double *re, double *im);

#endif
