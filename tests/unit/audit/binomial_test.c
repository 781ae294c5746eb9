/* Intervals and tails against R 4.2.2, SciPy 1.10.1 and published tables (tests/vectors/audit_cases.json). */
#include "tests/audit_cases.h"

#include "server/audit/accidental.h"
#include "server/audit/efficiency.h"

static void check_wilson(const json_t *in, const json_t *want, double tolerance)
{
	const struct audit_interval i =
	    audit_wilson((uint64_t)cases_number(in, "k"), (uint64_t)cases_number(in, "n"), cases_number(in, "conf"));
	near_abs(i.lower, cases_at(want, 0), tolerance);
	near_abs(i.upper, cases_at(want, 1), tolerance);
}

static void wilson_agrees(void **state)
{
	(void)state;
	cases_each("wilson", 48, check_wilson);
}

static void check_clopper_pearson(const json_t *in, const json_t *want, double tolerance)
{
	const struct audit_interval i = audit_clopper_pearson(
	    (uint64_t)cases_number(in, "k"), (uint64_t)cases_number(in, "n"), cases_number(in, "conf"));
	near_abs(i.lower, cases_at(want, 0), tolerance);
	near_abs(i.upper, cases_at(want, 1), tolerance);
}

static void clopper_pearson_agrees(void **state)
{
	(void)state;
	cases_each("clopper_pearson", 31, check_clopper_pearson);
}

static void no_trials_leave_everything_open(void **state)
{
	(void)state;
	const struct audit_interval w = audit_wilson(0, 0, 0.95), c = audit_clopper_pearson(0, 0, 0.95);
	assert_true(w.lower <= 0 && w.upper >= 1 && c.lower <= 0 && c.upper >= 1);
	assert_true(isnan(audit_efficiency_of(0, 0, 0.95).estimate));
}

static void check_poisson(const json_t *in, const json_t *want, double tolerance)
{
	near_abs(audit_poisson_at_least((uint64_t)cases_number(in, "n"), cases_number(in, "mu")), cases_at(want, 1),
	         tolerance);
}

static void poisson_upper_tail_agrees(void **state)
{
	(void)state;
	cases_each("poisson_exact_p", 10, check_poisson);
	assert_true(audit_poisson_at_least(0, 0) >= 1 && audit_poisson_at_least(3, 0) <= 0);
}

/* Sign test on the table of Armitage & Berry 1994, p. 127 (12 against 2): exact two-sided p = 0.0129. */
static void sign_test_agrees_with_a_published_table(void **state)
{
	(void)state;
	near_abs(audit_binomial_two_sided(12, 14, 0.5), 0.0129, 6e-5);
	near_abs(audit_binomial_two_sided(7, 14, 0.5), 1, 1e-12);
}

/* Stated 90 % intervals, 5 of 10 hold the truth: R 4.2.2 binom.test(5, 10, 0.9) gives 0.0016349374. */
static void two_sided_test_orders_by_probability(void **state)
{
	(void)state;
	near_abs(audit_binomial_two_sided(5, 10, 0.9), 0.0016349374, 1e-12);
	near_abs(audit_binomial_two_sided(0, 0, 0.5), 1, 1e-15);
}

static void check_corrected(const json_t *in, const json_t *want, double tolerance)
{
	const struct audit_accidental a = {.probability = cases_number(in, "p")};
	const struct audit_interval w = {cases_number(in, "lo"), cases_number(in, "hi")};
	double c[3];
	audit_corrected(cases_number(in, "eff"), w, &a, c);
	for (size_t i = 0; i < 3; i++)
		near_abs(c[i], cases_at(want, i), tolerance);
}

static void accidental_matches_are_taken_out(void **state)
{
	(void)state;
	cases_each("correct_efficiency", 1, check_corrected);
	assert_true(audit_without_accidental(0.01, 0.5) <= 0);
}

/* Clause B8: 100 drills at 1..100, those above 50 found; 22 nearest on each side of 60. */
static void check_band(const json_t *in, const json_t *want, double tolerance)
{
	double x[100];
	bool found[100];
	for (size_t i = 0; i < 100; i++) {
		x[i] = (double)i + 1;
		found[i] = x[i] > 50;
	}
	struct audit_outcomes o = {x, found, 100};
	struct audit_interval b = audit_monotone_band(&o, cases_number(in, "x0"), true, 0.95);
	near_abs(b.lower, cases_at(want, 0), tolerance);
	near_abs(b.upper, cases_at(want, 1), tolerance);
	/* Mirrored covariate, mirrored band. */
	for (size_t i = 0; i < 100; i++)
		x[i] = -x[i];
	const struct audit_interval m = audit_monotone_band(&o, -cases_number(in, "x0"), false, 0.95);
	near_abs(m.lower, b.lower, 0);
	near_abs(m.upper, b.upper, 0);
	/* Beyond every drill only one side knows anything: 0 of the nearest 22 were found. */
	b = audit_monotone_band(&o, 1, false, 0.95);
	near_abs(b.lower, 0, 0);
	near_abs(b.upper, 1 - pow(0.025, 1.0 / 22), 1e-12);
}

static void monotone_band_agrees(void **state)
{
	(void)state;
	cases_each("monotone_band", 1, check_band);
}

static void bins_hold_equal_counts_and_keep_ties_in_order(void **state)
{
	(void)state;
	double x[] = {3, 1, 2, 2, 5, 4, 9};
	bool found[] = {true, false, false, true, true, false, true};
	const struct audit_outcomes o = {x, found, 7};
	struct audit_bin *bins;
	assert_int_equal(audit_bins(&o, 3, 0.95, &bins), 3);
	assert_int_equal(bins[0].efficiency.of, 2);
	assert_int_equal(bins[0].efficiency.found, 0); /* 1 and the first of the two at 2 */
	assert_int_equal(bins[1].efficiency.of, 2);
	assert_int_equal(bins[1].efficiency.found, 2);
	assert_int_equal(bins[2].efficiency.of, 3);
	near_abs(bins[2].first, 4, 0);
	near_abs(bins[2].last, 9, 0);
	near_abs(bins[2].mean, 6, 0);
	free(bins);
	const struct audit_outcomes none = {x, found, 0};
	assert_int_equal(audit_bins(&none, 0, 0.95, &bins), 0);
	free(bins);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(wilson_agrees),
	    cmocka_unit_test(clopper_pearson_agrees),
	    cmocka_unit_test(no_trials_leave_everything_open),
	    cmocka_unit_test(poisson_upper_tail_agrees),
	    cmocka_unit_test(sign_test_agrees_with_a_published_table),
	    cmocka_unit_test(two_sided_test_orders_by_probability),
	    cmocka_unit_test(accidental_matches_are_taken_out),
	    cmocka_unit_test(monotone_band_agrees),
	    cmocka_unit_test(bins_hold_equal_counts_and_keep_ties_in_order),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
