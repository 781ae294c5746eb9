/* The course of the campaign in the report: breaks of the blind that people reported, sealed until the opening. */
#include <stdio.h>

#include "client/report/facts.h"
#include "client/report/figure.h"
#include "client/report/lines.h"
#include "client/report/page.h"

/* "3, 7 to 9" of [[3,3],[7,9]]. */
static const char *slot_ranges(struct buf *b, const json_t *slots)
{
	size_t i;
	json_t *pair;
	buf_clear(b);
	json_array_foreach((json_t *)(uintptr_t)slots, i, pair)
	{
		const json_int_t from = json_integer_value(json_array_get(pair, 0)),
		                 to = json_integer_value(json_array_get(pair, 1));
		buf_printf(b, "%s%" JSON_INTEGER_FORMAT, i > 0 ? ", " : "", from);
		if (to > from)
			buf_printf(b, " to %" JSON_INTEGER_FORMAT, to);
	}
	return b->len > 0 ? (const char *)b->data : "none in particular";
}

static const char *words_of(const json_t *incident, const char *key)
{
	if (json_is_true(json_object_get(incident, "unreadable")))
		return key[0] == 'k' ? "unreadable" : "what was sealed can't be read";
	return facts_text(incident, key);
}

static void incidents_html(struct buf *out, const json_t *list)
{
	struct buf slots = {0};
	char a[FACT];
	page_table_begin(out, "Reported breaks of the blind", "<filed (UTC)|<by|<kind|<slots|<what happened");
	for (size_t i = 0; i < json_array_size(list); i++) {
		const json_t *x = json_array_get(list, i);
		buf_text(out, "<tr>");
		page_cell(out, "t", page_utc(a, facts_number(x, "filed_gps")));
		page_cell(out, "t", facts_text(x, "by"));
		page_cell(out, "t", words_of(x, "kind"));
		page_cell(out, "w", slot_ranges(&slots, json_object_get(x, "slots")));
		page_cell(out, "w", words_of(x, "text"));
		buf_text(out, "</tr>\n");
	}
	page_table_end(out);
	buf_free(&slots);
}

/* "ines, okoro" of a list; "nobody" when it is empty. */
static const char *people(struct buf *b, const json_t *list)
{
	size_t i;
	json_t *v;
	buf_clear(b);
	json_array_foreach((json_t *)(uintptr_t)list, i, v)
	{
		const char *name = json_string_value(v);
		buf_printf(b, "%s%s", i > 0 ? ", " : "", name != NULL ? name : "?");
	}
	return b->len > 0 ? (const char *)b->data : "nobody";
}

/* "answered after 12.3 s", "not answered", with refusals and a retraction. */
static const char *became(struct buf *b, const json_t *q)
{
	struct buf names = {0};
	const json_t *refused = json_object_get(q, "refused");
	buf_clear(b);
	if (json_is_real(json_object_get(q, "answered_gps")))
		buf_printf(b, "answered after %.1f s by %s",
		           facts_number(q, "answered_gps") - facts_number(q, "asked_gps"),
		           people(&names, json_object_get(q, "gave")));
	else
		buf_text(b, "not answered");
	if (json_array_size(refused) > 0)
		buf_printf(b, "; refused by %s", people(&names, refused));
	if (json_is_true(json_object_get(q, "retracted")))
		buf_text(b, "; retracted");
	buf_free(&names);
	return (const char *)b->data;
}

/* One sentence about all of them. */
static void times(struct buf *b, const json_t *doc)
{
	const json_t *t = facts_at(doc, "course.question_times");
	buf_clear(b);
	buf_printf(b, "Questions: %.0f asked, %.0f answered", facts_number(t, "asked"), facts_number(t, "answered"));
	if (json_is_real(json_object_get(t, "median_s")))
		buf_printf(b, "; median time from question to answer %.1f s, longest %.1f s",
		           facts_number(t, "median_s"), facts_number(t, "longest_s"));
	buf_text(b, ".");
}

