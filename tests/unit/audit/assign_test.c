/* Windows, weights and optimal assignment against closed forms and SciPy's linear_sum_assignment. */
#include "tests/audit_cases.h"

#include <stdio.h>

#include "server/audit/assign.h"
#include "server/base/alloc.h"

static void check_window(const json_t *in, const json_t *want, double tolerance)
{
	near_abs(assign_window_s(0.5, 3, 5, cases_number(in, "sigma_s")), json_number_value(want), tolerance);
}

static void windows_agree(void **state)
{
	(void)state;
	cases_each("match_window", 5, check_window);
	near_abs(assign_window_s(0.5, 3, 5, INFINITY), 0.5, 0);
	near_abs(assign_window_s(0.5, 3, 5, -1), 0.5, 0);
}

static void check_weights(const json_t *in, const json_t *want, double tolerance)
{
	(void)tolerance;
	for (size_t i = 0; i < json_array_size(want); i++)
		assert_int_equal(assign_weight(cases_at(json_object_get(in, "dt"), i), cases_number(in, "w")),
		                 json_integer_value(json_array_get(want, i)));
}

static void weights_agree(void **state)
{
	(void)state;
	cases_each("weight_units", 1, check_weights);
}

/* Solves one table entry; pairs maps claim_id to drill_id. */
static struct assign_result solve(const json_t *in, const json_t *pairs)
{
	const json_t *drills = json_object_get(in, "drills"), *claims = json_object_get(in, "claims");
	const size_t nd = json_array_size(drills), nc = json_array_size(claims);
	struct assign_drill *d = QB_NEW_ARRAY(struct assign_drill, nd);
	struct assign_claim *c = QB_NEW_ARRAY(struct assign_claim, nc);
	struct assign_result r;
	struct qb_error e = {0};
	size_t matched = 0;
	for (size_t i = 0; i < nd; i++)
		d[i].arrival_gps = cases_number(json_array_get(drills, i), "arrival_gps");
	for (size_t i = 0; i < nc; i++) {
		const json_t *x = json_array_get(claims, i);
		c[i] = (struct assign_claim){
		    json_string_value(json_object_get(x, "claim_id")), cases_number(x, "arrival_gps"),
		    assign_window_s(0.5, 3, 5, cases_number(x, "arrival_gps_sigma_s")),
		    cases_number(x, "false_alarm_rate_per_year"), cases_number(x, "submitted_gps")};
	}
	assert_int_equal(assign_claims(c, nc, d, nd, 5, &r, &e), QB_OK);
	for (size_t i = 0; i < nc; i++) {
		const char *want = json_string_value(json_object_get(pairs, c[i].id));
		const char *got = NULL;
		if (r.drill_of[i] >= 0) {
			got = json_string_value(
			    json_object_get(json_array_get(drills, (size_t)r.drill_of[i]), "drill_id"));
			matched++;
		}
		if ((want == NULL) != (got == NULL) || (want != NULL && strcmp(want, got) != 0))
			fail_msg("claim %s went to %s, expected %s", c[i].id, got != NULL ? got : "none",
			         want != NULL ? want : "none");
	}
	assert_int_equal(matched, json_object_size(pairs));
	qb_free(d);
	qb_free(c);
	return r;
}

static void check_pairs(const json_t *in, const json_t *want, double tolerance)
{
	(void)tolerance;
	struct assign_result r = solve(in, want);
	assign_result_free(&r);
}

static void worked_cases_agree(void **state)
{
	(void)state;
	cases_each("optimal_match", 6, check_pairs);
}

static void crowded_totals_and_pairs_agree(void **state)
{
	(void)state;
	json_t *doc = cases_json("tests/vectors/audit_crowded.json"), *c;
	size_t i;
	json_array_foreach(json_object_get(doc, "cases"), i, c)
	{
		struct assign_result r = solve(c, json_object_get(c, "pairs"));
		assert_int_equal(r.total_weight, json_integer_value(json_object_get(c, "expected_total_weight_units")));
		assign_result_free(&r);
	}
	assert_int_equal(i, 120);
	json_decref(doc);
}

