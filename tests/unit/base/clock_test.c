/* GPS time and UTC: leap seconds at their edges, strict parsing, exact round trips. */
#include "server/base/clock.h"
#include "tests/near.h"

#include <string.h>

static const struct {
	const char *utc, *gps;
} pairs[] = {
    {"1980-01-06T00:00:00Z", "0"},
    {"1981-06-30T23:59:59Z", "46828799"},
    {"1981-06-30T23:59:60Z", "46828800"}, /* the first leap second after the epoch */
    {"1981-07-01T00:00:00Z", "46828801"},
    {"2008-12-31T23:59:60.5Z", "914803214.5"},
    {"2011-09-14T01:46:25Z", "1000000000"}, /* widely printed: GPS 1e9 */
    {"2016-12-31T23:59:60Z", "1167264017"},
    {"2017-01-01T00:00:00Z", "1167264018"}, /* widely printed: GPS-UTC is 18 s from here on */
    {"2027-03-01T00:00:00Z", "1487894418"},
    {"2000-02-29T12:00:00Z", "635860813"},
};

static void utc_and_gps_agree(void **state)
{
	(void)state;
	for (size_t i = 0; i < sizeof pairs / sizeof pairs[0]; i++) {
		int64_t a, b;
		char text[40];
		assert_true(clock_utc_parse(pairs[i].utc, &a));
		assert_true(clock_gps_parse(pairs[i].gps, &b));
		assert_int_equal(a, b);
		assert_string_equal(clock_utc_text(a, text, sizeof text), pairs[i].utc);
		assert_string_equal(clock_gps_text(a, text, sizeof text), pairs[i].gps);
	}
}

static void bad_times_are_refused(void **state)
{
	static const char *const utc[] = {"2027-02-29T00:00:00Z", "2027-03-01T00:00:00",   "2027-13-01T00:00:00Z",
	                                  "2027-03-01 00:00:00Z", "2027-03-01T24:00:00Z",  "2016-12-30T23:59:60Z",
	                                  "1979-01-01T00:00:00Z", "2027-03-01T00:00:00.Z", ""};
	static const char *const gps[] = {"-1", "01", "1.", "1.0123456789", "1e9",
	                                  " 1", "1 ", "",   "99999999999",  "0x1"};
	int64_t t;
	(void)state;
	for (size_t i = 0; i < sizeof utc / sizeof utc[0]; i++)
		assert_false(clock_utc_parse(utc[i], &t));
	for (size_t i = 0; i < sizeof gps / sizeof gps[0]; i++)
		assert_false(clock_gps_parse(gps[i], &t));
}

static void posix_seconds_round_trip(void **state)
{
	(void)state;
	/* Every second around each leap second, both ways. */
	static const int64_t around[] = {46828800, 914803214, 1167264017};
	for (size_t i = 0; i < 3; i++) {
		for (int64_t s = around[i] - 3; s <= around[i] + 3; s++) {
			int64_t unix_s, ns;
			bool leap;
			clock_unix_from_gps(s * NS_PER_S + 7, &unix_s, &ns, &leap);
			assert_int_equal(ns, 7);
			assert_int_equal(leap, s == around[i]);
			if (!leap)
				assert_int_equal(clock_gps_from_unix(unix_s, ns), s * NS_PER_S + 7);
		}
	}
}

static void nanoseconds_survive(void **state)
{
	int64_t t;
	char text[40];
	(void)state;
	assert_true(clock_gps_parse("1456789012.345678901", &t));
	assert_true(t == INT64_C(1456789012345678901));
	assert_string_equal(clock_gps_text(t, text, sizeof text), "1456789012.345678901");
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(utc_and_gps_agree),
	    cmocka_unit_test(bad_times_are_refused),
	    cmocka_unit_test(posix_seconds_round_trip),
	    cmocka_unit_test(nanoseconds_survive),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
