/*
 * One slot at one station as a pure state machine: which samples go out next, given the time and what stands in the
 * way. No clock, no files, no network; the same calls and the same counts whatever the drive holds.
 */
#ifndef QB_AGENT_PLAY_H
#define QB_AGENT_PLAY_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/drill/report.h"

#define PLAY_BLOCKS_PER_S 16
#define PLAY_RAMP_S       0.25 /* half a cosine, from the drive's full value to silence */
#define PLAY_NEVER        INT64_MAX

struct play {
	/* Given, borrowed; set by play_begin. */
	int64_t slot_start_ns;
	double rate_hz;
	int64_t n_samples;   /* of the whole slot */
	const double *drive; /* counts; NULL while there is no key: silence */
	int64_t drive_at;    /* sample of the slot where drive[0] belongs */
	int64_t drive_n;
	int64_t window_from, window_to; /* samples of the recipe's whole drive, [from, to) */
	/* State. */
	enum play_state state;
	int64_t next;      /* the first sample that was not emitted yet */
	int64_t ramp_from; /* PLAY_NEVER, or the first sample that the ramp weighs */
	int64_t ramp_n;
	int64_t silent_from; /* end of the ramp: everything from here on is zero */
	double peak_counts;  /* largest absolute value emitted */
	double last;         /* the last value emitted */
};

/*
 * A slot without a drive (yet).
 *
 * Given:    slot_start_ns, slot_ns   rate_hz > 0; at least one sample
 */
void play_begin(struct play *p, int64_t slot_start_ns, int64_t slot_ns, double rate_hz);

/* The slot's first sample that is not earlier than this time; times beyond an end give that end. */
int64_t play_sample_at(const struct play *p, int64_t gps_ns);

/*
 * Gives it the drive, before the first sample of the window went out.
 *
 * Given:    drive, at, n      counts and the slot's sample where they begin; outside it there is silence
 *           from_ns, to_ns    the whole drive's window, inside the slot
 */
void play_load(struct play *p, const double *drive, int64_t at, int64_t n, int64_t from_ns, int64_t to_ns);

/*
 * Ends it: what was to come fades over PLAY_RAMP_S and is then silence, for the rest of the slot. Nothing begins after
 * it. The first halt counts; one that comes after the whole drive was played changes nothing.
 *
 * Given:    why     PLAY_HELD, PLAY_STOPPED, PLAY_SKIPPED or PLAY_FAILED
 *           at_ns   when it took effect; samples that are out already stay out
 */
void play_halt(struct play *p, enum play_state why, int64_t at_ns);
bool play_halted(const struct play *p);

/*
 * The next block, of 1 / PLAY_BLOCKS_PER_S s, if it is due at now_ns; the slot's last block may be shorter.
 *
 * Returned: out     up to play_block_samples() values
 *           result  how many; 0 when nothing is due
 */
size_t play_emit(struct play *p, int64_t now_ns, double *out);
size_t play_block_samples(const struct play *p);
bool play_done(const struct play *p);

/* What was sent of the window so far: [*from_ns, *to_ns) and the number of samples; equal times while none was. */
int64_t play_sent(const struct play *p, int64_t *from_ns, int64_t *to_ns);

/*
 * Notes of a slot: number k is due at start + k * interval, as long as that is before the slot's end, and the last one
 * at the end itself; the interval is one minute, or longer where a slot would need more than PLAY_NOTES_MAX.
 */
int play_notes(int64_t slot_ns);
int64_t play_note_due(int64_t slot_start_ns, int64_t slot_ns, int number);

#endif
