/* Segments, named randomness, claim statuses and awkward input: what a careless or hostile claim file may hold. */
#include "tests/audit_cases.h"

#include <stdio.h>

#include "server/audit/accidental.h"
#include "server/audit/audit.h"
#include "server/audit/match.h"
#include "server/audit/random.h"
#include "server/base/text.h"

static struct audit_segments segments_from(const json_t *list)
{
	struct audit_segments s = {0};
	for (size_t i = 0; i < json_array_size(list); i++)
		segments_add(&s, cases_at(json_array_get(list, i), 0), cases_at(json_array_get(list, i), 1));
	segments_tidy(&s);
	return s;
}

static void check_membership(const json_t *in, const json_t *want, double tolerance)
{
	(void)tolerance;
	struct audit_segments s = segments_from(json_object_get(in, "segments"));
	for (size_t i = 0; i < json_array_size(want); i++)
		assert_int_equal(segments_hold(&s, cases_at(json_object_get(in, "times"), i)),
		                 json_is_true(json_array_get(want, i)));
	segments_free(&s);
}

static void check_subtraction(const json_t *in, const json_t *want, double tolerance)
{
	struct audit_segments s = segments_from(json_object_get(in, "segments"));
	struct audit_segments holes = segments_from(json_object_get(in, "holes"));
	struct audit_segments left = segments_subtract(&s, &holes);
	assert_int_equal(left.n, json_array_size(want));
	for (size_t i = 0; i < left.n; i++) {
		near_abs(left.at[i].start_gps, cases_at(json_array_get(want, i), 0), tolerance);
		near_abs(left.at[i].end_gps, cases_at(json_array_get(want, i), 1), tolerance);
	}
	near_abs(segments_livetime_s(&left), 10 + 60 + 89, 0);
	near_abs(segments_time_at(&left, 12), 32, 0);
	segments_free(&s);
	segments_free(&holes);
	segments_free(&left);
}

static void segments_agree(void **state)
{
	(void)state;
	cases_each("in_segments", 1, check_membership);
	cases_each("subtract_segments", 1, check_subtraction);
}

static void check_fnv(const json_t *in, const json_t *want, double tolerance)
{
	(void)tolerance;
	char hex[20];
	(void)snprintf(hex, sizeof hex, "%016llx",
	               (unsigned long long)text_fnv1a(json_string_value(json_object_get(in, "text"))));
	assert_string_equal(hex, json_string_value(want));
}

static void check_stream(const json_t *in, const json_t *want, double tolerance)
{
	(void)tolerance;
	struct audit_stream s = audit_stream_from((uint64_t)cases_number(in, "seed"));
	for (size_t i = 0; i < json_array_size(want); i++) {
		char text[24];
		(void)snprintf(text, sizeof text, "%llu", (unsigned long long)audit_stream_next(&s));
		assert_string_equal(text, json_string_value(json_array_get(want, i)));
	}
	for (uint64_t n = 1; n < 50; n++)
		assert_true(audit_stream_below(&s, n) < n);
}

static void check_uniform(const json_t *in, const json_t *want, double tolerance)
{
	const json_t *parts = json_object_get(in, "parts");
	const char *names[2] = {json_string_value(json_array_get(parts, 0)),
	                        json_string_value(json_array_get(parts, 1))};
	near_abs(audit_hash_uniform((uint64_t)cases_number(in, "seed"), names, 2), json_number_value(want), tolerance);
}

static void named_randomness_agrees(void **state)
{
	(void)state;
	cases_each("fnv1a64", 2, check_fnv);
	cases_each("splitmix64 stream", 1, check_stream);
	cases_each("hash_uniform", 2, check_uniform);
}

