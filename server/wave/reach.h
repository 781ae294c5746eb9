/* How far the network reaches for a kind of source: horizon, range, and the sensitive volume by Monte Carlo. */
#ifndef QB_WAVE_REACH_H
#define QB_WAVE_REACH_H

#include "server/wave/network.h"
#include "server/wave/source.h"

struct reach {
	double horizon_mpc[WAVE_MAX_STATIONS], range_mpc[WAVE_MAX_STATIONS]; /* SNR 8 (or the threshold) alone */
	double volume_mpc3, volume_mpc3_standard_error; /* network SNR at least the threshold, flat static space */
	long samples;
};
/*
 * Given:    threshold   SNR
 *           samples     of sky position and orientation
 *           seed        the same result for a seed, whatever the number of threads
 * Errors:   QB_RANGE    a family without a distance; threshold <= 0
 * Ref:      Finn & Chernoff 1993 (PRD 47 2198)
 */
enum qb_status reach_of(const struct wave_network *network, const struct wave_source *s, double threshold, long samples,
                        uint64_t seed, struct reach *out, struct qb_error *e) QB_MUST_USE;

#endif
