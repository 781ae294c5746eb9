/*
 * The driver's sealed play note (every minute of every slot) and play report (once a slot): codecs of their content.
 * Custody pads them to one size each, so that a null slot's look like a live one's.
 */
#ifndef QB_DRILL_REPORT_H
#define QB_DRILL_REPORT_H

#include <stdint.h>

#include "server/base/buf.h"

#define PLAY_NOTE_BYTES   500  /* largest content of a note */
#define PLAY_REPORT_BYTES 4000 /* largest content of a report */
#define PLAY_NOTES_MAX    15   /* notes 0..14 of one slot and station */

enum play_state {
	PLAY_WAITING, /* the drive has not begun */
	PLAY_PLAYING,
	PLAY_PLAYED,  /* to its end */
	PLAY_HELD,    /* a hold kept it from beginning, or ended it */
	PLAY_STOPPED, /* a stop did */
	PLAY_SKIPPED, /* not going: too late, no key, not ready */
	PLAY_FAILED,  /* a fault of the driver, its sink or a limit */
	PLAY_STATES
};
const char *play_state_word(enum play_state s);

struct play_note {
	int64_t slot;
	char station[64];
	int number; /* 0..14 within the slot */
	int64_t at_gps_ns;
	enum play_state state;
	int64_t played_from_ns, played_to_ns; /* of the drive so far; equal while nothing was played */
	int64_t samples;                      /* sent to the sink so far, within the drive window */
	double peak_counts;                   /* largest absolute drive so far, 0 for a null */
};

struct play_report {
	int64_t slot;
	char station[64];
	enum play_state state;
	int64_t played_from_ns, played_to_ns;
	int64_t samples;
	double peak_counts;
	double margin;            /* smallest limit / demand over all limits; 1 is at the limit; 0 for a null */
	uint8_t samples_hash[64]; /* H over the played samples as little-endian float64 counts */
	char calibration_id[64];  /* of the actuator used; "" none */
	char reason[400];         /* why not played; "" when played */
};

/*
 * JSON content. Encoding fails only for our own bugs (names too long), decoding is strict: unknown or missing keys,
 * wrong types, impossible combinations (to < from, negative counts) are refused.
 *
 * Returned: out     content appended, at most PLAY_NOTE_BYTES / PLAY_REPORT_BYTES
 * Errors:   QB_FORMAT, QB_RANGE
 */
enum qb_status play_note_encode(const struct play_note *n, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status play_note_decode(const void *p, size_t n, struct play_note *out, struct qb_error *e) QB_MUST_USE;
enum qb_status play_report_encode(const struct play_report *r, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status play_report_decode(const void *p, size_t n, struct play_report *out, struct qb_error *e) QB_MUST_USE;

#endif
