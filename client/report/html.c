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
#include "client/report/style.h"

#define MANY 60 /* rows of a list in the page */

static void cell(struct buf *out, const char *cls, const char *text)
{
	buf_printf(out, *cls != '\0' ? "<td class=\"%s\">" : "<td>", cls);
	figure_escape(out, text);
	buf_text(out, "</td>");
}

/* Column heads are separated by '|'; a leading '<' aligns left. */
static void table_begin(struct buf *out, const char *caption, const char *heads)
{
	buf_text(out, "<div class=\"scroll\"><table><caption>");
	figure_escape(out, caption);
	buf_text(out, "</caption><thead><tr>");
	while (*heads != '\0') {
		const bool left = *heads == '<';
		const size_t n = strcspn(heads + left, "|");
		buf_printf(out, "<th scope=\"col\"%s>%.*s</th>", left ? " class=\"t\"" : "", (int)n, heads + left);
		heads += left + n;
		heads += *heads == '|';
	}
	buf_text(out, "</tr></thead><tbody>\n");
}

static void table_end(struct buf *out)
{
	buf_text(out, "</tbody></table></div>\n");
}

static void section(struct buf *out, const char *id, const char *title, const char *lead)
{
	buf_printf(out, "<section id=\"%s\"><h2>%s</h2><p class=\"lead\">%s</p>\n", id, title, lead);
}

static void cut_note(struct buf *out, size_t n, const char *file)
{
	if (n > MANY)
		buf_printf(out, "<p class=\"note\">The first %d of %zu are shown; all are in <code>%s</code>.</p>\n",
		           MANY, n, file);
}

static void key_number(struct buf *out, const char *cls, const char *number, const char *words)
{
	buf_printf(out, "<div class=\"key %s\"><b>%s</b><span>%s</span></div>", cls, number, words);
}

static void summary(struct buf *out, const json_t *doc)
{
	char a[FACT], text[2 * FACT];
	section(out, "summary", "In one page", "What was found, what was missed, and what may be real.");
	buf_text(out, "<div class=\"keys\">");
	(void)snprintf(text, sizeof text, "%.0f of %.0f", facts_number(doc, "comparison.union.found"),
	               facts_number(doc, "comparison.union.live"));
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
	table_begin(out, "Played drills", "<slot|<time (UTC)|<state|network SNR|<claimed by");
	for (size_t i = 0; i < json_array_size(list) && i < MANY; i++) {
		const json_t *d = json_array_get(list, i);
		buf_text(out, "<tr>");
		cell(out, "t", facts_text(d, "slot_id"));
		cell(out, "t", facts_utc(a, facts_number(d, "arrival_gps")));
		cell(out, "t", facts_text(d, "state"));
		cell(out, "", facts_significant(a, facts_number(d, "network_snr"), 3));
		cell(out, "t", claimants(&names, json_object_get(d, "claimed_by")));
		buf_text(out, "</tr>\n");
	}
	table_end(out);
	cut_note(out, json_array_size(list), "drills.csv");
	buf_text(out, "</details>");
	buf_free(&names);
}

static void campaign(struct buf *out, const json_t *doc)
{
	const char *word;
	char a[FACT], b[FACT];
	json_t *n;
	section(out, "campaign", "1. The campaign",
	        "Slot states come from the operations log as it stood before any claim was opened.");
	table_begin(out, "Slots by state", "<state|slots");
	json_object_foreach((json_t *)(uintptr_t)json_object_get(doc, "slot_states"), word, n)
	{
		buf_text(out, "<tr>");
		cell(out, "t", word);
		cell(out, "", facts_count(a, json_number_value(n)));
		buf_text(out, "</tr>\n");
	}
	table_end(out);
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
	buf_text(out, "</section>\n");
}

