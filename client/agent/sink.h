/*
 * Where a station's drive goes: one table of kinds of sink behind four calls, so that a front end of an instrument is
 * one more line in the table. A sink gets every slot whole, at the same size, whatever the slot holds.
 */
#ifndef QB_AGENT_SINK_H
#define QB_AGENT_SINK_H

#include <stddef.h>
#include <stdint.h>

#include "server/base/err.h"

struct sink;

struct sink_slot {
	const char *station;
	int64_t slot;
	int64_t start_gps_ns;
	double rate_hz;
	int64_t n_samples;
};

/*
 * Given:    spec        "kind:argument"; "file:DIR" writes DIR/slot-NNNNNN.npy (float64 counts) and a .json side-car;
 *                       DIR is made when it is not there
 * Returned: *out        owned by the caller (sink_close)
 * Errors:   QB_USAGE    an unknown kind, or no argument; QB_IO
 */
enum qb_status sink_open(const char *spec, struct sink **out, struct qb_error *e) QB_MUST_USE;
void sink_close(struct sink **s);

/* One slot: begin, blocks in order that add up to n_samples, end. Errors: QB_IO. */
enum qb_status sink_begin(struct sink *s, const struct sink_slot *slot, struct qb_error *e) QB_MUST_USE;
enum qb_status sink_put(struct sink *s, const double *counts, size_t n, struct qb_error *e) QB_MUST_USE;
/* Only now does anybody find the slot: a crash before it leaves nothing under the final name. */
enum qb_status sink_end(struct sink *s, struct qb_error *e) QB_MUST_USE;
void sink_abandon(struct sink *s); /* forgets a slot that was begun; no effect without one */

/* "file:DIR" ...: one line a kind, for the usage text; NULL at the end. */
const char *sink_help(int i);

#endif
