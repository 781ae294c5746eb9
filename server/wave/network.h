/*
 * The network of stations: where they are, how their arms lie, their noise and their actuators, read strictly from the
 * network file.
 */
#ifndef QB_WAVE_NETWORK_H
#define QB_WAVE_NETWORK_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/err.h"

#define WAVE_MAX_STATIONS 8

enum wave_curve {
	WAVE_ADVANCED_BROADBAND_B, /* the default */
	WAVE_ADVANCED_BROADBAND,
	WAVE_THIRD_GENERATION,
	WAVE_THIRD_GENERATION_B,
	WAVE_CURVES,
	WAVE_CURVE_TABLE /* from an amplitude spectral density file */
};

struct wave_noise {
	enum wave_curve curve;
	size_t n;              /* of the table */
	double *log_f, *log_s; /* owned; natural logarithms of Hz and of 1/Hz (power), ascending in f */
};

/* A suspended mirror pushed by a force: counts -> volts -> newtons -> metres. */
struct wave_actuator {
	bool present;
	double mass_kg, pendulum_hz, quality;
	double newton_per_volt, volt_per_count;
	int converter_bits;
	double rate_hz;           /* of drives */
	double slew_counts_per_s; /* largest */
	double band_hz[4];        /* Planck edges of the inverse */
	char calibration_id[64];
	int64_t valid_from_gps_ns, valid_to_gps_ns;
	int sign;                                                                /* +1 or -1 */
	double amplitude_uncertainty, phase_uncertainty_rad, time_uncertainty_s; /* one sigma */
	char witness_channel[64];                                                /* "" none */
	struct wave_noise witness_noise; /* of the witness channel; n == 0: not given */
};

struct wave_station {
	char name[64];
	double latitude_rad, longitude_rad, height_m; /* WGS-84 */
	double x_arm_azimuth_rad, y_arm_azimuth_rad;  /* clockwise from north */
	double x_arm_tilt_rad, y_arm_tilt_rad;        /* above the local horizontal */
	double arm_length_m;
	double position_m[3], x_arm[3], y_arm[3]; /* Earth-fixed; arms are unit vectors */
	struct wave_noise noise;
	struct wave_actuator actuator;
};

struct wave_network {
	char name[64];
	int n_stations;
	struct wave_station stations[WAVE_MAX_STATIONS];
};

/* Hands out the text of a file that the network names (an amplitude spectral density table). */
typedef enum qb_status (*network_fetch)(void *state, const char *name, struct buf *out, struct qb_error *e);

/*
 * Given:    text, n     YAML or JSON
 *           file        its name for errors
 *           fetch       may be NULL when no file may be named
 * Returned: *out        owned by the caller (wave_network_free)
 * Errors:   QB_FORMAT, QB_RANGE with file:line, key path, the value seen and what is accepted
 */
enum qb_status network_parse(const char *text, size_t n, const char *file, network_fetch fetch, void *state,
                             struct wave_network **out, struct qb_error *e) QB_MUST_USE;
void wave_network_free(struct wave_network **network);
/* Position of a station by name, or -1. */
int network_station(const struct wave_network *network, const char *name);

/*
 * Geodetic coordinates (already in *s, rad and m) -> position_m, x_arm, y_arm.
 * Ref: WGS-84 ellipsoid a = 6378137 m, 1/f = 298.257223563
 */
void station_survey(struct wave_station *s);
/* Light travel time between two stations, s. */
double station_light_time_s(const struct wave_station *a, const struct wave_station *b);

#endif
