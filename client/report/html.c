/*
 * The page: sections in the order in which a review board decides, each a short lead, a figure with its table, and
 * tables. Every text that comes from the document is escaped; long lists are cut and the CSV beside the page is named.
 */
#include "client/report/report.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/report/facts.h"
#include "client/report/figure.h"
#include "client/report/figures.h"
#include "client/report/lines.h"
#include "client/report/page.h"
#include "client/report/style.h"

static void key_number(struct buf *out, const char *cls, const char *number, const char *words)
{
	buf_printf(out, "<div class=\"key %s\"><b>%s</b><span>%s</span></div>", cls, number, words);
}

static void summary(struct buf *out, const json_t *doc)
{
	char a[FACT], b[FACT], text[2 * FACT + 8];
	page_section(out, "summary", "In one page", "What was found, what was missed, and what may be real.");
	buf_text(out, "<div class=\"keys\">");
	(void)snprintf(text, sizeof text, "%s of %s", facts_count(a, facts_number(doc, "comparison.union.found")),
	               facts_count(b, facts_number(doc, "comparison.union.live")));
	key_number(out, "found", text, "live drills found by at least one pipeline");
	key_number(out, "missed", facts_count(a, (double)json_array_size(facts_at(doc, "missed.by_all"))),
	           "live drills found by nobody");
	key_number(out, "event",
	           facts_count(a, (double)json_array_size(facts_at(doc, "unexplained_groups.all_pipelines_times_gps"))),
	           "times claimed by every pipeline that match no drill");
	key_number(out, "", facts_count(a, (double)json_array_size(facts_at(doc, "unexplained"))),
	           "claims in all that match no drill");
	buf_text(out, "</div><dl>");
	json_t *list = facts_summary(doc), *pair;
	size_t i;
	json_array_foreach(list, i, pair)
	{
		buf_text(out, "<dt>");
		figure_escape(out, json_string_value(json_array_get(pair, 0)));
		buf_text(out, "</dt><dd>");
		figure_escape(out, json_string_value(json_array_get(pair, 1)));
		buf_text(out, "</dd>\n");
	}
	buf_text(out, "</dl></section>\n");
	json_decref(list);
}

static const char legend_campaign[] =
    "<div class=\"legend\"><span><svg viewBox=\"0 0 18 14\" aria-hidden=\"true\"><circle class=\"found\" cx=\"9\" "
    "cy=\"7\" "
    "r=\"5\"/></svg>found by at least one pipeline</span><span><svg viewBox=\"0 0 18 14\" aria-hidden=\"true\"><circle "
    "class=\"missed\" cx=\"9\" cy=\"7\" r=\"5\"/></svg>missed by all</span><span><svg viewBox=\"0 0 18 14\" "
    "aria-hidden=\"true\"><path class=\"aside\" d=\"M9 1l6 6l-6 6l-6 -6z\"/></svg>set aside: failed delivery or "
    "aborted</span><span><svg viewBox=\"0 0 18 14\" aria-hidden=\"true\"><line class=\"event\" x1=\"9\" y1=\"0\" "
    "x2=\"9\" "
    "y2=\"14\"/></svg>claimed by all, no drill</span></div>";

static const char *claimants(struct buf *b, const json_t *names)
{
	size_t i;
	json_t *name;
	buf_clear(b);
	json_array_foreach((json_t *)(uintptr_t)names, i, name)
	    buf_printf(b, "%s%s", i > 0 ? ", " : "", json_string_value(name));
	return b->len > 0 ? (const char *)b->data : "nobody";
}

static void drill_table(struct buf *out, const json_t *doc)
{
	const json_t *list = facts_at(doc, "drills");
	struct buf names = {0};
	char a[FACT];
	buf_text(out, "<details><summary>Table behind this figure</summary>");
	page_table_begin(out, "Played drills", "<slot|<time (UTC)|<state|network SNR|<claimed by");
	for (size_t i = 0; i < json_array_size(list) && i < PAGE_ROWS; i++) {
		const json_t *d = json_array_get(list, i);
		buf_text(out, "<tr>");
		page_cell(out, "t", facts_text(d, "slot_id"));
		page_cell(out, "t", page_utc(a, facts_number(d, "arrival_gps")));
		page_cell(out, "t", facts_text(d, "state"));
		page_cell(out, "", facts_significant(a, facts_number(d, "network_snr"), 3));
		page_cell(out, "t", claimants(&names, json_object_get(d, "claimed_by")));
		buf_text(out, "</tr>\n");
	}
	page_table_end(out);
	page_cut_note(out, json_array_size(list), "drills.csv");
	buf_text(out, "</details>");
	buf_free(&names);
}

