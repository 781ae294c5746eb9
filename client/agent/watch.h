/*
 * What the driver looks at while it waits and plays: the clock that counts, the slot as the service shows it, and the
 * station's own state file.
 */
#ifndef QB_AGENT_WATCH_H
#define QB_AGENT_WATCH_H

#include "client/agent/driver.h"

enum watch_going { GOING_UNKNOWN, GOING_NO, GOING_YES };

struct watch_slot {
	bool held, stopped, reported;
	bool ended;             /* the campaign, before its time */
	int64_t stopped_gps_ns; /* of the standing stop */
	enum watch_going going;
	int host; /* place of the host that plays it; -1 undecided */
	int64_t notes;
};

/* The campaign ended before this slot's freeze: there is nothing to play in it or after it. */
bool watch_ended(const struct watch_slot *seen);

/* The real clock, or under a rehearsal clock the service's. Errors: QB_UNREACHABLE. */
enum qb_status watch_now(struct driver *d, int64_t *now_gps_ns, struct qb_error *e) QB_MUST_USE;
/* GET slots/{n}: this station's part of it. */
enum qb_status watch_slot(struct driver *d, int64_t slot, struct watch_slot *out, struct qb_error *e) QB_MUST_USE;
/* What the answer of slots/{n} says about a station; for watch_slot and its test. Errors: QB_FORMAT. */
enum qb_status watch_slot_parse(const json_t *doc, int64_t slot, const char *station, struct watch_slot *out,
                                struct qb_error *e) QB_MUST_USE;

/*
 * The state file: first line "observing" or "not-observing". Anything else, or a file that cannot be read, counts as
 * not observing: a station that cannot say how it is must not be driven.
 */
bool watch_observing(const char *path);

/* An answer came: contact stands. */
void watch_contact(struct driver *d);
/* No contact for longer than opt.contact_s; never under a rehearsal clock, which stands still without the service. */
bool watch_contact_lost(const struct driver *d);

/* Waits between two looks; short under a rehearsal clock, whose owner is waiting for us. */
void watch_pause(const struct driver *d, bool playing);
bool watch_stopping(const struct driver *d);

#endif
