/* One slot's state machine: what goes out before, during and after a hold or a stop, block by block. */
#include <string.h>

#include "client/agent/play.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "tests/near.h"

#define RATE  1024
#define START (INT64_C(1300000000) * NS_PER_S)
#define SLOT  (16 * NS_PER_S)
#define N     (16 * RATE)

static const double pi = 3.14159265358979323846;

struct scene {
	struct play p;
	double drive[8 * RATE]; /* from 4 s to 12 s */
	double out[N];
	int64_t n;
	int calls;
};

/* A constant drive, so that every step in the output is the machine's own; gain 0 is the null. */
static struct scene *scene(double gain)
{
	struct scene *s = QB_NEW(struct scene);
	for (int i = 0; i < 8 * RATE; i++)
		s->drive[i] = gain * 1000;
	play_begin(&s->p, START, SLOT, RATE);
	return s;
}

static void load(struct scene *s)
{
	play_load(&s->p, s->drive, 4 * RATE, 8 * RATE, START + 4 * NS_PER_S, START + 12 * NS_PER_S);
}

/* Emits all that is due at this many seconds into the slot. */
static void run_to(struct scene *s, double seconds)
{
	int64_t now = START + (int64_t)(seconds * 1e9);
	size_t n;
	do {
		s->calls++;
		n = play_emit(&s->p, now, s->out + s->n);
		assert_true(n <= play_block_samples(&s->p));
		s->n += (int64_t)n;
	} while (n > 0);
}

static double largest_step(const struct scene *s, int64_t from, int64_t to)
{
	double most = 0;
	for (int64_t i = from > 0 ? from : 1; i < to; i++)
		most = fmax(most, fabs(s->out[i] - s->out[i - 1]));
	return most;
}

static void assert_silent(const struct scene *s, int64_t from, int64_t to)
{
	for (int64_t i = from; i < to; i++)
		assert_true(s->out[i] == 0);
}

/* A half cosine of n samples has no step above pi / 2n of its height. */
static void assert_ramp(const struct scene *s, int64_t at)
{
	int64_t n = RATE / 4;
	assert_true(s->out[at - 1] == 1000);
	assert_true(largest_step(s, at, at + n + 1) <= 1000 * pi / (2 * (double)n) * 1.0001);
	for (int64_t i = at; i < at + n; i++)
		assert_true(s->out[i] < s->out[i - 1]);
	near_abs(s->out[at + n / 2 - 1], 500, 1e-9);
	assert_silent(s, at + n - 1, s->n);
}

static void plays_whole(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	int64_t from, to;
	assert_int_equal(play_block_samples(&s->p), 64);
	load(s);
	run_to(s, 3.9);
	assert_int_equal(s->p.state, PLAY_WAITING);
	assert_int_equal(play_sent(&s->p, &from, &to), 0);
	assert_true(from == to);
	run_to(s, 4.5);
	assert_int_equal(s->p.state, PLAY_PLAYING);
	assert_int_equal(play_sent(&s->p, &from, &to), RATE / 2);
	assert_int_equal(from, START + 4 * NS_PER_S);
	assert_int_equal(to, START + 4 * NS_PER_S + NS_PER_S / 2);
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_PLAYED);
	assert_true(play_done(&s->p));
	assert_int_equal(s->n, N);
	assert_int_equal(play_sent(&s->p, &from, &to), 8 * RATE);
	assert_int_equal(to, START + 12 * NS_PER_S);
	assert_silent(s, 0, 4 * RATE);
	for (int i = 4 * RATE; i < 12 * RATE; i++)
		assert_true(s->out[i] == 1000);
	assert_silent(s, 12 * RATE, N);
	assert_true(s->p.peak_counts == 1000);
	run_to(s, 1e4);
	assert_int_equal(s->n, N);
	qb_free(s);
}

