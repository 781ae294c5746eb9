/* The report of the worked set: the sentences and tables say what the document says, and the page is closed in itself.
 */
#include "tests/audit_cases.h"

#include <stdio.h>

#include "client/report/facts.h"
#include "client/report/report.h"
#include "server/audit/audit.h"
#include "server/base/text.h"

static int set_up(void **state)
{
	struct qb_error e = {0};
	struct audit_input *in = cases_small();
	json_t *doc;
	assert_int_equal(audit_run(in, &doc, &e), QB_OK);
	audit_input_free(&in);
	*state = doc;
	return 0;
}

static int tear_down(void **state)
{
	json_decref(*state);
	return 0;
}

static char *render(const json_t *doc, enum qb_status (*make)(const json_t *, struct buf *, struct qb_error *))
{
	struct buf b = {0};
	struct qb_error e = {0};
	assert_int_equal(make(doc, &b, &e), QB_OK);
	assert_true(text_is_utf8((const char *)b.data, b.len));
	return (char *)b.data;
}

static void holds(const char *text, const char *part)
{
	if (strstr(text, part) == NULL)
		fail_msg("the report does not say: %s", part);
}

static void lacks(const char *text, const char *part)
{
	if (strstr(text, part) != NULL)
		fail_msg("the report holds: %s", part);
}

static size_t count(const char *text, const char *part)
{
	size_t n = 0;
	for (const char *p = text; (p = strstr(p, part)) != NULL; p += strlen(part))
		n++;
	return n;
}

static void the_text_says_what_was_found(void **state)
{
	char *text = render(*state, report_text);
	holds(text, "13 of 27 verified live drills were found by at least one pipeline: 48.1 %");
	holds(text, "36 claims match no drill. At 2 times every pipeline made such a claim");
	holds(text, "14 live drills were found by nobody; the loudest of them, slot-000060");
	holds(text, "28.7 to 68.1 %");
	holds(text, "GPS 1800350947.330  2037-01-23 09:28:49 UTC  amber birch cedar");
	lacks(text, "nan");
	free(text);
}

static void lines_of_the_text_fit_a_terminal(void **state)
{
	char *text = render(*state, report_text);
	for (char *line = strtok(text, "\n"); line != NULL; line = strtok(NULL, "\n"))
		assert_true(strlen(line) <= 110);
	free(text);
}

/* No script, no frame, no address that a browser would fetch; a policy that forbids it besides. */
static void the_page_is_closed_in_itself(void **state)
{
	char *page = render(*state, report_html);
	lacks(page, "<script");
	lacks(page, "<link");
	lacks(page, "<img");
	lacks(page, "http://");
	lacks(page, "https://");
	lacks(page, "url(");
	lacks(page, "@import");
	holds(page, "default-src 'none'");
	lacks(page, "nan");
	lacks(page, "inf\"");
	free(page);
}

/* Every drawing has a title and a description that it names, and identifiers are unique. */
static void figures_can_be_read_without_seeing_them(void **state)
{
	char *page = render(*state, report_html);
	const size_t figures = count(page, "role=\"img\"");
	assert_int_equal(figures, 2 + 4 + 2);
	assert_int_equal(count(page, "<title id="), figures);
	assert_int_equal(count(page, "<desc id="), figures);
	assert_int_equal(count(page, "id=\"curve-3-t\""), 1);
	assert_int_equal(count(page, "<section"), count(page, "</section>"));
	assert_int_equal(count(page, "<table"), count(page, "</table>"));
	assert_int_equal(count(page, "<details"), count(page, "</details>"));
	assert_int_equal(count(page, "<tr"), count(page, "</tr>"));
	free(page);
}

static void every_played_drill_is_drawn(void **state)
{
	char *page = render(*state, report_html);
	/* 13 found, 14 missed, 4 set aside, and one of each in the legend. */
	assert_int_equal(count(page, "<circle class=\"found\""), 13 + 1);
	assert_int_equal(count(page, "<circle class=\"missed\""), 14 + 1);
	assert_int_equal(count(page, "<path class=\"aside\""), 4 + 1);
	assert_int_equal(count(page, "class=\"residual\""), 9 + 13 + 10 + 9 + 12 + 10);
	free(page);
}