static void unexplained(struct buf *out, const json_t *doc)
{
	const json_t *groups = facts_at(doc, "unexplained_groups.groups");
	const size_t all = json_array_size(facts_at(doc, "comparison.pipelines"));
	struct buf names = {0};
	char a[FACT];
	section(out, "unexplained", "2. Claims that match no drill",
	        "None of these is called false. Times claimed by every pipeline come first: they go to the people who "
	        "follow events "
	        "up before anything else in this report is discussed.");
	table_begin(out, "Groups of unexplained claims, most pipelines first",
	            "<time (UTC)|GPS, s|pipelines|<who|<claims");
	for (size_t i = 0; i < json_array_size(groups) && i < MANY; i++) {
		const json_t *g = json_array_get(groups, i);
		const size_t n = json_array_size(json_object_get(g, "pipelines"));
		buf_text(out, n == all && all > 1 ? "<tr class=\"first\">" : "<tr>");
		cell(out, "t", facts_utc(a, facts_number(g, "time_gps")));
		(void)snprintf(a, sizeof a, "%.3f", facts_number(g, "time_gps"));
		cell(out, "", a);
		cell(out, "", facts_count(a, (double)n));
		cell(out, "t", claimants(&names, json_object_get(g, "pipelines")));
		cell(out, "t", claimants(&names, json_object_get(g, "claims")));
		buf_text(out, "</tr>\n");
	}
	table_end(out);
	cut_note(out, json_array_size(groups), "unexplained.csv");
	buf_text(out, "</section>\n");
	buf_free(&names);
}

static void efficiency_row(struct buf *out, const char *name, const json_t *eff, const json_t *itt, bool first)
{
	char a[FACT];
	buf_text(out, first ? "<tr class=\"first\">" : "<tr>");
	cell(out, "t", name);
	cell(out, "", facts_count(a, facts_number(eff, "found")));
	cell(out, "", facts_count(a, facts_number(eff, "live")));
	cell(out, "", facts_percent(a, facts_number(eff, "estimate")));
	cell(out, "", facts_range(a, json_object_get(eff, "clopper_pearson")));
	cell(out, "", facts_range(a, json_object_get(eff, "wilson")));
	cell(out, "", facts_percent(a, facts_element(eff, "corrected", 0)));
	cell(out, "", facts_percent(a, facts_number(itt, "estimate")));
	buf_text(out, "</tr>\n");
}

static void thresholds(struct buf *out, const json_t *doc)
{
	const char *name;
	char a[FACT];
	size_t i, k;
	json_t *row;
	if (json_array_size(facts_at(doc, "settings_used.far_thresholds_per_year")) == 0)
		return;
	table_begin(out, "Found with a stated false-alarm rate below the threshold",
	            "<pipeline|below, per year|found|fraction|Clopper-Pearson|Wilson");
	for (i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		json_array_foreach(json_object_get(facts_pipeline_block(doc, name), "efficiency_by_far"), k, row)
		{
			buf_text(out, "<tr>");
			cell(out, "t", k == 0 ? name : "");
			cell(out, "", facts_significant(a, facts_number(row, "false_alarm_rate_below_per_year"), 3));
			cell(out, "", facts_count(a, facts_number(row, "found")));
			cell(out, "", facts_percent(a, facts_number(row, "estimate")));
			cell(out, "", facts_range(a, json_object_get(row, "clopper_pearson")));
			cell(out, "", facts_range(a, json_object_get(row, "wilson")));
			buf_text(out, "</tr>\n");
		}
	}
	table_end(out);
}

static void efficiency(struct buf *out, const json_t *doc)
{
	const char *name;
	section(out, "efficiency", "3. Efficiency",
	        "The share of verified live drills that were found. The wide bar holds the true share at least as "
	        "often as the "
	        "confidence says; the narrow one does so on average.");
	buf_text(out, "<figure>");
	figures_intervals(out, doc);
	buf_text(out,
	         "<figcaption>Dot: found of live. Wide bar: Clopper-Pearson. Narrow bar: Wilson. Diamond: found of all "
	         "played drills, those set aside included.</figcaption></figure>\n");
	table_begin(out, "Efficiency; corrected means without accidental matches",
	            "<|found|live|fraction|Clopper-Pearson|Wilson|corrected|of all played");
	efficiency_row(out, "at least one", facts_at(doc, "comparison.union"),
	               facts_at(doc, "comparison.union_intention_to_treat"), true);
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name);
		efficiency_row(out, name, json_object_get(p, "efficiency"), json_object_get(p, "intention_to_treat"),
		               false);
	}
	table_end(out);
	thresholds(out, doc);
	buf_text(out, "</section>\n");
}