static void questions_html(struct buf *out, const json_t *doc, const json_t *list)
{
	struct buf line = {0};
	char a[FACT];
	times(&line, doc);
	buf_text(out, "<p class=\"note\">");
	buf_text(out, (const char *)line.data); /* numbers and our own words only */
	buf_text(out, "</p>\n");
	page_table_begin(out, "Asked during the campaign: is this a drill?",
	                 "<asked (UTC)|<by|<about the time from (UTC)|<reason|<told|<what became of it");
	for (size_t i = 0; i < json_array_size(list); i++) {
		const json_t *q = json_array_get(list, i);
		buf_text(out, "<tr>");
		page_cell(out, "t", page_utc(a, facts_number(q, "asked_gps")));
		page_cell(out, "t", facts_text(q, "by"));
		page_cell(out, "t", page_utc(a, facts_number(q, "from_gps")));
		page_cell(out, "w", facts_text(q, "reason"));
		page_cell(out, "w", people(&line, json_object_get(q, "recipients")));
		page_cell(out, "w", became(&line, q));
		buf_text(out, "</tr>\n");
	}
	page_table_end(out);
	buf_free(&line);
}

static void questions_text(struct buf *out, const json_t *doc, const json_t *list)
{
	struct buf line = {0}, fate = {0};
	char a[FACT];
	lines_heading(out, "Asked during the campaign: is this a drill?");
	times(&line, doc);
	lines_wrap(out, "", (const char *)line.data);
	for (size_t i = 0; i < json_array_size(list); i++) {
		const json_t *q = json_array_get(list, i);
		buf_clear(&line);
		buf_printf(&line, "%s by %s, for the reason '%s': %s", facts_utc(a, facts_number(q, "asked_gps")),
		           facts_text(q, "by"), facts_text(q, "reason"), became(&fate, q));
		lines_wrap(out, "- ", (const char *)line.data);
	}
	buf_free(&line);
	buf_free(&fate);
}

/* The sentence about an early end into b; false without one. */
static bool ending_sentence(struct buf *b, const json_t *doc)
{
	const json_t *x = facts_at(doc, "course.ending");
	char a[FACT], n[FACT], of[FACT];
	if (!json_is_object(x))
		return false;
	buf_printf(
	    b,
	    "The campaign was %s by %s on %s: %s. %s of its %s slots were not played; they are counted neither as "
	    "found nor as missed.",
	    facts_text(x, "how"), facts_text(x, "by"), facts_utc(a, facts_number(x, "ended_gps")), facts_text(x, "why"),
	    facts_count(n, facts_number(x, "slots_unplayed")), facts_count(of, facts_number(x, "slots")));
	return true;
}

void course_html(struct buf *out, const json_t *doc)
{
	const json_t *questions = facts_at(doc, "course.questions");
	if (json_array_size(questions) > 0)
		questions_html(out, doc, questions);
	struct buf sentence = {0};
	if (ending_sentence(&sentence, doc)) {
		buf_text(out, "<p class=\"note\">");
		figure_escape(out, (const char *)sentence.data);
		buf_text(out, "</p>\n");
	}
	buf_free(&sentence);
	const json_t *incidents = facts_at(doc, "course.incidents");
	if (json_is_array(incidents) && json_array_size(incidents) == 0)
		buf_text(out, "<p class=\"note\">Nobody reported a break of the blind.</p>\n");
	else if (json_is_array(incidents))
		incidents_html(out, incidents);
}

static void incidents_text(struct buf *out, const json_t *list)
{
	struct buf slots = {0}, line = {0};
	char a[FACT];
	lines_heading(out, "Reported breaks of the blind");
	for (size_t i = 0; i < json_array_size(list); i++) {
		const json_t *x = json_array_get(list, i);
		buf_clear(&line);
		buf_printf(&line, "%s by %s: %s, slots %s: %s", facts_utc(a, facts_number(x, "filed_gps")),
		           facts_text(x, "by"), words_of(x, "kind"), slot_ranges(&slots, json_object_get(x, "slots")),
		           words_of(x, "text"));
		lines_wrap(out, "- ", (const char *)line.data);
	}
	if (json_array_size(list) == 0)
		buf_text(out, "none\n");
	buf_free(&slots);
	buf_free(&line);
}

void course_text(struct buf *out, const json_t *doc)
{
	const json_t *questions = facts_at(doc, "course.questions");
	if (json_array_size(questions) > 0)
		questions_text(out, doc, questions);
	struct buf sentence = {0};
	if (ending_sentence(&sentence, doc))
		lines_wrap(out, "", (const char *)sentence.data);
	buf_free(&sentence);
	const json_t *incidents = facts_at(doc, "course.incidents");
	if (json_is_array(incidents))
		incidents_text(out, incidents);
}
