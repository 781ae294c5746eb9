/* Background livetime and the Poisson estimate of accidental matches, whole or by quarters of the livetime. */
#include "server/audit/accidental.h"

#include <math.h>

#define ENOUGH_CLAIMS 40  /* below this, quarters differ by a factor of three through scatter alone */
#define RATE_VARIES   3.0 /* busiest over quietest quarter */

struct audit_background audit_background_of(const struct audit_input *in, const struct audit_match *m)
{
	struct audit_segments near = {0};
	const double w = m->largest_window_s;
	for (size_t i = 0; i < in->n_slots; i++)
		if (audit_state_actuated(in->slots[i].state))
			segments_add(&near, in->slots[i].arrival_gps - w, in->slots[i].arrival_gps + w);
	segments_tidy(&near);
	struct audit_segments holes = segments_union(&near, &in->settings.vetoes);
	struct audit_background b = {
	    .time = segments_subtract(&in->settings.observing, &holes),
	    .observing_s = segments_livetime_s(&in->settings.observing),
	};
	b.livetime_s = segments_livetime_s(&b.time);
	for (int i = 0; i < 3; i++)
		b.quarter_gps[i] = segments_time_at(&b.time, b.livetime_s * (i + 1) / 4);
	segments_free(&near);
	segments_free(&holes);
	return b;
}

void audit_background_free(struct audit_background *b)
{
	segments_free(&b->time);
	*b = (struct audit_background){0};
}

static unsigned quarter_of(const struct audit_background *b, double gps)
{
	unsigned q = 0;
	while (q < 3 && gps >= b->quarter_gps[q])
		q++;
	return q;
}

/* Averages the probability over live drills, each with the rate of its own quarter. */
static void average_quarters(const struct audit_input *in, const struct audit_background *b,
                             const double lambda[static 4], struct audit_accidental *a)
{
	double sum = 0, n = 0;
	for (size_t i = 0; i < in->n_slots; i++) {
		if (in->slots[i].state != AUDIT_LIVE)
			continue;
		sum += -expm1(-lambda[quarter_of(b, in->slots[i].arrival_gps)]);
		n++;
	}
	if (n > 0) {
		a->probability = sum / n;
		a->by_quarter = true;
	}
}

struct audit_accidental audit_accidental_of(const struct audit_input *in, const struct audit_match *m,
                                            const struct audit_background *b, size_t pipeline)
{
	struct audit_accidental a = {0};
	double quarter[4] = {0}, count[4] = {0}, squares = 0;
	if (!(b->livetime_s > 0))
		return a;
	for (size_t i = 0; i < in->n_claims; i++) {
		const struct audit_claim *c = &in->claims[i];
		if (c->pipeline != pipeline || m->fates[i].status != AUDIT_UNEXPLAINED ||
		    !segments_hold(&b->time, c->arrival_gps))
			continue;
		const double part = 2 * m->fates[i].window_s / b->livetime_s;
		const unsigned q = quarter_of(b, c->arrival_gps);
		a.background_claims++;
		a.lambda += part;
		squares += part * part;
		quarter[q] += 4 * part;
		count[q]++;
	}
	a.probability = -expm1(-a.lambda);
	a.standard_error = exp(-a.lambda) * sqrt(squares);
	const double most = fmax(fmax(count[0], count[1]), fmax(count[2], count[3]));
	const double least = fmin(fmin(count[0], count[1]), fmin(count[2], count[3]));
	if (a.background_claims >= ENOUGH_CLAIMS && most > RATE_VARIES * least)
		average_quarters(in, b, quarter, &a);
	return a;
}

struct audit_accidental audit_accidental_union(const struct audit_accidental *each, size_t n)
{
	struct audit_accidental u = {0};
	double none = 1, variance = 0;
	for (size_t i = 0; i < n; i++) {
		none *= 1 - each[i].probability;
		u.lambda += each[i].lambda;
		u.background_claims += each[i].background_claims;
		u.by_quarter = u.by_quarter || each[i].by_quarter;
	}
	for (size_t i = 0; i < n; i++) {
		const double part =
		    each[i].probability < 1 ? none / (1 - each[i].probability) * each[i].standard_error : 0;
		variance += part * part;
	}
	u.probability = 1 - none;
	u.standard_error = sqrt(variance);
	return u;
}

void audit_corrected(double estimate, struct audit_interval wilson, const struct audit_accidental *a,
                     double out[static 3])
{
	const double p = a->probability, margin = p > 0.02 ? 2 * a->standard_error : 0;
	const double most = fmin(p + margin, 1 - 1e-12), least = fmax(0, p - margin);
	out[0] = audit_without_accidental(estimate, fmin(p, 1 - 1e-12));
	out[1] = audit_without_accidental(wilson.lower, most);
	out[2] = audit_without_accidental(wilson.upper, least);
}
