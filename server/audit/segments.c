/* Segment arithmetic by sorting and sweeping; every list the audit uses passes through here once. */
#include "server/audit/segments.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"

void segments_add(struct audit_segments *s, double start_gps, double end_gps)
{
	if (!isfinite(start_gps) || !isfinite(end_gps) || !(start_gps < end_gps))
		return;
	if (s->n == s->cap) {
		s->cap = s->cap == 0 ? 16 : s->cap * 2;
		s->at = qb_realloc(s->at, s->cap, sizeof *s->at);
	}
	s->at[s->n++] = (struct audit_segment){start_gps, end_gps};
}

static int by_start(const void *a, const void *b)
{
	const struct audit_segment *x = a, *y = b;
	if (x->start_gps < y->start_gps)
		return -1;
	return x->start_gps > y->start_gps;
}

void segments_tidy(struct audit_segments *s)
{
	if (s->n < 2)
		return;
	qsort(s->at, s->n, sizeof *s->at, by_start);
	size_t last = 0;
	for (size_t i = 1; i < s->n; i++) {
		if (s->at[i].start_gps > s->at[last].end_gps)
			s->at[++last] = s->at[i];
		else if (s->at[i].end_gps > s->at[last].end_gps)
			s->at[last].end_gps = s->at[i].end_gps;
	}
	s->n = last + 1;
}

void segments_free(struct audit_segments *s)
{
	qb_free(s->at);
	*s = (struct audit_segments){0};
}

/* Number of segments that start at or before gps. */
static size_t starts_up_to(const struct audit_segments *s, double gps)
{
	size_t lo = 0, hi = s->n;
	while (lo < hi) {
		const size_t mid = lo + (hi - lo) / 2;
		if (s->at[mid].start_gps <= gps)
			lo = mid + 1;
		else
			hi = mid;
	}
	return lo;
}

bool segments_hold(const struct audit_segments *s, double gps)
{
	const size_t i = starts_up_to(s, gps);
	return i > 0 && gps < s->at[i - 1].end_gps;
}

/* Kahan's sum: thousands of stretches must not cost the last digits. */
static void add_up(double *sum, double *lost, double x)
{
	const double y = x - *lost, t = *sum + y;
	*lost = (t - *sum) - y;
	*sum = t;
}

double segments_livetime_s(const struct audit_segments *s)
{
	double sum = 0, lost = 0;
	for (size_t i = 0; i < s->n; i++)
		add_up(&sum, &lost, s->at[i].end_gps - s->at[i].start_gps);
	return sum;
}

double segments_time_at(const struct audit_segments *s, double livetime_s)
{
	double sum = 0, lost = 0;
	for (size_t i = 0; i < s->n; i++) {
		const double length = s->at[i].end_gps - s->at[i].start_gps;
		if (sum + length > livetime_s)
			return s->at[i].start_gps + (livetime_s - sum);
		add_up(&sum, &lost, length);
	}
	return s->n > 0 ? s->at[s->n - 1].end_gps : 0;
}

struct audit_segments segments_subtract(const struct audit_segments *s, const struct audit_segments *holes)
{
	struct audit_segments out = {0};
	size_t h = 0;
	for (size_t i = 0; i < s->n; i++) {
		double start = s->at[i].start_gps;
		const double end = s->at[i].end_gps;
		while (h < holes->n && holes->at[h].end_gps <= start)
			h++;
		for (size_t k = h; k < holes->n && holes->at[k].start_gps < end; k++) {
			segments_add(&out, start, fmin(end, holes->at[k].start_gps));
			start = fmax(start, holes->at[k].end_gps);
		}
		segments_add(&out, start, end);
	}
	return out;
}

struct audit_segments segments_union(const struct audit_segments *a, const struct audit_segments *b)
{
	struct audit_segments out = {0};
	for (size_t i = 0; i < a->n; i++)
		segments_add(&out, a->at[i].start_gps, a->at[i].end_gps);
	for (size_t i = 0; i < b->n; i++)
		segments_add(&out, b->at[i].start_gps, b->at[i].end_gps);
	segments_tidy(&out);
	return out;
}