/* One pipeline, observing from -10 to 8000, vetoed from 1990 to 2010, closing at 50000; slots as in the table. */
static struct audit_input *one_pipeline(void)
{
	static const char settings[] = "{\"pipelines\":[\"amber\"],\"closing_gps\":50000,"
	                               "\"observing_segments_gps\":[[-10,8000]],\"veto_segments_gps\":[[1990,2010]],"
	                               "\"far_thresholds_per_year\":[1]}";
	struct audit_input *in = audit_input_new();
	struct qb_error e = {0};
	assert_int_equal(audit_input_settings_text(in, settings, sizeof settings - 1, "settings", &e), QB_OK);
	return in;
}

static void add_slot(struct audit_input *in, const char *id, double gps, const char *slot_state, double snr)
{
	struct qb_error e = {0};
	char text[300];
	(void)snprintf(text, sizeof text,
	               "{\"slot_id\":\"%s\",\"planned_gps\":%.6f,\"arrival_gps\":\"%.6f\",\"state\":\"%s\","
	               "\"assignment\":\"%s\",\"network_snr\":%g}",
	               id, gps, gps, slot_state, strcmp(slot_state, "null") == 0 ? "null" : "live", snr);
	assert_int_equal(audit_input_slots_text(in, text, strlen(text), "slots", &e), QB_OK);
}

static void add_claim(struct audit_input *in, const char *json)
{
	struct qb_error e = {0};
	assert_int_equal(audit_input_claims_text(in, json, strlen(json), "claims", &e), QB_OK);
}

static const char *status_of(const struct audit_input *in, const struct audit_match *m, const char *id)
{
	for (size_t i = 0; i < in->n_claims; i++)
		if (strcmp(in->claims[i].claim_id, id) == 0)
			return audit_status_word(m->fates[i].status);
	return "absent";
}

static void check_statuses(const json_t *table, const json_t *want, double tolerance)
{
	(void)tolerance;
	struct audit_input *in = one_pipeline();
	struct audit_match m;
	struct qb_error e = {0};
	const char *id;
	json_t *v;
	size_t i;
	json_array_foreach(json_object_get(table, "slots"), i, v)
	    add_slot(in, json_string_value(json_object_get(v, "slot_id")), cases_number(v, "arrival_gps"),
	             json_string_value(json_object_get(v, "state")), 10);
	json_array_foreach(json_object_get(table, "claims"), i, v)
	{
		json_object_set_new(v, "pipeline", json_string("amber"));
		assert_int_equal(audit_input_claim(in, v, "claims", &e), QB_OK);
	}
	assert_int_equal(audit_match(in, &m, &e), QB_OK);
	json_object_foreach((json_t *)(uintptr_t)want, id, v)
	    assert_string_equal(status_of(in, &m, id), json_string_value(v));
	assert_int_equal(m.near_null[0], 1);
	audit_match_free(&m);
	audit_input_free(&in);
}

static void statuses_agree(void **state)
{
	(void)state;
	cases_each("classify_claims", 1, check_statuses);
}

