/* Counters and their OpenMetrics text (openmetrics.io, specification 1.0). */
#include "server/api/metrics.h"

#include <inttypes.h>
#include <string.h>

#include "server/base/clock.h"

static const int statuses[METRICS_STATUSES] = {200, 201, 202, 400, 401, 403, 404, 405, 408,
                                               409, 411, 413, 414, 415, 421, 422, 500, 503};

bool metrics_counted(const struct wire_route *route)
{
	return route == NULL || (strstr(route->path, "/claims") == NULL && strstr(route->path, "/openings") == NULL);
}

void metrics_count(struct metrics *m, const struct wire_route *route, int http_status)
{
	int column = 0;
	if (!metrics_counted(route))
		return;
	while (column < METRICS_STATUSES && statuses[column] != http_status)
		column++;
	atomic_fetch_add(&m->count[route != NULL ? route->id : R_COUNT][column], 1);
}

static void row(struct metrics *m, int i, struct buf *out)
{
	const struct wire_route *r = i < R_COUNT ? &wire_routes()[i] : NULL;
	for (int column = 0; column <= METRICS_STATUSES; column++) {
		unsigned long long n = atomic_load(&m->count[i][column]);
		if (n == 0)
			continue;
		buf_printf(out, "quietbell_requests_total{method=\"%s\",route=\"%s\",status=\"",
		           r != NULL ? r->method : "other", r != NULL ? r->path : "none");
		if (column < METRICS_STATUSES)
			buf_printf(out, "%d\"} %llu\n", statuses[column], n);
		else
			buf_printf(out, "other\"} %llu\n", n);
	}
}

static void gauge(struct buf *out, const char *name, const char *help, int64_t value)
{
	buf_printf(out, "# TYPE %s gauge\n# HELP %s %s\n%s %" PRId64 "\n", name, name, help, name, value);
}

void metrics_text(struct metrics *m, const struct metrics_now *now, struct buf *out)
{
	buf_text(
	    out,
	    "# TYPE quietbell_requests counter\n"
	    "# HELP quietbell_requests Requests answered, by route and status; claims and openings are left out.\n");
	for (int i = 0; i <= R_COUNT; i++)
		row(m, i, out);
	gauge(out, "quietbell_ledger_entries", "Entries in the public ledger.", (int64_t)now->ledger_size);
	gauge(out, "quietbell_clock_gps_seconds", "The service's own time.", now->now_gps_ns / NS_PER_S);
	gauge(out, "quietbell_connections", "Open connections.", now->connections);
	gauge(out, "quietbell_event_streams", "Open event streams.", now->event_streams);
	gauge(out, "process_start_time_seconds", "Start of the process, POSIX seconds.", m->started_unix_s);
	buf_text(out, "# EOF\n");
}
