/*
 * The actuator: a force on a suspended mirror. Its transfer, the band-limited inverse, the forward path for the
 * simulated instrument, and the limits that every drive is held to. Drives are never clipped: beyond a limit is an
 * error.
 */
#ifndef QB_WAVE_ACTUATION_H
#define QB_WAVE_ACTUATION_H

#include <complex.h>

#include "server/wave/network.h"

/* Displacement per force of the suspended mirror, m/N: 1 / (M (w0^2 - w^2 + i w w0 / Q)). */
double complex actuator_compliance(double mass_kg, double pendulum_hz, double quality, double f_hz);
/* Strain per count, with sign; counts per strain band-limited by the Planck edges (0 outside). */
double complex actuator_forward(const struct wave_station *s, double f_hz);
double complex actuator_inverse(const struct wave_station *s, double f_hz);
/* Length of the inverse's kernel to either side, s: 10 / (f2 - f1). */
double actuator_tail_s(const struct wave_actuator *a);

/* What a drive of counts does to the strain: n samples at rate_hz, periodic in n (pad with zeros). */
enum qb_status actuator_apply(const struct wave_station *s, double rate_hz, const double *counts, size_t n,
                              double *strain, struct qb_error *e) QB_MUST_USE;

#define ACTUATOR_MAX_BANDS 32
struct actuator_limits {
	double largest_drive; /* fraction of the converter's range 2^(bits-1) */
	int n_bands;
	double excluded_bands_hz[ACTUATOR_MAX_BANDS][2];
};
struct actuator_limit {
	char name[64]; /* "peak", "slew", "edges", "band 495-515 Hz" */
	const char *unit;
	double value, limit; /* value <= limit */
	double margin;       /* limit / value, INFINITY for a silent drive */
	bool within;
};
struct actuator_report {
	double peak_counts, rms_counts, slew_counts_per_s;
	double quantisation_ratio; /* rounding noise in the band over the drive's RMS: advice, not a limit */
	int n;
	struct actuator_limit limit[3 + ACTUATOR_MAX_BANDS];
	bool within; /* all of them */
	double least_margin;
};
void actuator_check(const struct wave_actuator *a, const struct actuator_limits *limits, double rate_hz,
                    const double *counts, size_t n, struct actuator_report *out);

#endif
