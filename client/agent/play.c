/*
 * One slot at one station as a pure state machine; see play.h. Samples are counted from the slot's start, so that two
 * stations and an auditor agree on every one of them.
 */
#include "client/agent/play.h"

#include <math.h>

#include "server/base/check.h"
#include "server/base/clock.h"

#define PI 3.14159265358979323846

int64_t play_sample_at(const struct play *p, int64_t gps_ns)
{
	int64_t ns = gps_ns - p->slot_start_ns;
	if (ns <= 0)
		return 0;
	/* A sample's time is rounded to whole nanoseconds. */
	double x =
	    ceil((double)(ns / NS_PER_S) * p->rate_hz + (double)(ns % NS_PER_S) * p->rate_hz / 1e9 - p->rate_hz * 1e-9);
	return x >= (double)p->n_samples ? p->n_samples : (int64_t)x;
}

static int64_t time_of(const struct play *p, int64_t sample)
{
	return p->slot_start_ns + (int64_t)llround((double)sample / p->rate_hz * 1e9);
}

void play_begin(struct play *p, int64_t slot_start_ns, int64_t slot_ns, double rate_hz)
{
	CHECK(slot_ns > 0 && rate_hz > 0);
	*p = (struct play){.slot_start_ns = slot_start_ns,
	                   .rate_hz = rate_hz,
	                   .state = PLAY_WAITING,
	                   .ramp_from = PLAY_NEVER,
	                   .silent_from = PLAY_NEVER};
	p->n_samples = (int64_t)llround((double)slot_ns / 1e9 * rate_hz);
	p->ramp_n = (int64_t)ceil(PLAY_RAMP_S * rate_hz);
	CHECK(p->n_samples > 0);
	p->window_from = p->window_to = p->n_samples;
}

void play_load(struct play *p, const double *drive, int64_t at, int64_t n, int64_t from_ns, int64_t to_ns)
{
	CHECK(p->drive == NULL && at >= 0 && n > 0 && at + n <= p->n_samples && from_ns < to_ns);
	p->window_from = play_sample_at(p, from_ns);
	p->window_to = play_sample_at(p, to_ns);
	p->drive = drive;
	p->drive_at = at;
	p->drive_n = n;
}

bool play_halted(const struct play *p)
{
	return p->state == PLAY_HELD || p->state == PLAY_STOPPED || p->state == PLAY_SKIPPED || p->state == PLAY_FAILED;
}

void play_halt(struct play *p, enum play_state why, int64_t at_ns)
{
	int64_t at = play_sample_at(p, at_ns);
	CHECK(why == PLAY_HELD || why == PLAY_STOPPED || why == PLAY_SKIPPED || why == PLAY_FAILED);
	if (p->state == PLAY_PLAYED || play_halted(p))
		return;
	at = at > p->next ? at : p->next;
	if (p->drive != NULL && at >= p->window_to)
		return;
	p->state = why;
	p->ramp_from = at;
	/* Before the drive begins there is nothing to fade: a ramp would let its first quarter second out. */
	p->silent_from = p->ramp_from <= p->window_from ? p->ramp_from : p->ramp_from + p->ramp_n;
}

static double weight(const struct play *p, int64_t i)
{
	if (i < p->ramp_from)
		return 1;
	if (i >= p->silent_from)
		return 0;
	return 0.5 * (1 + cos(PI * (double)(i - p->ramp_from + 1) / (double)p->ramp_n));
}

size_t play_block_samples(const struct play *p)
{
	double n = floor(p->rate_hz / PLAY_BLOCKS_PER_S);
	return n < 1 ? 1 : (size_t)n;
}

bool play_done(const struct play *p)
{
	return p->next >= p->n_samples;
}

static void follow_window(struct play *p)
{
	if (p->drive == NULL || play_halted(p))
		return;
	if (p->next >= p->window_to)
		p->state = PLAY_PLAYED;
	else if (p->next > p->window_from)
		p->state = PLAY_PLAYING;
}

size_t play_emit(struct play *p, int64_t now_ns, double *out)
{
	int64_t n = (int64_t)play_block_samples(p);
	if (n > p->n_samples - p->next)
		n = p->n_samples - p->next;
	double peak = p->peak_counts;
	if (n <= 0 || now_ns < time_of(p, p->next + n))
		return 0;
	for (int64_t k = 0; k < n; k++) {
		int64_t i = p->next + k, j = i - p->drive_at;
		bool inside = p->drive != NULL && j >= 0 && j < p->drive_n;
		p->last = (inside ? p->drive[j] : 0) * weight(p, i) + 0.0;
		/* One instruction and no jump: how often a jump is taken would not be the same for silence. */
		peak = fabs(p->last) > peak ? fabs(p->last) : peak;
		out[k] = p->last;
	}
	p->peak_counts = peak;
	p->next += n;
	follow_window(p);
	return (size_t)n;
}

int64_t play_sent(const struct play *p, int64_t *from_ns, int64_t *to_ns)
{
	int64_t to = p->next < p->window_to ? p->next : p->window_to;
	if (to > p->silent_from)
		to = p->silent_from;
	int64_t n = p->drive != NULL && to > p->window_from ? to - p->window_from : 0;
	*from_ns = p->drive != NULL ? time_of(p, p->window_from) : p->slot_start_ns;
	*to_ns = n > 0 ? time_of(p, to) : *from_ns;
	return n;
}

static int64_t note_interval(int64_t slot_ns)
{
	int64_t most = (PLAY_NOTES_MAX - 1) * NS_PER_S;
	int64_t least = (slot_ns + most - 1) / most * NS_PER_S;
	return least > 60 * NS_PER_S ? least : 60 * NS_PER_S;
}

int play_notes(int64_t slot_ns)
{
	int64_t step = note_interval(slot_ns);
	return (int)((slot_ns + step - 1) / step) + 1;
}

int64_t play_note_due(int64_t slot_start_ns, int64_t slot_ns, int number)
{
	int64_t after = number * note_interval(slot_ns);
	return slot_start_ns + (after < slot_ns ? after : slot_ns);
}