/* Numbers no honest file holds; each line stands for one claim. */
static void unusable_numbers_make_a_claim_malformed(void **state)
{
	(void)state;
	static const char *const bad[] = {
	    "{\"claim_id\":\"a\",\"pipeline\":\"amber\",\"arrival_gps\":\"nan\",\"submitted_gps\":5}",
	    "{\"claim_id\":\"b\",\"pipeline\":\"amber\",\"arrival_gps\":\"inf\",\"submitted_gps\":5}",
	    "{\"claim_id\":\"c\",\"pipeline\":\"amber\",\"arrival_gps\":7,\"submitted_gps\":null}",
	    "{\"claim_id\":\"d\",\"pipeline\":\"amber\",\"arrival_gps\":7,\"submitted_gps\":5,"
	    "\"false_alarm_rate_per_year\":-1}",
	    "{\"claim_id\":\"e\",\"pipeline\":\"amber\",\"arrival_gps\":7,\"submitted_gps\":5,"
	    "\"false_alarm_rate_per_year\":\"NaN\"}",
	    "{\"claim_id\":\"f\",\"pipeline\":\"amber\",\"arrival_gps\":7,\"submitted_gps\":5,\"revision_of\":"
	    "\"nobody\"}",
	    "{\"claim_id\":\"g\",\"pipeline\":\"amber\",\"arrival_gps\":7,\"submitted_gps\":5,\"revision_of\":\"h\"}",
	    "{\"claim_id\":\"h\",\"pipeline\":\"amber\",\"arrival_gps\":7,\"submitted_gps\":5,\"revision_of\":\"g\"}",
	    "{\"claim_id\":\"i\",\"pipeline\":\"amber\",\"arrival_gps\":7,\"submitted_gps\":5,\"revision_of\":\"g\"}",
	};
	const size_t n = sizeof bad / sizeof bad[0];
	struct audit_input *in = one_pipeline();
	struct audit_match m;
	struct qb_error e = {0};
	for (size_t i = 0; i < n; i++)
		add_claim(in, bad[i]);
	add_claim(in, "{\"claim_id\":\"z\",\"pipeline\":\"amber\",\"arrival_gps\":\"7.5\",\"submitted_gps\":5}");
	assert_int_equal(audit_match(in, &m, &e), QB_OK);
	assert_int_equal(m.status_counts[0][AUDIT_MALFORMED], n);
	assert_string_equal(status_of(in, &m, "z"), "unexplained");
	audit_match_free(&m);
	audit_input_free(&in);
}

/* Of a chain the last revision in time stands; a revision after closing changes nothing; latency keeps the first. */
static void the_last_revision_in_time_stands(void **state)
{
	(void)state;
	struct audit_input *in = one_pipeline();
	struct audit_match m;
	struct qb_error e = {0};
	add_slot(in, "s", 100, "live", 9);
	add_claim(in, "{\"claim_id\":\"a\",\"pipeline\":\"amber\",\"arrival_gps\":130,\"submitted_gps\":200}");
	add_claim(in, "{\"claim_id\":\"b\",\"pipeline\":\"amber\",\"arrival_gps\":100.1,\"submitted_gps\":300,"
	              "\"revision_of\":\"a\"}");
	add_claim(in, "{\"claim_id\":\"c\",\"pipeline\":\"amber\",\"arrival_gps\":999,\"submitted_gps\":50001,"
	              "\"revision_of\":\"b\"}");
	add_claim(in, "{\"claim_id\":\"d\",\"pipeline\":\"amber\",\"arrival_gps\":100.2,\"submitted_gps\":300,"
	              "\"revision_of\":\"a\"}");
	assert_int_equal(audit_match(in, &m, &e), QB_OK);
	assert_string_equal(status_of(in, &m, "a"), "superseded");
	assert_string_equal(status_of(in, &m, "b"), "superseded"); /* same time: the larger identifier stands */
	assert_string_equal(status_of(in, &m, "c"), "late");
	assert_string_equal(status_of(in, &m, "d"), "found");
	near_abs(m.fates[3].first_submitted_gps, 200, 0);
	audit_match_free(&m);
	audit_input_free(&in);
}