static void only_whole_blocks_are_due(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	load(s);
	assert_int_equal(play_emit(&s->p, START + NS_PER_S / 16 - 1, s->out), 0);
	assert_int_equal(play_emit(&s->p, START + NS_PER_S / 16, s->out), 64);
	assert_int_equal(play_emit(&s->p, START + NS_PER_S / 16, s->out), 0);
	assert_int_equal(play_emit(&s->p, START - 1, s->out), 0);
	qb_free(s);
}

static void last_block_may_be_short(void **state)
{
	(void)state;
	struct play p;
	double out[64];
	play_begin(&p, START, NS_PER_S + NS_PER_S / 32, RATE);
	int64_t n = 0;
	for (int i = 0; i < 17; i++)
		n += (int64_t)play_emit(&p, START + 2 * NS_PER_S, out);
	assert_int_equal(n, RATE + 32);
	assert_true(play_done(&p));
}

static void hold_before_the_drive(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	int64_t from, to;
	load(s);
	run_to(s, 2);
	play_halt(&s->p, PLAY_HELD, START + 2 * NS_PER_S);
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_HELD);
	assert_int_equal(s->n, N);
	assert_silent(s, 0, N);
	assert_int_equal(play_sent(&s->p, &from, &to), 0);
	assert_true(from == to);
	assert_true(s->p.peak_counts == 0);
	qb_free(s);
}

/* A halt just before the drive must not let the beginning of the drive out under the ramp. */
static void hold_within_a_ramp_of_the_drive(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	load(s);
	play_halt(&s->p, PLAY_STOPPED, START + 4 * NS_PER_S - NS_PER_S / 10);
	run_to(s, 16);
	assert_silent(s, 0, N);
	qb_free(s);
}

static void hold_in_the_drive(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	int64_t from, to;
	load(s);
	run_to(s, 6);
	play_halt(&s->p, PLAY_HELD, 0); /* seen now: what is out stays out */
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_HELD);
	assert_ramp(s, 6 * RATE);
	assert_int_equal(play_sent(&s->p, &from, &to), 2 * RATE + RATE / 4);
	assert_int_equal(to, START + 6 * NS_PER_S + NS_PER_S / 4);
	qb_free(s);
}

/* A stop that took effect at a time that is still to be emitted, not at a block's edge. */
static void stop_between_blocks(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	load(s);
	run_to(s, 6);
	play_halt(&s->p, PLAY_STOPPED, START + 7 * NS_PER_S + NS_PER_S / 128);
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_STOPPED);
	assert_ramp(s, 7 * RATE + 8);
	qb_free(s);
}

static void stop_in_the_past(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	load(s);
	run_to(s, 8);
	play_halt(&s->p, PLAY_STOPPED, START + 5 * NS_PER_S);
	run_to(s, 16);
	assert_ramp(s, 8 * RATE);
	qb_free(s);
}

static void first_halt_counts(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	load(s);
	run_to(s, 6);
	play_halt(&s->p, PLAY_STOPPED, 0);
	run_to(s, 6.1);
	play_halt(&s->p, PLAY_HELD, 0);
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_STOPPED);
	assert_ramp(s, 6 * RATE);
	qb_free(s);
}

static void halt_after_the_drive(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	load(s);
	run_to(s, 6);
	play_halt(&s->p, PLAY_STOPPED, START + 13 * NS_PER_S);
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_PLAYED);
	qb_free(s);
	s = scene(1);
	load(s);
	run_to(s, 14);
	play_halt(&s->p, PLAY_HELD, 0);
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_PLAYED);
	assert_int_equal(s->n, N);
	qb_free(s);
}

static void without_a_key(void **state)
{
	(void)state;
	struct scene *s = scene(1);
	int64_t from, to;
	play_halt(&s->p, PLAY_SKIPPED, START);
	run_to(s, 16);
	assert_int_equal(s->p.state, PLAY_SKIPPED);
	assert_int_equal(s->n, N);
	assert_silent(s, 0, N);
	assert_int_equal(play_sent(&s->p, &from, &to), 0);
	qb_free(s);
}

