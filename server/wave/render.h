/* Time series: polarisations at Earth's centre, strain at a station, drive of its actuator. */
#ifndef QB_WAVE_RENDER_H
#define QB_WAVE_RENDER_H

#include "server/wave/network.h"
#include "server/wave/source.h"

/* How long before and after its arrival (at one place) a signal lasts, tapers included, s. */
void wave_extent(const struct wave_source *s, double *before_s, double *after_s);
/* The same for a station's drive: with the tails of the actuator's inverse. */
void wave_drive_extent(const struct wave_station *station, const struct wave_source *s, double *before_s,
                       double *after_s);
/* Arrival at a station, GPS ns, rounded. */
int64_t wave_arrival_gps_ns(const struct wave_station *station, const struct wave_source *s);

/*
 * Given:    rate_hz, start_gps_ns, n   the grid: sample k is at start + k / rate
 *           finite_arms                true is the default everywhere
 * Returned: out                        n samples; strain, dimensionless (drive: counts). Samples outside the signal are
 * 0. Errors:   QB_RANGE                   rate not positive, signal longer than 2^26 samples; no actuator (drive) Owns:
 * nothing
 */
enum qb_status render_strain(const struct wave_station *station, const struct wave_source *s, double rate_hz,
                             int64_t start_gps_ns, size_t n, bool finite_arms, double *out,
                             struct qb_error *e) QB_MUST_USE;
enum qb_status render_drive(const struct wave_station *station, const struct wave_source *s, double rate_hz,
                            int64_t start_gps_ns, size_t n, double *out, struct qb_error *e) QB_MUST_USE;
enum qb_status render_polarizations(const struct wave_source *s, double rate_hz, int64_t start_gps_ns, size_t n,
                                    double *plus, double *cross, struct qb_error *e) QB_MUST_USE;

#endif