static void curve_rows(struct buf *out, const char *name, const json_t *curve)
{
	char a[FACT], b[FACT], text[2 * FACT + 8];
	size_t i;
	json_t *bin;
	json_array_foreach(json_object_get(curve, "bins"), i, bin)
	{
		buf_text(out, "<tr>");
		cell(out, "t", i == 0 ? name : "");
		(void)snprintf(text, sizeof text, "%s to %s", facts_significant(a, facts_number(bin, "lower_edge"), 3),
		               facts_significant(b, facts_number(bin, "upper_edge"), 3));
		cell(out, "", text);
		cell(out, "", facts_count(a, facts_number(bin, "found")));
		cell(out, "", facts_count(a, facts_number(bin, "drills")));
		cell(out, "", facts_percent(a, facts_number(bin, "efficiency")));
		cell(out, "", facts_range(a, json_object_get(bin, "wilson")));
		cell(out, "", facts_range(a, json_object_get(bin, "clopper_pearson")));
		buf_text(out, "</tr>\n");
	}
}

static void curves(struct buf *out, const json_t *doc)
{
	const char *name;
	const json_t *u = facts_at(doc, "comparison.union_curves.network_snr");
	if (json_array_size(json_object_get(u, "bins")) == 0)
		return;
	section(out, "curves", "4. Efficiency along loudness",
	        "Bins hold equally many drills. The sand-coloured bar, where the plan asks for one, bounds the "
	        "efficiency at that "
	        "point and assumes only that louder drills are found no less often (Kim, Fay and Proschan 2018).");
	buf_text(out, "<figure><div class=\"pair\">");
	figures_curve(out, u, "at least one pipeline", 0);
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++)
		figures_curve(out, facts_at(facts_pipeline_block(doc, name), "curves.network_snr"), name,
		              (unsigned)i + 1);
	buf_text(out, "</div><details><summary>Table behind these figures</summary>");
	table_begin(out, "Efficiency by network signal-to-noise ratio",
	            "<|network SNR|found|drills|fraction|Wilson|Clopper-Pearson");
	curve_rows(out, "at least one", u);
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++)
		curve_rows(out, name, facts_at(facts_pipeline_block(doc, name), "curves.network_snr"));
	table_end(out);
	buf_text(out, "</details></figure></section>\n");
}

static void found_by(struct buf *out, const json_t *doc)
{
	const char *bits, *name;
	char a[FACT];
	double most = 1;
	json_t *n;
	const json_t *table = facts_at(doc, "comparison.found_by");
	section(out, "found-by", "5. Who found what", "Live drills by the exact set of pipelines that found them.");
	json_object_foreach((json_t *)(uintptr_t)table, bits, n) most = fmax(most, json_number_value(n));
	table_begin(out, "Sets of pipelines", "<found by|drills|<");
	json_object_foreach((json_t *)(uintptr_t)table, bits, n)
	{
		struct buf who = {0};
		for (size_t i = 0; bits[i] != '\0' && (name = facts_pipeline(doc, i)) != NULL; i++)
			if (bits[i] == '1')
				buf_printf(&who, "%s%s", who.len > 0 ? " and " : "", name);
		buf_text(out, "<tr>");
		cell(out, "t", who.len > 0 ? (const char *)who.data : "nobody");
		cell(out, "", facts_count(a, json_number_value(n)));
		buf_printf(out,
		           "<td class=\"t\" style=\"width:55%%\"><span class=\"bar%s\" "
		           "style=\"width:%.1f%%\"></span></td></tr>\n",
		           who.len > 0 ? "" : " none", 100 * json_number_value(n) / most);
		buf_free(&who);
	}
	table_end(out);
	buf_text(out, "</section>\n");
}

