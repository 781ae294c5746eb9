/*
 * Half-open stretches of time [start, end): sorted, disjoint lists with union, subtraction, membership and livetime.
 * Observing time, vetoes and the background livetime are all such lists.
 */
#ifndef QB_AUDIT_SEGMENTS_H
#define QB_AUDIT_SEGMENTS_H

#include <stdbool.h>
#include <stddef.h>

struct audit_segment {
	double start_gps, end_gps; /* s */
};

struct audit_segments {
	struct audit_segment *at; /* owned; sorted and disjoint after segments_tidy() */
	size_t n, cap;
};

/* Appends [start, end); an empty or reversed stretch, or one with a non-finite end, is left out. */
void segments_add(struct audit_segments *s, double start_gps, double end_gps);
/* Sorts and merges stretches that overlap or touch. */
void segments_tidy(struct audit_segments *s);
void segments_free(struct audit_segments *s);

/* The functions below need tidy lists; results are tidy and owned by the caller. */
bool segments_hold(const struct audit_segments *s, double gps);
double segments_livetime_s(const struct audit_segments *s); /* compensated sum */
struct audit_segments segments_subtract(const struct audit_segments *s, const struct audit_segments *holes);
struct audit_segments segments_union(const struct audit_segments *a, const struct audit_segments *b);
/* The time at which so much livetime has gone by since the start of the list; its last end when there is less. */
double segments_time_at(const struct audit_segments *s, double livetime_s);

#endif