/* Identical claims share drills by rank: the lower false-alarm rate takes the earlier drill, whatever the input order.
 */
static void identical_claims_take_drills_by_rank(void **state)
{
	(void)state;
	const struct assign_drill drills[] = {{100.3}, {99.9}};
	const struct assign_claim claims[] = {
	    {"a", 100.1, 0.5, 7, 200}, {"b", 100.1, 0.5, 2, 300}, {"c", 100.1, 0.5, NAN, 1}};
	struct assign_result r;
	struct qb_error e = {0};
	assert_int_equal(assign_claims(claims, 3, drills, 2, 5, &r, &e), QB_OK);
	assert_int_equal(r.drill_of[0], 0);
	assert_int_equal(r.drill_of[1], 1);
	assert_int_equal(r.drill_of[2], -1);
	assert_int_equal(r.n_sizes, 1);
	assert_int_equal(r.sizes[0].claims, 3);
	assert_int_equal(r.sizes[0].drills, 2);
	assign_result_free(&r);
}

static void nothing_on_either_side_is_no_error(void **state)
{
	(void)state;
	const struct assign_drill drill = {100};
	const struct assign_claim claim = {"a", 100, 0.5, 1, 200};
	struct assign_result r;
	struct qb_error e = {0};
	assert_int_equal(assign_claims(&claim, 1, NULL, 0, 5, &r, &e), QB_OK);
	assert_int_equal(r.drill_of[0], -1);
	assign_result_free(&r);
	assert_int_equal(assign_claims(NULL, 0, &drill, 1, 5, &r, &e), QB_OK);
	assert_int_equal(r.components, 0);
	assign_result_free(&r);
}

/* A chain of claims that links 2001 drills into one component. */
static void a_crowd_beyond_the_limit_is_refused_with_its_time_range(void **state)
{
	(void)state;
	enum { N = 2001 };
	struct assign_drill *drills = QB_NEW_ARRAY(struct assign_drill, N);
	struct assign_claim *claims = QB_NEW_ARRAY(struct assign_claim, N);
	struct assign_result r;
	struct qb_error e = {0};
	for (int i = 0; i < N; i++) {
		drills[i].arrival_gps = 1000 + i;
		claims[i] = (struct assign_claim){"x", 1000.5 + i, 0.5, 1, 9};
	}
	assert_int_equal(assign_claims(claims, N, drills, N, 5, &r, &e), QB_RANGE);
	assert_non_null(strstr(e.what, "GPS 1000.000 to 3000.500"));
	qb_free(drills);
	qb_free(claims);
}

/* Just below the limit it is solved: every claim its own drill. */
static void a_long_chain_below_the_limit_is_solved(void **state)
{
	(void)state;
	enum { N = 600 };
	struct assign_drill *drills = QB_NEW_ARRAY(struct assign_drill, N);
	struct assign_claim *claims = QB_NEW_ARRAY(struct assign_claim, N);
	struct assign_result r;
	struct qb_error e = {0};
	for (int i = 0; i < N; i++) {
		drills[i].arrival_gps = 1000 + i;
		claims[i] = (struct assign_claim){"x", 1000.125 + i, 1, 1, 9};
	}
	assert_int_equal(assign_claims(claims, N, drills, N, 5, &r, &e), QB_OK);
	for (int i = 0; i < N; i++)
		assert_int_equal(r.drill_of[i], i);
	assert_int_equal(r.total_weight, N * assign_weight(0.125, 1));
	assign_result_free(&r);
	qb_free(drills);
	qb_free(claims);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(windows_agree),
	    cmocka_unit_test(weights_agree),
	    cmocka_unit_test(worked_cases_agree),
	    cmocka_unit_test(crowded_totals_and_pairs_agree),
	    cmocka_unit_test(identical_claims_take_drills_by_rank),
	    cmocka_unit_test(nothing_on_either_side_is_no_error),
	    cmocka_unit_test(a_crowd_beyond_the_limit_is_refused_with_its_time_range),
	    cmocka_unit_test(a_long_chain_below_the_limit_is_solved),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
