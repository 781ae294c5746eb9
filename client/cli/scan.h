/*
 * The scan: a plain matched-filter search that comes along for rehearsals and for checking the chain. Per station it
 * correlates the strain with every template of a bank; peaks in two stations within the light travel time make a
 * candidate; the same search on lists shifted in time says how often noise does that by itself.
 *
 * Ref: Finn & Chernoff 1993 (PRD 47 2198) for the matched filter; time shifts are common practice
 */
#ifndef QB_CLIENT_CLI_SCAN_H
#define QB_CLIENT_CLI_SCAN_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/json.h"
#include "server/wave/network.h"
#include "server/wave/source.h"

#define SCAN_MAX_TEMPLATES 1000

struct scan_bank {
	int n;
	struct wave_source *templates; /* owned; sources without sky and loudness */
};
/* YAML list of sources without sky, distance and arrival. QB_FORMAT, QB_RANGE with file:line. */
enum qb_status scan_bank_parse(const char *text, size_t n, const char *file, struct scan_bank *out,
                               struct qb_error *e) QB_MUST_USE;
void scan_bank_free(struct scan_bank *bank);

/* One local maximum of a station's |z(t)| for one template. */
struct scan_trigger {
	double t_s; /* after the start of the scan */
	double snr;
	int template;
	int owner; /* used in between: the loudest candidate it belongs to */
};
struct scan_list {
	size_t n, cap;
	struct scan_trigger *trigger; /* owned; by template, then time */
};

struct scan_settings {
	double threshold;         /* of one station's SNR */
	double network_threshold; /* of a candidate's network SNR */
	double rate_hz;           /* at which the search runs; the strain's rate is a whole multiple */
	bool design_noise;        /* use the network file's noise, not an estimate from the data */
	int threads;              /* the result does not depend on it */
	int shifts;               /* background experiments */
	double slack_s;           /* beyond the light travel time */
};
extern const struct scan_settings scan_defaults;

/*
 * One station's triggers.
 *
 * Given:    strain, n    samples at data_rate_hz
 * Errors:   QB_RANGE     too short, or rates that don't divide
 */
enum qb_status scan_station(const struct wave_station *station, const struct scan_bank *bank,
                            const struct scan_settings *settings, const double *strain, size_t n, double data_rate_hz,
                            struct scan_list *out, struct qb_error *e) QB_MUST_USE;

#define SCAN_NONE (-1)
struct scan_candidate {
	double network_snr;
	int template;
	int trigger[WAVE_MAX_STATIONS]; /* index into the station's list, or SCAN_NONE */
	double far_per_year;            /* false-alarm rate; an upper limit when no louder background was seen */
	bool far_is_limit;
};
struct scan_result {
	int n;
	struct scan_candidate *candidate; /* owned; loudest first */
	double background_s;              /* time of the shifted experiments together */
	size_t background_events;
};
/* `lists` gives their owners. seconds: length of the scan. */
void scan_coincide(const struct wave_network *network, const struct scan_settings *settings, struct scan_list lists[],
                   double seconds, struct scan_result *out);
void scan_result_free(struct scan_result *r);

/* What a claim says beyond its candidate. */
struct scan_claim_settings {
	const char *pipeline;
	double far_ceiling_per_year; /* candidates above it are not claimed */
	double time_offset_s;        /* added to every arrival: a pipeline with a clock that is wrong */
};
/* JSON objects as in a claim file, loudest first; owned by the caller. */
json_t *scan_claims(const struct wave_network *network, const struct scan_bank *bank, const struct scan_list lists[],
                    const struct scan_result *result, const struct scan_claim_settings *settings, int64_t start_gps_ns);

#endif
