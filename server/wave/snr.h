/* Optimal signal-to-noise ratios: rho^2 = 4 int |h|^2 / S df from the source's lowest frequency to `highest_hz`. */
#ifndef QB_WAVE_SNR_H
#define QB_WAVE_SNR_H

#include "server/wave/network.h"
#include "server/wave/source.h"

/*
 * Given:    highest_hz    upper limit (Nyquist of the recording); the model may end before
 * Returned: station_snr   n_stations values (may be NULL); *network_snr root of the sum of squares
 * Errors:   QB_RANGE      from source_check
 */
enum qb_status snr_network(const struct wave_network *network, const struct wave_source *s, double highest_hz,
                           double *station_snr, double *network_snr, struct qb_error *e) QB_MUST_USE;
/* Overhead, face-on (binaries), optimally polarised: the largest SNR this source could have at the station. */
enum qb_status snr_best(const struct wave_station *station, const struct wave_source *s, double highest_hz, double *snr,
                        struct qb_error *e) QB_MUST_USE;

#endif