/* Half-open segments and the inclusive window at their very edges. */
static void edges_of_windows_and_segments(void **state)
{
	(void)state;
	struct audit_input *in = one_pipeline();
	struct audit_match m;
	struct qb_error e = {0};
	add_slot(in, "s", 1000, "live", 9);
	add_claim(in, "{\"claim_id\":\"in\",\"pipeline\":\"amber\",\"arrival_gps\":999.5,\"submitted_gps\":2000}");
	add_claim(in,
	          "{\"claim_id\":\"out\",\"pipeline\":\"amber\",\"arrival_gps\":1000.500001,\"submitted_gps\":2000}");
	add_claim(in, "{\"claim_id\":\"start\",\"pipeline\":\"amber\",\"arrival_gps\":-10,\"submitted_gps\":2000}");
	add_claim(in, "{\"claim_id\":\"end\",\"pipeline\":\"amber\",\"arrival_gps\":8000,\"submitted_gps\":2000}");
	add_claim(in, "{\"claim_id\":\"veto\",\"pipeline\":\"amber\",\"arrival_gps\":1990,\"submitted_gps\":50000}");
	add_claim(in, "{\"claim_id\":\"free\",\"pipeline\":\"amber\",\"arrival_gps\":2010,\"submitted_gps\":2000}");
	assert_int_equal(audit_match(in, &m, &e), QB_OK);
	assert_string_equal(status_of(in, &m, "in"), "found");
	assert_string_equal(status_of(in, &m, "out"), "unexplained");
	assert_string_equal(status_of(in, &m, "start"), "unexplained");
	assert_string_equal(status_of(in, &m, "end"), "outside_observing");
	assert_string_equal(status_of(in, &m, "veto"), "in_vetoed_time");
	assert_string_equal(status_of(in, &m, "free"), "unexplained");
	audit_match_free(&m);
	audit_input_free(&in);
}

static void identifiers_that_occur_twice_are_refused(void **state)
{
	(void)state;
	struct audit_input *in = one_pipeline();
	struct audit_match m;
	struct qb_error e = {0};
	add_claim(in, "{\"claim_id\":\"a\",\"pipeline\":\"amber\",\"arrival_gps\":1,\"submitted_gps\":5}");
	add_claim(in, "{\"claim_id\":\"a\",\"pipeline\":\"amber\",\"arrival_gps\":2,\"submitted_gps\":5}");
	assert_int_equal(audit_match(in, &m, &e), QB_FORMAT);
	assert_non_null(strstr(e.what, "claim a is there twice"));
	audit_input_free(&in);
	in = one_pipeline();
	e = (struct qb_error){0};
	add_slot(in, "s", 1, "live", 9);
	add_slot(in, "s", 2, "live", 9);
	assert_int_equal(audit_match(in, &m, &e), QB_FORMAT);
	audit_input_free(&in);
}

static const json_t *path(const json_t *doc, const char *a, const char *b, const char *c)
{
	const json_t *v = json_object_get(json_object_get(doc, a), b);
	return c != NULL ? json_object_get(v, c) : v;
}

/* No live drills: estimates are null, never 0 or NaN, and unexplained claims are still listed. */
static void a_campaign_without_live_drills(void **state)
{
	(void)state;
	struct audit_input *in = one_pipeline();
	struct qb_error e = {0};
	json_t *doc;
	add_slot(in, "n", 1000, "null", 9);
	add_claim(in, "{\"claim_id\":\"a\",\"pipeline\":\"amber\",\"arrival_gps\":4000,\"submitted_gps\":5000}");
	assert_int_equal(audit_run(in, &doc, &e), QB_OK);
	const json_t *eff = path(doc, "pipelines", "amber", "efficiency");
	assert_true(json_is_null(json_object_get(eff, "estimate")));
	assert_true(json_is_null(json_object_get(eff, "wilson")));
	assert_true(json_is_null(json_object_get(eff, "corrected")));
	assert_true(json_is_null(json_object_get(path(doc, "comparison", "union", NULL), "estimate")));
	assert_int_equal(json_array_size(json_object_get(doc, "unexplained")), 1);
	assert_int_equal(json_integer_value(path(doc, "slot_states", "null", NULL)), 1);
	json_decref(doc);
	audit_input_free(&in);
}

static void a_campaign_without_claims(void **state)
{
	(void)state;
	struct audit_input *in = one_pipeline();
	struct qb_error e = {0};
	json_t *doc;
	add_slot(in, "s", 1000, "live", 9);
	add_slot(in, "t", 3000, "live", 12);
	assert_int_equal(audit_run(in, &doc, &e), QB_OK);
	const json_t *eff = path(doc, "pipelines", "amber", "efficiency");
	near_abs(cases_number(eff, "estimate"), 0, 0);
	near_abs(cases_at(json_object_get(eff, "clopper_pearson"), 1), 1 - sqrt(0.025), 1e-12);
	assert_int_equal(json_array_size(path(doc, "missed", "by_all", NULL)), 2);
	assert_int_equal(json_integer_value(path(doc, "comparison", "found_by", "0")), 2);
	json_decref(doc);
	audit_input_free(&in);
}