static void campaign(struct buf *out, const json_t *doc)
{
	const char *word;
	char a[FACT], b[FACT];
	json_t *n;
	page_section(out, "campaign", "1. The campaign",
	             "Slot states come from the operations log as it stood before any claim was opened.");
	buf_text(out, "<ul class=\"states\">");
	json_object_foreach((json_t *)(uintptr_t)json_object_get(doc, "slot_states"), word, n)
	{
		buf_printf(out, "<li><b>%s</b> ", facts_count(a, json_number_value(n)));
		figure_escape(out, strcmp(word, "failed_delivery") == 0 ? "failed in delivery" : word);
		buf_text(out, "</li>");
	}
	buf_text(out, "</ul>\n");
	buf_printf(out, "<p class=\"note\">Observing time %s; away from drills and vetoes %s.</p>\n",
	           facts_duration(a, facts_number(doc, "observing_livetime_s")),
	           facts_duration(b, facts_number(doc, "background_livetime_s")));
	if (json_array_size(facts_at(doc, "drills")) > 0) {
		buf_text(out, "<figure>");
		buf_text(out, legend_campaign);
		figures_campaign(out, doc);
		drill_table(out, doc);
		buf_text(out, "</figure>\n");
	}
	course_html(out, doc);
	register_html(out, doc);
	buf_text(out, "</section>\n");
}

/* Rows of groups seen by at least `least` and at most `most` pipelines; returns how many there are. */
static size_t group_rows(struct buf *out, const json_t *doc, size_t least, size_t most)
{
	struct buf names = {0};
	char a[FACT];
	size_t i, rows = 0;
	json_t *g;
	json_array_foreach((json_t *)(uintptr_t)facts_at(doc, "unexplained_groups.groups"), i, g)
	{
		const size_t n = json_array_size(json_object_get(g, "pipelines"));
		if (n < least || n > most || ++rows > PAGE_ROWS)
			continue;
		buf_text(out, "<tr>");
		page_cell(out, "t", page_utc(a, facts_number(g, "time_gps")));
		(void)snprintf(a, sizeof a, "%.3f", facts_number(g, "time_gps"));
		page_cell(out, "", a);
		page_cell(out, "t", claimants(&names, json_object_get(g, "pipelines")));
		page_cell(out, "w", claimants(&names, json_object_get(g, "claims")));
		buf_text(out, "</tr>\n");
	}
	buf_free(&names);
	return rows;
}

static void unexplained(struct buf *out, const json_t *doc)
{
	static const char heads[] = "<time (UTC)|GPS, s|<claimed by|<claims";
	const size_t pipelines = json_array_size(facts_at(doc, "comparison.pipelines"));
	struct buf rows = {0};
	page_section(
	    out, "unexplained", "2. Claims that match no drill",
	    "None of these is called false. Times claimed by every pipeline come first: they go to the people who "
	    "follow events "
	    "up before anything else in this report is discussed.");
	if (pipelines > 1) {
		const size_t all = group_rows(&rows, doc, pipelines, pipelines);
		page_table_begin(out, "Claimed by every pipeline", heads);
		buf_text(out, all > 0 ? (const char *)rows.data : "<tr><td class=\"t\" colspan=\"4\">none</td></tr>");
		page_table_end(out);
		page_cut_note(out, all, "unexplained.csv");
		buf_clear(&rows);
	}
	const size_t some = group_rows(&rows, doc, 2, pipelines - 1);
	if (some > 0) {
		page_table_begin(out, "Claimed by more than one pipeline, but not by all", heads);
		buf_text(out, (const char *)rows.data);
		page_table_end(out);
		page_cut_note(out, some, "unexplained.csv");
	}
	buf_clear(&rows);
	const size_t alone = group_rows(&rows, doc, 1, 1);
	if (alone > 0) {
		buf_printf(out, "<details%s><summary>Claimed by one pipeline alone: %zu</summary>",
		           pipelines == 1 ? " open" : "", alone);
		page_table_begin(out, "Claimed by one pipeline, in time order", heads);
		buf_text(out, (const char *)rows.data);
		page_table_end(out);
		page_cut_note(out, alone, "unexplained.csv");
		buf_text(out, "</details>\n");
	}
	buf_text(out, "</section>\n");
	buf_free(&rows);
}

