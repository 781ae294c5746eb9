/* The invented network and a few sources for the unit tests of the signal room. */
#ifndef QB_TESTS_WAVE_FIXTURE_H
#define QB_TESTS_WAVE_FIXTURE_H

#include <string.h>

#include "server/wave/network.h"
#include "server/wave/source.h"
#include "tests/near.h"

#define FIXTURE_ARRIVAL INT64_C(1488789012123456789)

#define FIXTURE_ACTUATOR                                                                                               \
	"    actuator:\n"                                                                                              \
	"      kind: pendulum-force\n"                                                                                 \
	"      mass_kg: 40\n"                                                                                          \
	"      pendulum_hz: 1.0\n"                                                                                     \
	"      quality: 1000\n"                                                                                        \
	"      newton_per_volt: 2.0e-9\n"                                                                              \
	"      volt_per_count: 1.5e-4\n"                                                                               \
	"      converter_bits: 18\n"                                                                                   \
	"      rate_hz: 4096\n"                                                                                        \
	"      slew_counts_per_s: 2.0e7\n"                                                                             \
	"      band_hz: [12, 18, 1400, 1700]\n"                                                                        \
	"      calibration_id: tarn-2027a\n"                                                                           \
	"      valid: {from: 2027-01-01T00:00:00Z, to: 2027-06-01T00:00:00Z}\n"

#define FIXTURE_STATION(name, lat, lon, x, y)                                                                          \
	"  - name: " name "\n"                                                                                         \
	"    latitude_deg: " lat "\n"                                                                                  \
	"    longitude_deg: " lon "\n"                                                                                 \
	"    height_m: 120\n"                                                                                          \
	"    x_arm_azimuth_deg: " x "\n"                                                                               \
	"    y_arm_azimuth_deg: " y "\n"                                                                               \
	"    arm_length_m: 4000\n"                                                                                     \
	"    noise: {curve: advanced-broadband-b}\n"

static const char fixture_network[] =
    "network: fells\nstations:\n" FIXTURE_STATION("tarn", "54.45", "-3.21", "35", "125")
        FIXTURE_ACTUATOR FIXTURE_STATION("heron", "44.12", "21.64", "71.5", "161.5")
            FIXTURE_STATION("skerry", "61.73", "-12.48", "348", "78");

static const char fixture_pair[] = "family: compact-binary\n"
                                   "model: IMRPhenomD\n"
                                   "primary_mass_msun: 36\n"
                                   "secondary_mass_msun: 29\n"
                                   "primary_spin: 0.2\n"
                                   "distance_mpc: 800\n"
                                   "inclination_rad: 0.7\n"
                                   "polarization_rad: 1.0\n"
                                   "phase_rad: 0.4\n"
                                   "right_ascension_rad: 4.21\n"
                                   "declination_rad: 0.38\n"
                                   "arrival_gps: \"1488789012.123456789\"\n"
                                   "lowest_frequency_hz: 20\n";

static const char fixture_burst[] = "family: sine-gaussian\n"
                                    "frequency_hz: 150\n"
                                    "quality: 9\n"
                                    "hrss_per_sqrt_hz: 1e-22\n"
                                    "ellipticity_rad: 0.3\n"
                                    "right_ascension_rad: 4.21\n"
                                    "declination_rad: 0.38\n"
                                    "arrival_gps: \"1488789012.123456789\"\n";

static inline struct wave_network *fixture_open(void)
{
	struct wave_network *n;
	struct qb_error e = {0};
	assert_int_equal(network_parse(fixture_network, strlen(fixture_network), "network.yaml", NULL, NULL, &n, &e),
	                 QB_OK);
	return n;
}

static inline struct wave_source fixture_source(const char *text)
{
	struct wave_source s;
	struct qb_error e = {0};
	assert_int_equal(source_parse(text, strlen(text), "source.yaml", &s, &e), QB_OK);
	return s;
}

#endif
