/*
 * The rig: a simulated instrument for rehearsals. It writes what a station would record: coloured Gaussian noise, and
 * what the station's drives do to the mirror. Works in blocks, so that its memory does not grow with the run.
 */
#ifndef QB_CLIENT_CLI_RIG_H
#define QB_CLIENT_CLI_RIG_H

#include <stdbool.h>
#include <stdint.h>

#include "server/wave/network.h"

struct rig_run {
	int64_t start_gps_ns;
	double seconds, rate_hz; /* whole number of samples */
	uint64_t seed;           /* the same seed writes the same bytes */
	bool noise;              /* false: only the drives */
};

/*
 * Given:    drives    directory of slot-NNNNNN.npy (counts) with side-cars; NULL or missing: silence
 *           out       path of the .npy to write (strain); its side-car goes beside it
 * Returned: *slots    drives that were not silent; may be NULL
 * Errors:   QB_IO; QB_FORMAT, QB_RANGE for a drive that can't be used
 */
enum qb_status rig_station(const struct wave_station *station, const struct rig_run *run, const char *drives,
                           const char *out, int *slots, struct qb_error *e) QB_MUST_USE;

#endif
