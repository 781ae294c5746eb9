/*
 * Problem documents (RFC 9457): the one form in which the service says no. What they hold depends on the kind of the
 * refusal and on the caller's own request, never on anything sealed.
 */
#ifndef QB_API_PROBLEM_H
#define QB_API_PROBLEM_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/err.h"

#define PROBLEM_MEDIA_TYPE "application/problem+json"

struct problem {
	int http_status;      /* 400..599; 0: no problem */
	const char *word;     /* the stable last part of `type`; static */
	char detail[900];     /* one line; may be empty */
	bool has_until;       /* a wait: until_gps_ns is shown */
	int64_t until_gps_ns; /* GPS ns */
};

/* A problem of the HTTP layer itself; detail is cut to size. Keeps an earlier one: the first cause wins. */
void problem_set(struct problem *p, int http_status, const char *word, const char *fmt, ...) QB_PRINTF(4, 5);

/*
 * The problem that a failed use case makes.
 *
 * Given:    e             filled by the use case; our own faults keep their text for the log and show none of it
 *           until_gps_ns  with QB_CONFLICT: the time until which to wait, or 0
 */
void problem_from_error(struct problem *p, const struct qb_error *e, int64_t until_gps_ns);

/*
 * Given:    instance   a URN of this occurrence, also in the log
 * Returned: compact JSON text; the caller frees it with qb_free
 */
char *problem_text(const struct problem *p, const char *instance);

#endif
