/* Polarisations at Earth's centre in the frequency domain, for every family. */
#ifndef QB_WAVE_SPECTRUM_H
#define QB_WAVE_SPECTRUM_H

#include <complex.h>

#include "server/wave/source.h"

/*
 * Given:    f, n        frequencies, Hz, >= 0, in any order
 *           taper       true: Planck tapers as for time series (binaries: 0.7 .. 1 of the lowest frequency; TaylorF2
 * also at its end); false: the bare model Returned: plus, cross n values each, 1/Hz, t = 0 at the arrival, kernel
 * exp(-2 pi i f t) Errors:   QB_RANGE    from source_check
 */
enum qb_status spectrum_at(const struct wave_source *s, const double *f, size_t n, bool taper, double complex *plus,
                           double complex *cross, struct qb_error *e) QB_MUST_USE;
/* Highest frequency with any signal, Hz. */
double spectrum_end_hz(const struct wave_source *s);
/* 1 / (exp(1/x - 1/(1-x)) + 1) for 0 < x < 1, 0 below, 1 above. */
double planck_taper(double x);
/* Newtonian time to merger from frequency f, s. */
double newtonian_time_s(double chirp_mass_msun, double f_hz);

#endif
