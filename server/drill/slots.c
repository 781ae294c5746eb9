/* Slot arithmetic in integer GPS nanoseconds. */
#include "server/drill/slots.h"

#include "server/base/check.h"

int64_t slots_count(const struct slots *s)
{
	if (s->slot_ns <= 0 || s->end_gps_ns <= s->start_gps_ns)
		return 0;
	return (s->end_gps_ns - s->start_gps_ns) / s->slot_ns;
}

bool slots_tile(const struct slots *s)
{
	int64_t n = slots_count(s);
	return n >= 1 && n <= SLOTS_MAX && (s->end_gps_ns - s->start_gps_ns) % s->slot_ns == 0;
}

int64_t slots_start(const struct slots *s, int64_t n)
{
	CHECK(n >= 0 && n <= slots_count(s));
	return s->start_gps_ns + n * s->slot_ns;
}

int64_t slots_freeze(const struct slots *s, int64_t n)
{
	return slots_start(s, n) - s->lead_ns;
}

int64_t slots_at(const struct slots *s, int64_t gps_ns)
{
	int64_t n = slots_count(s);
	if (n == 0 || gps_ns < s->start_gps_ns || gps_ns >= s->start_gps_ns + n * s->slot_ns)
		return -1;
	return (gps_ns - s->start_gps_ns) / s->slot_ns;
}

bool slots_touched(const struct slots *s, int64_t from_ns, int64_t to_ns, int64_t *first, int64_t *last)
{
	int64_t n = slots_count(s);
	int64_t end = s->start_gps_ns + n * s->slot_ns;
	if (n == 0 || to_ns < from_ns || to_ns < s->start_gps_ns || from_ns >= end)
		return false;
	*first = from_ns <= s->start_gps_ns ? 0 : slots_at(s, from_ns);
	*last = to_ns >= end ? n - 1 : slots_at(s, to_ns);
	return true;
}

bool slots_window(const struct slots *s, int64_t n, int64_t *from_ns, int64_t *to_ns)
{
	int64_t start = slots_start(s, n);
	*from_ns = start + s->guard_ns;
	*to_ns = start + s->slot_ns - s->guard_ns;
	return s->guard_ns >= 0 && *from_ns < *to_ns;
}
