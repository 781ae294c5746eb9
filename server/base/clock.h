/*
 * GPS time in integer nanoseconds, UTC at the edges, and the clock as an argument, so that tests need no sleeps.
 */
#ifndef QB_BASE_CLOCK_H
#define QB_BASE_CLOCK_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/err.h"

#define NS_PER_S INT64_C(1000000000)

/* A source of "now": GPS nanoseconds. The system clock below, or a rehearsal clock that somebody moves. */
struct clock_source {
	int64_t (*now_gps_ns)(void *state);
	void *state;
};

struct clock_source clock_system(void); /* CLOCK_REALTIME converted with the leap table */
int64_t clock_now(const struct clock_source *c);

/* UTC minus-leap bookkeeping: GPS - UTC in seconds at a GPS time (18 since 1167264018). */
int clock_leap_seconds(int64_t gps_ns);
int64_t clock_gps_from_unix(int64_t unix_s, int64_t ns); /* POSIX seconds (UTC) -> GPS ns */
void clock_unix_from_gps(int64_t gps_ns, int64_t *unix_s, int64_t *ns, bool *in_leap); /* in_leap: 23:59:60 */

/* "1456789012.345678901": up to nine decimals, trailing zeros dropped; 0..2^33 s. Buffers of at least 32 bytes. */
const char *clock_gps_text(int64_t gps_ns, char *out, size_t size);
bool clock_gps_parse(const char *s, int64_t *gps_ns);
/* "2027-03-01T00:00:00Z", with up to nine decimals; a leap second is written :60. At least 40 bytes. */
const char *clock_utc_text(int64_t gps_ns, char *out, size_t size);
/*
 * For people: UTC to the second, and the local time with its name and offset beside it where TZ says another zone,
 * "2027-03-01T04:00:00Z (Mon 05:00:00 CET, +01:00)". At least 80 bytes.
 */
#define CLOCK_PEOPLE_TEXT 80
const char *clock_people_text(int64_t gps_ns, char *out, size_t size);
bool clock_utc_parse(const char *s, int64_t *gps_ns);

#endif
