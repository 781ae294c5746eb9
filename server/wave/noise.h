/* One-sided noise power spectral densities, analytic fits and tables. */
#ifndef QB_WAVE_NOISE_H
#define QB_WAVE_NOISE_H

#include "server/wave/network.h"

/* S(f) in 1/Hz; INFINITY where there is no sensitivity (below the curve's start, outside a table). */
double noise_psd(const struct wave_noise *noise, double f_hz);
double noise_curve_psd(enum wave_curve curve, double f_hz);
double noise_curve_lowest_hz(enum wave_curve curve);
const char *noise_curve_word(enum wave_curve curve);
bool noise_curve_find(const char *word, enum wave_curve *out);
/*
 * Two columns: frequency (Hz, ascending), amplitude spectral density (1/sqrt(Hz), positive); '#' begins a comment.
 * Errors: QB_FORMAT with the line
 */
enum qb_status noise_table_parse(const char *text, const char *file, struct wave_noise *out,
                                 struct qb_error *e) QB_MUST_USE;
void noise_free(struct wave_noise *noise);

#endif