static void everything_found(void **state)
{
	(void)state;
	struct audit_input *in = one_pipeline();
	struct qb_error e = {0};
	json_t *doc;
	add_slot(in, "s", 1000, "live", 9);
	add_slot(in, "t", 3000, "live", 12);
	add_claim(in, "{\"claim_id\":\"a\",\"pipeline\":\"amber\",\"arrival_gps\":1000,\"submitted_gps\":5000}");
	add_claim(in, "{\"claim_id\":\"b\",\"pipeline\":\"amber\",\"arrival_gps\":3000,\"submitted_gps\":5000,"
	              "\"false_alarm_rate_per_year\":0.5}");
	assert_int_equal(audit_run(in, &doc, &e), QB_OK);
	const json_t *eff = path(doc, "pipelines", "amber", "efficiency");
	near_abs(cases_number(eff, "estimate"), 1, 0);
	near_abs(cases_at(json_object_get(eff, "clopper_pearson"), 0), sqrt(0.025), 1e-12);
	/* A claim without a rate counts for "any", and for no threshold. */
	const json_t *below = json_array_get(path(doc, "pipelines", "amber", "efficiency_by_far"), 0);
	assert_int_equal(json_integer_value(json_object_get(below, "found")), 1);
	assert_int_equal(json_array_size(path(doc, "missed", "by_all", NULL)), 0);
	json_decref(doc);
	audit_input_free(&in);
}

/* 60 drills, those of SNR 10 and more found: the plan's question is answered by the band, and only as far as it goes.
 */
static void questions_are_answered_by_the_band(void **state)
{
	(void)state;
	static const char settings[] =
	    "{\"pipelines\":[\"amber\"],\"closing_gps\":50000,\"observing_segments_gps\":[[0,8000]],\"questions\":["
	    "{\"pipeline\":\"any\",\"efficiency_at_network_snr\":40,\"at_least\":0.7},"
	    "{\"pipeline\":\"amber\",\"efficiency_at_network_snr\":5,\"at_least\":0.9},"
	    "{\"pipeline\":\"any\",\"efficiency_at_network_snr\":12,\"at_least\":0.99}]}";
	static const char *const want[] = {"yes", "no", "not_shown"};
	struct audit_input *in = audit_input_new();
	struct qb_error e = {0};
	json_t *doc;
	assert_int_equal(audit_input_settings_text(in, settings, sizeof settings - 1, "settings", &e), QB_OK);
	for (int i = 0; i < 120; i++) {
		char id[24], claim[160];
		(void)snprintf(id, sizeof id, "s%d", i);
		add_slot(in, id, 60 * i, "live", i / 2.0);
		(void)snprintf(
		    claim, sizeof claim,
		    "{\"claim_id\":\"c%d\",\"pipeline\":\"amber\",\"arrival_gps\":%d,\"submitted_gps\":9000}", i,
		    60 * i);
		if (i >= 20)
			add_claim(in, claim);
	}
	assert_int_equal(audit_run(in, &doc, &e), QB_OK);
	for (size_t i = 0; i < 3; i++)
		assert_string_equal(
		    json_string_value(json_object_get(json_array_get(json_object_get(doc, "questions"), i), "answer")),
		    want[i]);
	json_decref(doc);
	audit_input_free(&in);
}

