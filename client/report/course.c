/* The course of the campaign in the report: breaks of the blind that people reported, sealed until the opening. */
#include <stdio.h>

#include "client/report/facts.h"
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

void course_html(struct buf *out, const json_t *doc)
{
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
	const json_t *incidents = facts_at(doc, "course.incidents");
	if (json_is_array(incidents))
		incidents_text(out, incidents);
}