static void statuses(struct buf *out, const json_t *doc)
{
	static const char *const words[] = {
	    "found",          "matched_excluded", "duplicate", "unexplained", "outside_observing",
	    "in_vetoed_time", "superseded",       "late",      "malformed"};
	const char *name;
	char a[FACT];
	page_table_begin(out, "What became of every claim",
	                 "<pipeline|claims|found|matched, set aside|duplicate|unexplained|outside observing|in vetoed "
	                 "time|superseded|"
	                 "late|malformed");
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name);
		buf_text(out, "<tr>");
		page_cell(out, "t", name);
		page_cell(out, "", facts_count(a, facts_number(p, "claims_in_file")));
		for (size_t k = 0; k < sizeof words / sizeof words[0]; k++) {
			const double n = facts_number(json_object_get(p, "status_counts"), words[k]);
			page_cell(out, "", facts_count(a, isfinite(n) ? n : 0));
		}
		buf_text(out, "</tr>\n");
	}
	page_table_end(out);
}

static void notes(struct buf *out, const json_t *doc)
{
	json_t *list = facts_limits(doc), *line;
	size_t i;
	page_section(out, "notes", "9. Notes", "How to read this report, and what it does not answer.");
	statuses(out, doc);
	char most[FACT], base[FACT], factor[FACT], confidence[FACT], closing[FACT];
	buf_printf(out,
	           "<p class=\"note\">Matching window: the smaller of %s s and %s s plus %s times the stated timing "
	           "uncertainty. "
	           "Claims count until %s. Confidence %s&#160;%%.</p><ul class=\"note\">",
	           facts_plain(most, facts_number(doc, "settings_used.match_max_s")),
	           facts_plain(base, facts_number(doc, "settings_used.match_base_s")),
	           facts_plain(factor, facts_number(doc, "settings_used.match_sigma_factor")),
	           facts_utc(closing, facts_number(doc, "settings_used.closing_gps")),
	           facts_plain(confidence, 100 * facts_number(doc, "settings_used.confidence")));
	json_array_foreach(list, i, line)
	{
		buf_text(out, "<li>");
		figure_escape(out, json_string_value(line));
		buf_text(out, "</li>");
	}
	buf_text(out, "</ul></section>\n");
	json_decref(list);
}

static void page_begin(struct buf *out, const json_t *doc)
{
	const char *set = *facts_text(doc, "set") != '\0' ? facts_text(doc, "set") : "unnamed";
	buf_text(
	    out,
	    "<!DOCTYPE html>\n<html lang=\"en-GB\"><head><meta charset=\"utf-8\">"
	    "<meta name=\"viewport\" content=\"width=device-width,initial-scale=1\">"
	    "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'\">"
	    "<title>Audit of ");
	figure_escape(out, set);
	buf_text(out, "</title><style>\n");
	for (size_t i = 0; report_style[i] != NULL; i++)
		buf_text(out, report_style[i]);
	buf_text(out, "</style></head><body>\n");
	buf_text(out, "<header><div class=\"in\"><p class=\"kind\">Blind drill audit</p><h1>");
	figure_escape(out, set);
	char live[FACT];
	buf_printf(out, "</h1><p>%zu pipelines, %s live drills, %zu claims</p></div></header>\n",
	           json_array_size(facts_at(doc, "comparison.pipelines")),
	           facts_count(live, facts_number(doc, "comparison.union.live")),
	           json_array_size(facts_at(doc, "claims")));
	buf_text(out,
	         "<nav aria-label=\"Sections\"><div class=\"in\"><ol><li><a href=\"#summary\">Summary</a></li>"
	         "<li><a href=\"#campaign\">Campaign</a></li><li><a href=\"#unexplained\">Unexplained</a></li>"
	         "<li><a href=\"#efficiency\">Efficiency</a></li><li><a href=\"#found-by\">Who found what</a></li>"
	         "<li><a href=\"#missed\">Missed</a></li><li><a href=\"#parameters\">Parameters</a></li>"
	         "<li><a href=\"#nulls\">Null slots</a></li><li><a href=\"#notes\">Notes</a></li></ol></div></nav>\n"
	         "<main class=\"in\">\n");
}

enum qb_status report_html(const json_t *doc, struct buf *out, struct qb_error *e)
{
	if (strcmp(facts_text(doc, "document"), "audit") != 0)
		return qb_fail(e, QB_FORMAT, "report", "give the file that `audit run` wrote",
		               "is not an audit document");
	page_begin(out, doc);
	summary(out, doc);
	campaign(out, doc);
	unexplained(out, doc);
	numbers_efficiency(out, doc);
	numbers_curves(out, doc);
	numbers_found_by(out, doc);
	numbers_missed(out, doc);
	numbers_parameters(out, doc);
	numbers_nulls(out, doc);
	notes(out, doc);
	buf_text(
	    out,
	    "</main><footer><div class=\"in\">Written by quietbell from an audit document. Tables beside this page: "
	    "efficiency.csv, unexplained.csv, missed.csv, drills.csv, residuals.csv, claims.csv.</div></footer>"
	    "</body></html>\n");
	return QB_OK;
}