static void missed(struct buf *out, const json_t *doc)
{
	json_t *list = facts_missed(doc);
	char a[FACT];
	section(out, "missed", "6. Live drills that nobody found",
	        "The loud ones deserve a cause: data quality, a pipeline that was down, or a kind of signal that no "
	        "search covers.");
	table_begin(out, "Missed by every pipeline, loudest first",
	            "<slot|<time (UTC)|network SNR|chirp mass, M&#9737;|distance, Mpc");
	for (size_t i = 0; i < json_array_size(list) && i < MANY; i++) {
		const json_t *m = json_array_get(list, i);
		buf_text(out, "<tr>");
		cell(out, "t", facts_text(m, "slot_id"));
		cell(out, "t", facts_utc(a, facts_number(m, "arrival_gps")));
		cell(out, "", facts_significant(a, facts_number(m, "network_snr"), 3));
		cell(out, "", facts_significant(a, facts_number(m, "chirp_mass_msun"), 3));
		cell(out, "", facts_significant(a, facts_number(m, "distance_mpc"), 3));
		buf_text(out, "</tr>\n");
	}
	if (json_array_size(list) == 0)
		buf_text(out, "<tr><td class=\"t\" colspan=\"5\">none</td></tr>");
	table_end(out);
	cut_note(out, json_array_size(list), "missed.csv");
	buf_text(out, "</section>\n");
	json_decref(list);
}

static void residual_rows(struct buf *out, const json_t *doc, const char *parameter, const char *label, double factor)
{
	const char *name;
	char a[FACT];
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *r = json_object_get(json_object_get(json_object_get(doc, "residuals"), name), parameter);
		buf_text(out, "<tr>");
		cell(out, "t", i == 0 ? label : "");
		cell(out, "t", name);
		cell(out, "", facts_count(a, facts_number(r, "n")));
		cell(out, "", facts_significant(a, facts_number(r, "mean") * factor, 3));
		cell(out, "", facts_significant(a, facts_number(r, "sd") * factor, 3));
		cell(out, "", facts_significant(a, facts_number(r, "median") * factor, 3));
		cell(out, "", facts_count(a, facts_number(r, "stated_above_truth")));
		cell(out, "", facts_count(a, facts_number(r, "stated_below_truth")));
		cell(out, "", facts_p_value(a, facts_number(r, "sign_p")));
		buf_text(out, "</tr>\n");
	}
}

static void parameters(struct buf *out, const json_t *doc)
{
	section(out, "parameters", "7. Stated against true values",
	        "Of found drills only. The sign test asks whether stated values lie above the truth as often as below; "
	        "it assumes "
	        "nothing about their distribution. Honest uncertainties give a scatter of about one stated sigma.");
	buf_text(out, "<figure><div class=\"pair\">");
	figures_residuals(out, doc, "arrival_gps");
	figures_residuals(out, doc, "chirp_mass_msun");
	buf_text(out,
	         "</div><figcaption>One dot per found drill; the tall mark is the median.</figcaption></figure>\n");
	table_begin(out,
	            "Residuals; p-values belong to one pipeline's parameters and are not corrected for their number",
	            "<|<pipeline|n|mean|scatter|median|above|below|sign test p");
	residual_rows(out, doc, "arrival_gps", "arrival, ms", 1e3);
	residual_rows(out, doc, "chirp_mass_msun", "chirp mass, stated sigmas", 1);
	table_end(out);
	buf_text(out, "</section>\n");
}

