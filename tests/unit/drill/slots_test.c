/* Slot arithmetic at its edges. */
#include "server/base/clock.h"
#include "server/drill/slots.h"
#include "tests/near.h"

static struct slots forty(void)
{
	return (struct slots){.start_gps_ns = INT64_C(1488888018) * NS_PER_S,
	                      .end_gps_ns = INT64_C(1488890578) * NS_PER_S,
	                      .slot_ns = 64 * NS_PER_S,
	                      .guard_ns = 12 * NS_PER_S,
	                      .lead_ns = 16 * NS_PER_S};
}

static void tiling(void **state)
{
	(void)state;
	struct slots s = forty();
	assert_int_equal(slots_count(&s), 40);
	assert_true(slots_tile(&s));
	s.end_gps_ns += 1;
	assert_false(slots_tile(&s));
	assert_int_equal(slots_count(&s), 40);
	s.slot_ns = 0;
	assert_int_equal(slots_count(&s), 0);
	assert_false(slots_tile(&s));
	s = forty();
	s.end_gps_ns = s.start_gps_ns;
	assert_false(slots_tile(&s));
	s.end_gps_ns = s.start_gps_ns + (SLOTS_MAX + 1) * 64 * NS_PER_S;
	assert_false(slots_tile(&s));
	s.end_gps_ns = s.start_gps_ns + SLOTS_MAX * 64 * NS_PER_S;
	assert_true(slots_tile(&s));
}

static void edges(void **state)
{
	(void)state;
	struct slots s = forty();
	int64_t from, to;
	assert_int_equal(slots_at(&s, s.start_gps_ns - 1), -1);
	assert_int_equal(slots_at(&s, s.start_gps_ns), 0);
	assert_int_equal(slots_at(&s, s.start_gps_ns + 64 * NS_PER_S - 1), 0);
	assert_int_equal(slots_at(&s, s.start_gps_ns + 64 * NS_PER_S), 1);
	assert_int_equal(slots_at(&s, s.end_gps_ns - 1), 39);
	assert_int_equal(slots_at(&s, s.end_gps_ns), -1);
	for (int64_t n = 0; n < 40; n++) {
		assert_int_equal(slots_at(&s, slots_start(&s, n)), n);
		assert_int_equal(slots_freeze(&s, n), slots_start(&s, n) - 16 * NS_PER_S);
		assert_true(slots_window(&s, n, &from, &to));
		assert_int_equal(from - slots_start(&s, n), 12 * NS_PER_S);
		assert_int_equal(to - from, 40 * NS_PER_S);
	}
	assert_int_equal(slots_start(&s, 40), s.end_gps_ns);
	s.guard_ns = 32 * NS_PER_S;
	assert_false(slots_window(&s, 0, &from, &to));
}

static void touching(void **state)
{
	(void)state;
	struct slots s = forty();
	int64_t a = -2, b = -2;
	assert_false(slots_touched(&s, s.start_gps_ns - 10, s.start_gps_ns - 1, &a, &b));
	assert_false(slots_touched(&s, s.end_gps_ns, s.end_gps_ns + 5, &a, &b));
	assert_false(slots_touched(&s, s.start_gps_ns + 5, s.start_gps_ns + 4, &a, &b));
	assert_true(slots_touched(&s, s.start_gps_ns - 10, s.start_gps_ns, &a, &b));
	assert_true(a == 0 && b == 0);
	assert_true(slots_touched(&s, s.start_gps_ns + 63 * NS_PER_S, s.start_gps_ns + 64 * NS_PER_S, &a, &b));
	assert_true(a == 0 && b == 1);
	assert_true(slots_touched(&s, 0, INT64_MAX, &a, &b));
	assert_true(a == 0 && b == 39);
}

int main(void)
{
	const struct CMUnitTest tests[] = {cmocka_unit_test(tiling), cmocka_unit_test(edges),
	                                   cmocka_unit_test(touching)};
	return cmocka_run_group_tests_name("drill/slots", tests, NULL, NULL);
}
