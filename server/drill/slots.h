/*
 * Slot arithmetic: one stretch of GPS time tiled by equal slots. Everything is integer nanoseconds, so that the
 * service, the drivers and an auditor agree on every edge to the last digit.
 */
#ifndef QB_DRILL_SLOTS_H
#define QB_DRILL_SLOTS_H

#include <stdbool.h>
#include <stdint.h>

#define SLOTS_MAX INT64_C(1000000)

struct slots {
	int64_t start_gps_ns, end_gps_ns; /* [start, end) */
	int64_t slot_ns;                  /* length of each; divides end - start */
	int64_t guard_ns;                 /* kept free of drive at both ends of each slot */
	int64_t lead_ns;                  /* a slot's recipe can be unwrapped this long before the slot starts */
};

/* Whole slots in the stretch; 0 when start, end or length make no sense. */
int64_t slots_count(const struct slots *s);
/* True when the length divides the stretch without a rest and the count is 1..SLOTS_MAX. */
bool slots_tile(const struct slots *s);
/* Start of slot n (0 <= n <= count: n = count gives the end of the last). */
int64_t slots_start(const struct slots *s, int64_t n);
/* When readiness freezes and the slot's key may be released: start - lead. */
int64_t slots_freeze(const struct slots *s, int64_t n);
/* The slot that holds this time (half-open), or -1 outside the stretch. */
int64_t slots_at(const struct slots *s, int64_t gps_ns);
/* First and last slot that [from, to] touches; false when it touches none. */
bool slots_touched(const struct slots *s, int64_t from_ns, int64_t to_ns, int64_t *first, int64_t *last);
/* The part of slot n that a drive may use: guard after its start to guard before its end. False when empty. */
bool slots_window(const struct slots *s, int64_t n, int64_t *from_ns, int64_t *to_ns);

#endif