/* Names come from other people's files: none may become markup. */
static void hostile_names_stay_text(void **state)
{
	json_t *doc = json_deep_copy(*state), *drill;
	const char *bad = "<script>alert(1)</script>&\"'";
	json_object_set_new(doc, "set", json_string(bad));
	drill = json_array_get(json_object_get(json_object_get(doc, "missed"), "by_all"), 13);
	json_object_set_new(drill, "slot_id", json_string(bad));
	char *page = render(doc, report_html);
	lacks(page, "<script");
	holds(page, "&lt;script&gt;alert(1)&lt;/script&gt;&amp;&quot;&#39;");
	free(page);
	json_decref(doc);
}

static size_t rows_of(const json_t *doc, const char *name, char **out)
{
	struct buf b = {0};
	struct qb_error e = {0};
	for (size_t i = 0; i < report_csv_count(); i++) {
		if (strcmp(report_csv_name(i), name) != 0)
			continue;
		assert_int_equal(report_csv(doc, i, &b, &e), QB_OK);
		*out = (char *)b.data;
		return count(*out, "\r\n");
	}
	fail_msg("no table %s", name);
	return 0;
}

static void tables_hold_every_row(void **state)
{
	static const struct {
		const char *name;
		size_t rows;
		const char *line;
	} want[] = {
	    {"efficiency.csv", 4, "\r\n\"amber\",9,27,0.333333333333333,0.165188179687316,"},
	    {"unexplained.csv", 36, "\"birch\",\"birch-000021\","},
	    {"missed.csv", 14, "\"slot-000003\",1800039224.268695,"},
	    {"drills.csv", 31, ",\"amber birch cedar\"\r\n"},
	    {"residuals.csv", 9 + 13 + 10 + 9 + 12 + 10, "\"amber-000002\",\"slot-000008\",\"arrival_gps\","},
	    {"claims.csv", 95, "\"birch\",\"birch-000021\",\"unexplained\",,\"near_null_slot\"\r\n"},
	};
	for (size_t i = 0; i < sizeof want / sizeof want[0]; i++) {
		char *text;
		assert_int_equal(rows_of(*state, want[i].name, &text), 1 + want[i].rows);
		holds(text, want[i].line);
		free(text);
	}
}

/* A cell that a spreadsheet would run is disarmed; quotes are doubled. */
static void tables_carry_no_formulas(void **state)
{
	json_t *doc = json_deep_copy(*state);
	char *text;
	json_object_set_new(json_array_get(json_object_get(doc, "claims"), 0), "claim_id", json_string("=1+\"2\""));
	(void)rows_of(doc, "claims.csv", &text);
	holds(text, "\"'=1+\"\"2\"\"\"");
	free(text);
	json_decref(doc);
}

static void other_documents_are_refused(void **state)
{
	(void)state;
	json_t *docs[] = {json_object(), json_array(), json_string("audit"), json_null()};
	for (size_t i = 0; i < sizeof docs / sizeof docs[0]; i++) {
		struct buf b = {0};
		struct qb_error e = {0};
		assert_int_equal(report_html(docs[i], &b, &e), QB_FORMAT);
		assert_int_equal(report_text(docs[i], &b, &e), QB_FORMAT);
		assert_int_equal(report_csv(docs[i], 0, &b, &e), QB_FORMAT);
		json_decref(docs[i]);
	}
}

/* A document without any block but its mark: everything is said to be unknown, nothing crashes. */
static void an_empty_audit_is_reported_as_such(void **state)
{
	(void)state;
	json_t *doc = json_pack("{s:s}", "document", "audit");
	char *page = render(doc, report_html), *text = render(doc, report_text);
	holds(text, "No drill was played and verified");
	lacks(page, "nan");
	free(page);
	free(text);
	json_decref(doc);
}

static void numbers_are_written_for_people(void **state)
{
	(void)state;
	char out[FACT];
	assert_string_equal(facts_percent(out, 0.48149), "48.1 %");
	assert_string_equal(facts_percent(out, 0.00012), "0.012 %");
	assert_string_equal(facts_percent(out, NAN), "\xe2\x80\x93");
	assert_string_equal(facts_significant(out, 12.68144, 3), "12.7");
	assert_string_equal(facts_significant(out, 0, 3), "0.00");
	assert_string_equal(facts_significant(out, -1299.6, 3), "-1300");
	assert_string_equal(facts_p_value(out, 3e-7), "< 0.0001");
	assert_string_equal(facts_p_value(out, 0.0414), "0.041");
	assert_string_equal(facts_utc(out, 1800350947.33), "2037-01-23 09:28:49 UTC");
	assert_string_equal(facts_utc(out, -5), "\xe2\x80\x93");
}