/* Everything that can be seen from outside is alike: calls, sizes, states, times. Only the counts differ. */
static void null_and_live_take_the_same_calls(void **state)
{
	(void)state;
	for (int halt = 0; halt < 3; halt++) {
		struct scene *a = scene(1), *b = scene(0);
		const double times[] = {1, 3.99, 4.01, 6.3, 6.35, 11, 12.2, 16};
		load(a);
		load(b);
		for (size_t i = 0; i < sizeof times / sizeof times[0]; i++) {
			int64_t from[2], to[2];
			run_to(a, times[i]);
			run_to(b, times[i]);
			if (i == 3 && halt > 0) {
				play_halt(&a->p, halt == 1 ? PLAY_HELD : PLAY_STOPPED, START + 6 * NS_PER_S);
				play_halt(&b->p, halt == 1 ? PLAY_HELD : PLAY_STOPPED, START + 6 * NS_PER_S);
			}
			assert_int_equal(a->p.state, b->p.state);
			assert_int_equal(a->calls, b->calls);
			assert_int_equal(a->n, b->n);
			assert_int_equal(play_sent(&a->p, &from[0], &to[0]), play_sent(&b->p, &from[1], &to[1]));
			assert_memory_equal(from, from + 1, sizeof from[0]);
			assert_memory_equal(to, to + 1, sizeof to[0]);
		}
		assert_silent(b, 0, N);
		assert_true(a->p.peak_counts == 1000 && b->p.peak_counts == 0);
		qb_free(a);
		qb_free(b);
	}
}

static void notes(void **state)
{
	(void)state;
	assert_int_equal(play_notes(64 * NS_PER_S), 3);
	assert_int_equal(play_note_due(START, 64 * NS_PER_S, 0), START);
	assert_int_equal(play_note_due(START, 64 * NS_PER_S, 1), START + 60 * NS_PER_S);
	assert_int_equal(play_note_due(START, 64 * NS_PER_S, 2), START + 64 * NS_PER_S);
	assert_int_equal(play_notes(60 * NS_PER_S), 2);
	assert_int_equal(play_notes(5 * NS_PER_S), 2);
	assert_int_equal(play_notes(840 * NS_PER_S), 15);
	assert_int_equal(play_notes(841 * NS_PER_S), 15);
	assert_int_equal(play_notes(3600 * NS_PER_S), 15);
	assert_int_equal(play_note_due(START, 3600 * NS_PER_S, 13), START + 13 * 258 * NS_PER_S);
	assert_int_equal(play_note_due(START, 3600 * NS_PER_S, 14), START + 3600 * NS_PER_S);
	for (int64_t s = 1; s < 100000; s += 37) {
		int n = play_notes(s * NS_PER_S);
		assert_true(n >= 2 && n <= PLAY_NOTES_MAX);
		assert_true(play_note_due(0, s * NS_PER_S, n - 2) < s * NS_PER_S);
		assert_true(play_note_due(0, s * NS_PER_S, n - 1) == s * NS_PER_S);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(plays_whole),
	    cmocka_unit_test(only_whole_blocks_are_due),
	    cmocka_unit_test(last_block_may_be_short),
	    cmocka_unit_test(hold_before_the_drive),
	    cmocka_unit_test(hold_within_a_ramp_of_the_drive),
	    cmocka_unit_test(hold_in_the_drive),
	    cmocka_unit_test(stop_between_blocks),
	    cmocka_unit_test(stop_in_the_past),
	    cmocka_unit_test(first_halt_counts),
	    cmocka_unit_test(halt_after_the_drive),
	    cmocka_unit_test(without_a_key),
	    cmocka_unit_test(null_and_live_take_the_same_calls),
	    cmocka_unit_test(notes),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
