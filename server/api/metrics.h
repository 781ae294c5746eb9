/*
 * Counts of requests by route and status, as OpenMetrics text. Routes whose use would tell that something happened
 * (claims, milestones, openings) are not counted at all: a hidden entry must not show in a counter either.
 */
#ifndef QB_API_METRICS_H
#define QB_API_METRICS_H

#include <stdatomic.h>
#include <stdbool.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/wire/routes.h"

#define METRICS_STATUSES 18

struct metrics {
	/* The last row counts requests without a route; the last column every other status. */
	atomic_ullong count[R_COUNT + 1][METRICS_STATUSES + 1];
	int64_t started_unix_s;
};

/* route may be NULL: no route matched. */
void metrics_count(struct metrics *m, const struct wire_route *route, int http_status);
/* May this route show in counters? */
bool metrics_counted(const struct wire_route *route);

struct metrics_now {
	uint64_t ledger_size;
	int64_t now_gps_ns;
	int connections, event_streams;
};
void metrics_text(struct metrics *m, const struct metrics_now *now, struct buf *out);

#endif