static void the_course_is_told(void **state)
{
	json_t *doc = json_deep_copy(*state), *course;
	char *text = render(doc, report_text);
	lacks(text, "breaks of the blind");
	free(text);
	course = json_loads("{\"incidents\":[{\"kind\":\"rumour\",\"slots\":[[3,3],[7,9]],\"by\":\"lund\",\"role\":"
	                    "\"operator\",\"filed_gps\":1487894418.5,\"text\":\"<b>heard</b>\"},"
	                    "{\"by\":\"noor\",\"filed_gps\":1487894420,\"unreadable\":true}]}",
	                    0, NULL);
	json_object_set_new(doc, "course", course);
	text = render(doc, report_text);
	holds(text, "by lund: rumour, slots 3, 7 to 9: <b>heard</b>");
	holds(text, "by noor: unreadable, slots none in particular: what was");
	free(text);
	text = render(doc, report_html);
	holds(text, "&lt;b&gt;heard&lt;/b&gt;");
	lacks(text, "<b>heard");
	free(text);
	json_object_set_new(course, "incidents", json_array());
	text = render(doc, report_html);
	holds(text, "Nobody reported a break of the blind.");
	free(text);
	json_decref(doc);
}

static void the_register_is_printed(void **state)
{
	json_t *doc = json_deep_copy(*state);
	char *text = render(doc, report_text);
	lacks(text, "ever drafted");
	lacks(text, "Who held the key");
	free(text);
	json_t *course = json_loads(
	    "{\"custody\":{\"needed\":2,\"custodians\":[\"ines\",\"okoro\",\"sato\"],\"drew\":[\"ines\",\"okoro\"],"
	    "\"resharings\":1,\"sealing_attempt\":3,\"margin\":1,\"rehearsed_gps\":1487894418.0,\"missed\":[{\"name\":"
	    "\"okoro\",\"rehearsals\":2}],\"erasures_owed\":[\"marchetti\"],\"failures\":[{\"of\":\"resharing\","
	    "\"attempt\":4,\"excluded\":\"marchetti\",\"how\":\"dealt a bad share\",\"by\":\"sato\",\"why\":\"<i>\"}]},"
	    "\"register\":[{\"name\":\"fells-one\",\"state\":\"abandoned\",\"phase\":\"observing\",\"drafted_gps\":"
	    "1487894418.0,\"drafted_by\":\"admin\",\"slots\":6,\"key_attempt\":5,\"sealing_attempt\":7,\"ended\":{"
	    "\"how\":"
	    "\"abandoned\",\"by\":\"asha\",\"why\":\"<b>seen</b>\",\"gps\":1487894419.0}}]}",
	    0, NULL);
	assert_non_null(course);
	json_object_set_new(doc, "course", course);
	text = render(doc, report_text);
	holds(text, "2 of 3 custodians were needed to open anything: ines, okoro, sato");
	holds(text, "resharing, attempt 4, failed: marchetti dealt a bad share");
	holds(text, "fells-one (observing, abandoned), drafted by admin on 2027-03-01");
	free(text);
	text = render(doc, report_html);
	holds(text, "okoro missed 2 rehearsals in a row.");
	holds(text, "said to be erased by marchetti.");
	holds(text, "abandoned by asha: &lt;b&gt;seen&lt;/b&gt;");
	lacks(text, "<i>");
	free(text);
	json_decref(doc);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_text_says_what_was_found),   cmocka_unit_test(lines_of_the_text_fit_a_terminal),
	    cmocka_unit_test(the_page_is_closed_in_itself),   cmocka_unit_test(figures_can_be_read_without_seeing_them),
	    cmocka_unit_test(every_played_drill_is_drawn),    cmocka_unit_test(hostile_names_stay_text),
	    cmocka_unit_test(tables_hold_every_row),          cmocka_unit_test(tables_carry_no_formulas),
	    cmocka_unit_test(other_documents_are_refused),    cmocka_unit_test(an_empty_audit_is_reported_as_such),
	    cmocka_unit_test(numbers_are_written_for_people), cmocka_unit_test(the_course_is_told),
	    cmocka_unit_test(the_register_is_printed),
	};
	return cmocka_run_group_tests(tests, set_up, tear_down);
}
