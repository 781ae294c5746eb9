/*
 * The truth record: the plaintext of a slot's sealed record, as deterministic JSON, and its comparison with a record
 * that was derived again from the opened seed. It holds everything that the audit needs to know about a slot.
 */
#ifndef QB_DRILL_TRUTH_H
#define QB_DRILL_TRUTH_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/json.h"
#include "server/wave/source.h"

#define TRUTH_VERSION      1
#define TRUTH_CONVENTIONS  1    /* frames and phases as docs/signals.md, version 1 */
#define TRUTH_BYTES        8192 /* largest content */
#define TRUTH_MAX_STATIONS 8
#define TRUTH_PLACES       2
#define TRUTH_TOLERANCE    1e-6 /* relative, for numbers that another processor computed */

struct truth_station {
	char name[64];
	double snr;                            /* optimal, at gain 1 */
	double peak_strain, peak_drive_counts; /* at gain 1 */
	int64_t drive_from_ns, drive_to_ns;    /* the whole drive, tapers and filter tails included */
	uint8_t recipe_hash[TRUTH_PLACES][64]; /* filled in by the sealer; zeros: no recipe for that place */
};

struct drill_truth {
	int64_t slot, slot_start_ns, slot_ns;
	bool live;
	double gain;               /* 1 live, 0 null */
	char name[64];             /* of the family in the plan */
	struct wave_source source; /* as seen at the stations, arrival at Earth's centre */
	bool source_frame;
	double redshift;    /* 0 in the station frame */
	int redraws;        /* draws before this one that were beyond a limit */
	double network_snr; /* at gain 1 */
	bool has_weight;
	double weight_mpc3; /* audit C1; see drill/draw.h for what it is */
	int n_stations;
	struct truth_station station[TRUTH_MAX_STATIONS];
};

/* The rules that hold for every truth record. Errors: QB_RANGE. */
enum qb_status truth_check(const struct drill_truth *t, struct qb_error *e) QB_MUST_USE;

/*
 * Returned: out        content appended, at most TRUTH_BYTES
 * Errors:   QB_RANGE   a number that is not finite, too many stations, too long
 */
enum qb_status truth_encode(const struct drill_truth *t, struct buf *out, struct qb_error *e) QB_MUST_USE;
/* Strict. Errors: QB_FORMAT, QB_RANGE. */
enum qb_status truth_decode(const void *p, size_t n, struct drill_truth *out, struct qb_error *e) QB_MUST_USE;

/*
 * Whether `again`, derived from the seed, is `sealed`: names, counts and times of slots exactly, computed numbers
 * within `tolerance` relative, times of arrivals and drives within tolerance seconds.
 *
 * Errors:   QB_NO       with the first difference by name and both values
 */
enum qb_status truth_compare(const struct drill_truth *sealed, const struct drill_truth *again, double tolerance,
                             struct qb_error *e) QB_MUST_USE;

/* The slot's fields as an audit folder's slots.jsonl has them, all but `state`; owned by the caller. */
json_t *truth_audit_json(const struct drill_truth *t);
/* How the audit names a slot. */
void truth_slot_id(int64_t slot, char out[static 32]);
/* The whole interval of the drill over all stations. */
void truth_drive_interval(const struct drill_truth *t, int64_t *from_ns, int64_t *to_ns);

#endif