/* Clause A6, closed form: 1000 windows of 0.5 s in 10^6 s of background give lambda = 0.001. */
static void check_accidental(const json_t *table, const json_t *want, double tolerance)
{
	const json_t *windows = json_object_get(table, "windows");
	const double livetime_s = cases_number(table, "background_livetime_s");
	struct audit_input *in = audit_input_new();
	struct qb_error e = {0};
	struct audit_match m;
	char text[200];
	(void)snprintf(text, sizeof text,
	               "{\"pipelines\":[\"amber\"],\"closing_gps\":1e9,\"observing_segments_gps\":[[0,%.1f]]}",
	               livetime_s);
	assert_int_equal(audit_input_settings_text(in, text, strlen(text), "settings", &e), QB_OK);
	for (size_t i = 0; i < json_array_size(windows); i++) {
		(void)snprintf(
		    text, sizeof text,
		    "{\"claim_id\":\"c%zu\",\"pipeline\":\"amber\",\"arrival_gps\":%zu,\"submitted_gps\":1e6}", i,
		    7 + 999 * i);
		add_claim(in, text);
	}
	assert_int_equal(audit_match(in, &m, &e), QB_OK);
	struct audit_background b = audit_background_of(in, &m);
	const struct audit_accidental a = audit_accidental_of(in, &m, &b, 0);
	near_abs(b.livetime_s, livetime_s, 0);
	near_abs(a.lambda, cases_at(want, 0), fmax(tolerance, 1e-15));
	near_abs(a.probability, cases_at(want, 1), fmax(tolerance, 1e-15));
	assert_false(a.by_quarter);
	audit_background_free(&b);
	audit_match_free(&m);
	audit_input_free(&in);
}

static void accidental_rate_agrees(void **state)
{
	(void)state;
	cases_each("accidental_rate", 1, check_accidental);
}

static void settings_out_of_range_are_refused(void **state)
{
	(void)state;
	static const struct {
		const char *text;
		enum qb_status status;
	} bad[] = {
	    {"{}", QB_FORMAT},
	    {"[]", QB_FORMAT},
	    {"{\"pipelines\":[],\"closing_gps\":1,\"observing_segments_gps\":[]}", QB_FORMAT},
	    {"{\"pipelines\":[\"a\",\"a\"],\"closing_gps\":1,\"observing_segments_gps\":[]}", QB_FORMAT},
	    {"{\"pipelines\":[\"a\"],\"closing_gps\":1,\"observing_segments_gps\":[[2,1]]}", QB_FORMAT},
	    {"{\"pipelines\":[\"a\"],\"closing_gps\":1,\"observing_segments_gps\":[],\"confidence\":1}", QB_RANGE},
	    {"{\"pipelines\":[\"a\"],\"closing_gps\":1,\"observing_segments_gps\":[],\"match_max_s\":0.1}", QB_RANGE},
	    {"{\"pipelines\":[\"a\"],\"closing_gps\":1,\"observing_segments_gps\":[],\"audit_seed\":"
	     "\"18446744073709551616\"}",
	     QB_FORMAT},
	};
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		struct audit_input *in = audit_input_new();
		struct qb_error e = {0};
		if (audit_input_settings_text(in, bad[i].text, strlen(bad[i].text), "settings", &e) != bad[i].status)
			fail_msg("accepted or misjudged: %s", bad[i].text);
		audit_input_free(&in);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(segments_agree),
	    cmocka_unit_test(named_randomness_agrees),
	    cmocka_unit_test(statuses_agree),
	    cmocka_unit_test(unusable_numbers_make_a_claim_malformed),
	    cmocka_unit_test(the_last_revision_in_time_stands),
	    cmocka_unit_test(edges_of_windows_and_segments),
	    cmocka_unit_test(identifiers_that_occur_twice_are_refused),
	    cmocka_unit_test(a_campaign_without_live_drills),
	    cmocka_unit_test(a_campaign_without_claims),
	    cmocka_unit_test(everything_found),
	    cmocka_unit_test(questions_are_answered_by_the_band),
	    cmocka_unit_test(accidental_rate_agrees),
	    cmocka_unit_test(settings_out_of_range_are_refused),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
