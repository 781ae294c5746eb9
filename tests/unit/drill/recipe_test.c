/* Recipes: fixed size, round trip, null against live, every byte matters, bad fields one by one. */
#include <math.h>

#include "server/base/clock.h"
#include "server/drill/recipe.h"
#include "server/drill/signal.h"
#include "tests/unit/drill/demo.h"

static const uint8_t campaign[16] = {1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15, 16};

static struct drill_recipe a_recipe(int64_t slot, int station)
{
	struct drill_plan *p = demo_plan(DEMO_PLAN);
	struct drill_truth t;
	struct drill_recipe r;
	demo_draw(p, false, slot, &t);
	drill_recipe_from_truth(&t, station, campaign, 4096, &r);
	plan_free(&p);
	return r;
}

static void round_trip(void **state)
{
	(void)state;
	for (int64_t slot = 0; slot < 6; slot++) {
		struct drill_recipe r = a_recipe(slot, (int)(slot % 3)), back;
		uint8_t a[DRILL_RECIPE_BYTES], b[DRILL_RECIPE_BYTES];
		struct qb_error e = {0};
		struct wave_source s;
		assert_int_equal(drill_recipe_encode(&r, a, &e), QB_OK);
		assert_int_equal(drill_recipe_decode(a, sizeof a, &back, &e), QB_OK);
		assert_int_equal(drill_recipe_encode(&back, b, &e), QB_OK);
		assert_memory_equal(a, b, sizeof a);
		assert_string_equal(back.station, r.station);
		assert_int_equal(back.slot, slot);
		assert_int_equal(back.drive_from_ns, r.drive_from_ns);
		assert_memory_equal(back.campaign, campaign, 16);
		near_abs(back.gain, r.gain, 0);
		assert_int_equal(drill_recipe_to_source(&back, &s, &e), QB_OK);
		assert_int_equal(s.arrival_gps_ns, r.source.arrival_gps_ns);
		for (int i = 0; i < signal_parameter_count(&s); i++)
			near_abs(signal_parameter_value(&s, i), signal_parameter_value(&r.source, i), 0);
		near_abs(s.right_ascension_rad, r.source.right_ascension_rad, 0);
	}
}

/* A null slot's recipe differs from the same draw made live in the gain alone. */
static void null_differs_in_gain_alone(void **state)
{
	(void)state;
	struct drill_recipe r = a_recipe(2, 1);
	uint8_t live[DRILL_RECIPE_BYTES], null[DRILL_RECIPE_BYTES];
	struct qb_error e = {0};
	int first = -1, last = -1;
	r.gain = 1;
	assert_int_equal(drill_recipe_encode(&r, live, &e), QB_OK);
	r.gain = 0;
	assert_int_equal(drill_recipe_encode(&r, null, &e), QB_OK);
	for (int i = 0; i < DRILL_RECIPE_BYTES; i++) {
		if (live[i] == null[i])
			continue;
		first = first < 0 ? i : first;
		last = i;
	}
	assert_true(first >= 120 && last < 128); /* the eight bytes of the gain */
}

static void every_length_but_one_is_refused(void **state)
{
	(void)state;
	struct drill_recipe r = a_recipe(0, 0), back;
	uint8_t a[DRILL_RECIPE_BYTES + 1] = {0};
	struct qb_error e = {0};
	assert_int_equal(drill_recipe_encode(&r, a, &e), QB_OK);
	for (size_t n = 0; n <= sizeof a; n++) {
		struct qb_error bad = {0};
		if (n != DRILL_RECIPE_BYTES)
			assert_int_equal(drill_recipe_decode(a, n, &back, &bad), QB_FORMAT);
	}
}

/* Any changed bit is refused or shows in what was decoded. */
static void every_bit_matters(void **state)
{
	(void)state;
	struct drill_recipe r = a_recipe(0, 0), back;
	uint8_t a[DRILL_RECIPE_BYTES], b[DRILL_RECIPE_BYTES];
	struct qb_error e = {0};
	int refused = 0;
	assert_int_equal(drill_recipe_encode(&r, a, &e), QB_OK);
	for (int i = 0; i < 8 * DRILL_RECIPE_BYTES; i++) {
		struct qb_error bad = {0};
		a[i / 8] ^= (uint8_t)(1 << i % 8);
		if (drill_recipe_decode(a, sizeof a, &back, &bad) != QB_OK) {
			assert_true(bad.status == QB_FORMAT || bad.status == QB_RANGE);
			refused++;
		} else {
			assert_int_equal(drill_recipe_encode(&back, b, &bad), QB_OK);
			assert_memory_equal(a, b, sizeof a);
		}
		a[i / 8] ^= (uint8_t)(1 << i % 8);
	}
	assert_true(refused > 4 * DRILL_RECIPE_BYTES);
}

static void encoding_refuses(void **state)
{
	(void)state;
	const struct drill_recipe good = a_recipe(0, 0);
	struct drill_recipe r;
	uint8_t a[DRILL_RECIPE_BYTES];
#define REFUSED(change)                                                                                                \
	do {                                                                                                           \
		struct qb_error e_ = {0};                                                                              \
		r = good;                                                                                              \
		change;                                                                                                \
		assert_int_equal(drill_recipe_encode(&r, a, &e_), QB_RANGE);                                           \
	} while (0)
	REFUSED(r.gain = 0.999);
	REFUSED(r.gain = (double)NAN);
	REFUSED(r.rate_hz = 0);
	REFUSED(r.rate_hz = (double)NAN);
	REFUSED(r.slot = -1);
	REFUSED(r.slot_ns = 0);
	REFUSED(r.drive_from_ns = r.slot_start_ns - 1);
	REFUSED(r.drive_to_ns = r.slot_start_ns + r.slot_ns + 1);
	REFUSED(r.drive_to_ns = r.drive_from_ns - 1);
	REFUSED(r.source.arrival_gps_ns = r.slot_start_ns - 1);
	REFUSED(r.station[0] = '\0');
	REFUSED(signal_parameter_put(&r.source, 0, -3));
	REFUSED(r.source.declination_rad = 2);
	REFUSED(r.source.declination_rad = (double)NAN);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(round_trip),
	    cmocka_unit_test(null_differs_in_gain_alone),
	    cmocka_unit_test(every_length_but_one_is_refused),
	    cmocka_unit_test(every_bit_matters),
	    cmocka_unit_test(encoding_refuses),
	};
	return cmocka_run_group_tests_name("drill/recipe", tests, NULL, NULL);
}