static void nulls(struct buf *out, const json_t *doc)
{
	const char *name;
	char a[FACT];
	section(out, "nulls", "8. Null slots and accidents",
	        "Null slots take the same path as live ones at gain zero. Claims near them beyond chance mean a "
	        "disturbance, or a leak.");
	table_begin(out,
	            "Unexplained claims near null slots (p-values of the blindness family, not corrected for their "
	            "number), and the "
	            "chance of an accidental match",
	            "<pipeline|null slots|claims near one|expected|p of so many|background claims|accidental "
	            "match|crowded drills|"
	            "fraction without them");
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name), *t = json_object_get(p, "null_slot_test");
		buf_text(out, "<tr>");
		cell(out, "t", name);
		cell(out, "", facts_count(a, facts_number(t, "null_slots")));
		cell(out, "", facts_count(a, facts_number(t, "near_null_claims")));
		cell(out, "", facts_significant(a, facts_number(t, "expected"), 2));
		cell(out, "", facts_p_value(a, facts_number(t, "p_too_many")));
		cell(out, "", facts_count(a, facts_number(p, "accidental.background_claims")));
		cell(out, "", facts_percent(a, facts_number(p, "accidental.probability")));
		cell(out, "", facts_count(a, facts_number(p, "efficiency_uncrowded.crowded_live")));
		cell(out, "", facts_percent(a, facts_number(p, "efficiency_uncrowded.estimate")));
		buf_text(out, "</tr>\n");
	}
	table_end(out);
	buf_text(out, "</section>\n");
}

static void statuses(struct buf *out, const json_t *doc)
{
	static const char *const words[] = {
	    "found",          "matched_excluded", "duplicate", "unexplained", "outside_observing",
	    "in_vetoed_time", "superseded",       "late",      "malformed"};
	const char *name;
	char a[FACT];
	table_begin(out, "What became of every claim",
	            "<pipeline|claims|found|matched, set aside|duplicate|unexplained|outside observing|in vetoed "
	            "time|superseded|"
	            "late|malformed");
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name);
		buf_text(out, "<tr>");
		cell(out, "t", name);
		cell(out, "", facts_count(a, facts_number(p, "claims_in_file")));
		for (size_t k = 0; k < sizeof words / sizeof words[0]; k++) {
			const double n = facts_number(json_object_get(p, "status_counts"), words[k]);
			cell(out, "", facts_count(a, isfinite(n) ? n : 0));
		}
		buf_text(out, "</tr>\n");
	}
	table_end(out);
}

static void notes(struct buf *out, const json_t *doc)
{
	json_t *list = facts_limits(doc), *line;
	size_t i;
	section(out, "notes", "9. Notes", "How to read this report, and what it does not answer.");
	statuses(out, doc);
	buf_printf(
	    out,
	    "<p class=\"note\">Matching window: the smaller of %.4g s and %.4g s plus %.4g times the stated timing "
	    "uncertainty. Claims count until GPS %.3f. Confidence %.4g %%.</p><ul class=\"note\">",
	    facts_number(doc, "settings_used.match_max_s"), facts_number(doc, "settings_used.match_base_s"),
	    facts_number(doc, "settings_used.match_sigma_factor"), facts_number(doc, "settings_used.closing_gps"),
	    100 * facts_number(doc, "settings_used.confidence"));
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
	buf_printf(out, "</h1><p>%zu pipelines, %.0f live drills, %zu claims</p></div></header>\n",
	           json_array_size(facts_at(doc, "comparison.pipelines")), facts_number(doc, "comparison.union.live"),
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
	efficiency(out, doc);
	curves(out, doc);
	found_by(out, doc);
	missed(out, doc);
	parameters(out, doc);
	nulls(out, doc);
	notes(out, doc);
	buf_text(
	    out,
	    "</main><footer><div class=\"in\">Written by quietbell from an audit document. Tables beside this page: "
	    "efficiency.csv, unexplained.csv, missed.csv, drills.csv, residuals.csv, claims.csv.</div></footer>"
	    "</body></html>\n");
	return QB_OK;
}
