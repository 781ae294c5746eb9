/* Who held the key, with every failed attempt, and every campaign that the service ever drafted, in the report. */
#include <stdio.h>

#include "client/report/facts.h"
#include "client/report/figure.h"
#include "client/report/lines.h"
#include "client/report/page.h"

static void names(struct buf *b, const json_t *list)
{
	size_t i;
	json_t *v;
	json_array_foreach((json_t *)(uintptr_t)list, i, v)
	{
		const char *name = json_string_value(v);
		buf_printf(b, "%s%s", i > 0 ? ", " : "", name != NULL ? name : "?");
	}
	if (i == 0)
		buf_text(b, "nobody");
}

/* The sentences about the key into b; false when the document says nothing about it. */
static bool key_sentences(struct buf *b, const json_t *doc)
{
	const json_t *x = facts_at(doc, "course.custody"), *owed = facts_at(x, "erasures_owed");
	size_t i;
	json_t *v;
	char a[FACT];
	if (!json_is_object(x))
		return false;
	buf_printf(b, "%.0f of %zu custodians were needed to open anything: ", facts_number(x, "needed"),
	           json_array_size(facts_at(x, "custodians")));
	names(b, facts_at(x, "custodians"));
	if (facts_number(x, "resharings") > 0)
		buf_printf(b, ". The key was reshared %.0f times", facts_number(x, "resharings"));
	else
		buf_text(b, ". The key was never reshared");
	buf_printf(b, "; the sealing in force is attempt %.0f", facts_number(x, "sealing_attempt"));
	buf_text(b, ", drawn from contributions of ");
	names(b, facts_at(x, "drew"));
	buf_text(b, " and the service.");
	if (json_is_integer(facts_at(x, "margin")))
		buf_printf(b, " At the last rehearsal, of %s, %.0f more opened than are needed.",
		           facts_utc(a, facts_number(x, "rehearsed_gps")), facts_number(x, "margin"));
	json_array_foreach((json_t *)(uintptr_t)facts_at(x, "missed"), i, v)
	    buf_printf(b, " %s missed %.0f rehearsals in a row.", facts_text(v, "name"), facts_number(v, "rehearsals"));
	if (json_array_size(owed) > 0) {
		buf_text(b, " An old share is not yet said to be erased by ");
		names(b, owed);
		buf_text(b, ".");
	}
	return true;
}

static void failure_line(struct buf *b, const json_t *f)
{
	const char *who = facts_text(f, "excluded");
	buf_clear(b);
	buf_printf(b, "%s, attempt %.0f, failed: %s%s%s (%s: %s)", facts_text(f, "of"), facts_number(f, "attempt"), who,
	           who[0] != '\0' ? " " : "", facts_text(f, "how"), facts_text(f, "by"), facts_text(f, "why"));
}

static const char *ended(struct buf *b, const json_t *k)
{
	const json_t *x = facts_at(k, "ended");
	buf_clear(b);
	if (json_is_object(x))
		buf_printf(b, "%s by %s: %s", facts_text(x, "how"), facts_text(x, "by"), facts_text(x, "why"));
	return b->len > 0 ? (const char *)b->data : "";
}

void register_html(struct buf *out, const json_t *doc)
{
	const json_t *list = facts_at(doc, "course.register"), *failures = facts_at(doc, "course.custody.failures");
	struct buf line = {0};
	char a[FACT];
	if (key_sentences(&line, doc)) {
		buf_text(out, "<p class=\"note\">");
		figure_escape(out, (const char *)line.data);
		buf_text(out, "</p>\n");
	}
	for (size_t i = 0; i < json_array_size(failures); i++) {
		failure_line(&line, json_array_get(failures, i));
		buf_text(out, "<p class=\"note\">");
		figure_escape(out, (const char *)line.data);
		buf_text(out, "</p>\n");
	}
	if (json_array_size(list) > 0) {
		page_table_begin(
		    out, "Every campaign that was ever drafted on this service",
		    "<campaign|<state|<phase|<drafted (UTC)|<by|slots|key attempt|sealing attempt|<ended early");
		for (size_t i = 0; i < json_array_size(list); i++) {
			const json_t *k = json_array_get(list, i);
			buf_text(out, "<tr>");
			page_cell(out, "t", facts_text(k, "name"));
			page_cell(out, "t", facts_text(k, "state"));
			page_cell(out, "t", facts_text(k, "phase"));
			page_cell(out, "t", page_utc(a, facts_number(k, "drafted_gps")));
			page_cell(out, "t", facts_text(k, "drafted_by"));
			page_cell(out, "", facts_count(a, facts_number(k, "slots")));
			page_cell(out, "", facts_count(a, facts_number(k, "key_attempt")));
			page_cell(out, "", facts_count(a, facts_number(k, "sealing_attempt")));
			page_cell(out, "w", ended(&line, k));
			buf_text(out, "</tr>\n");
		}
		page_table_end(out);
	}
	buf_free(&line);
}

void register_text(struct buf *out, const json_t *doc)
{
	const json_t *list = facts_at(doc, "course.register"), *failures = facts_at(doc, "course.custody.failures");
	struct buf line = {0}, how = {0};
	char a[FACT];
	if (key_sentences(&line, doc)) {
		lines_heading(out, "Who held the key");
		lines_wrap(out, "", (const char *)line.data);
	}
	for (size_t i = 0; i < json_array_size(failures); i++) {
		failure_line(&line, json_array_get(failures, i));
		lines_wrap(out, "- ", (const char *)line.data);
	}
	if (json_array_size(list) > 0)
		lines_heading(out, "Every campaign that was ever drafted on this service");
	for (size_t i = 0; i < json_array_size(list); i++) {
		const json_t *k = json_array_get(list, i);
		const char *end = ended(&how, k);
		buf_clear(&line);
		buf_printf(&line,
		           "%s (%s, %s), drafted by %s on %s, %.0f slots, key attempt %.0f, sealing attempt %.0f%s%s",
		           facts_text(k, "name"), facts_text(k, "phase"), facts_text(k, "state"),
		           facts_text(k, "drafted_by"), facts_utc(a, facts_number(k, "drafted_gps")),
		           facts_number(k, "slots"), facts_number(k, "key_attempt"), facts_number(k, "sealing_attempt"),
		           end[0] != '\0' ? "; " : "", end);
		lines_wrap(out, "- ", (const char *)line.data);
	}
	buf_free(&line);
	buf_free(&how);
}
