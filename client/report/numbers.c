/* The page's sections of numbers: efficiencies, curves, who found what, misses, parameters and null slots. */
#include <math.h>
#include <stdio.h>

#include "client/report/figure.h"
#include "client/report/figures.h"
#include "client/report/page.h"

static void efficiency_row(struct buf *out, const char *name, const json_t *eff, const json_t *itt, bool first)
{
	char a[FACT];
	buf_text(out, first ? "<tr class=\"first\">" : "<tr>");
	page_cell(out, "t", name);
	page_cell(out, "", facts_count(a, facts_number(eff, "found")));
	page_cell(out, "", facts_count(a, facts_number(eff, "live")));
	page_cell(out, "", facts_percent(a, facts_number(eff, "estimate")));
	page_cell(out, "", facts_range(a, json_object_get(eff, "clopper_pearson")));
	page_cell(out, "", facts_range(a, json_object_get(eff, "wilson")));
	page_cell(out, "", facts_percent(a, facts_element(eff, "corrected", 0)));
	page_cell(out, "", facts_percent(a, facts_number(itt, "estimate")));
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
	page_table_begin(out, "Found with a stated false-alarm rate below the threshold",
	                 "<pipeline|below, per year|found|fraction|Clopper-Pearson|Wilson");
	for (i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		json_array_foreach(json_object_get(facts_pipeline_block(doc, name), "efficiency_by_far"), k, row)
		{
			buf_text(out, "<tr>");
			page_cell(out, "t", k == 0 ? name : "");
			page_cell(out, "", facts_plain(a, facts_number(row, "false_alarm_rate_below_per_year")));
			page_cell(out, "", facts_count(a, facts_number(row, "found")));
			page_cell(out, "", facts_percent(a, facts_number(row, "estimate")));
			page_cell(out, "", facts_range(a, json_object_get(row, "clopper_pearson")));
			page_cell(out, "", facts_range(a, json_object_get(row, "wilson")));
			buf_text(out, "</tr>\n");
		}
	}
	page_table_end(out);
}

void numbers_efficiency(struct buf *out, const json_t *doc)
{
	const char *name;
	page_section(out, "efficiency", "3. Efficiency",
	             "The share of verified live drills that were found. The wide bar holds the true share at least as "
	             "often as the "
	             "confidence says; the narrow one does so on average.");
	buf_text(out, "<figure>");
	figures_intervals(out, doc);
	buf_text(out,
	         "<figcaption>Dot: found of live. Wide bar: Clopper-Pearson. Narrow bar: Wilson. Diamond: found of all "
	         "played drills, those set aside included.</figcaption></figure>\n");
	page_table_begin(out, "Efficiency; corrected means without accidental matches",
	                 "<|found|live|fraction|Clopper-Pearson|Wilson|corrected|of all played");
	efficiency_row(out, "at least one", facts_at(doc, "comparison.union"),
	               facts_at(doc, "comparison.union_intention_to_treat"), true);
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name);
		efficiency_row(out, name, json_object_get(p, "efficiency"), json_object_get(p, "intention_to_treat"),
		               false);
	}
	page_table_end(out);
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
		page_cell(out, "t", i == 0 ? name : "");
		(void)snprintf(text, sizeof text, "%s to %s", facts_significant(a, facts_number(bin, "lower_edge"), 3),
		               facts_significant(b, facts_number(bin, "upper_edge"), 3));
		page_cell(out, "", text);
		page_cell(out, "", facts_count(a, facts_number(bin, "found")));
		page_cell(out, "", facts_count(a, facts_number(bin, "drills")));
		page_cell(out, "", facts_percent(a, facts_number(bin, "efficiency")));
		page_cell(out, "", facts_range(a, json_object_get(bin, "wilson")));
		page_cell(out, "", facts_range(a, json_object_get(bin, "clopper_pearson")));
		buf_text(out, "</tr>\n");
	}
}

void numbers_curves(struct buf *out, const json_t *doc)
{
	const char *name;
	const json_t *u = facts_at(doc, "comparison.union_curves.network_snr");
	if (json_array_size(json_object_get(u, "bins")) == 0)
		return;
	page_section(out, "curves", "4. Efficiency along loudness",
	             "Bins hold equally many drills. The sand-coloured bar, where the plan asks for one, bounds the "
	             "efficiency at that "
	             "point and assumes only that louder drills are found no less often (Kim, Fay and Proschan 2018).");
	buf_text(out, "<figure><div class=\"pair\">");
	figures_curve(out, u, "at least one pipeline", 0);
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++)
		figures_curve(out, facts_at(facts_pipeline_block(doc, name), "curves.network_snr"), name,
		              (unsigned)i + 1);
	buf_text(
	    out,
	    "</div><figcaption>Dot: fraction found, at the mean of its bin. Horizontal line: the bin. Vertical line: "
	    "Wilson interval.</figcaption><details><summary>Table behind these figures</summary>");
	page_table_begin(out, "Efficiency by network signal-to-noise ratio",
	                 "<|network SNR|found|drills|fraction|Wilson|Clopper-Pearson");
	curve_rows(out, "at least one", u);
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++)
		curve_rows(out, name, facts_at(facts_pipeline_block(doc, name), "curves.network_snr"));
	page_table_end(out);
	buf_text(out, "</details></figure></section>\n");
}

void numbers_found_by(struct buf *out, const json_t *doc)
{
	const char *bits, *name;
	char a[FACT];
	double most = 1;
	json_t *n;
	const json_t *table = facts_at(doc, "comparison.found_by");
	page_section(out, "found-by", "5. Who found what",
	             "Live drills by the exact set of pipelines that found them.");
	json_object_foreach((json_t *)(uintptr_t)table, bits, n) most = fmax(most, json_number_value(n));
	page_table_begin(out, "Sets of pipelines", "<found by|drills|<");
	json_object_foreach((json_t *)(uintptr_t)table, bits, n)
	{
		struct buf who = {0};
		for (size_t i = 0; bits[i] != '\0' && (name = facts_pipeline(doc, i)) != NULL; i++)
			if (bits[i] == '1')
				buf_printf(&who, "%s%s", who.len > 0 ? " and " : "", name);
		buf_text(out, "<tr>");
		page_cell(out, "t", who.len > 0 ? (const char *)who.data : "nobody");
		page_cell(out, "", facts_count(a, json_number_value(n)));
		buf_printf(out,
		           "<td class=\"t\" style=\"width:55%%\"><span class=\"bar%s\" "
		           "style=\"width:%.1f%%\"></span></td></tr>\n",
		           who.len > 0 ? "" : " none", 100 * json_number_value(n) / most);
		buf_free(&who);
	}
	page_table_end(out);
	buf_text(out, "</section>\n");
}

void numbers_missed(struct buf *out, const json_t *doc)
{
	json_t *list = facts_missed(doc);
	char a[FACT];
	page_section(
	    out, "missed", "6. Live drills that nobody found",
	    "The loud ones deserve a cause: data quality, a pipeline that was down, or a kind of signal that no "
	    "search covers.");
	page_table_begin(out, "Missed by every pipeline, loudest first",
	                 "<slot|<time (UTC)|network SNR|chirp mass, M&#9737;|distance, Mpc");
	for (size_t i = 0; i < json_array_size(list) && i < PAGE_ROWS; i++) {
		const json_t *m = json_array_get(list, i);
		buf_text(out, "<tr>");
		page_cell(out, "t", facts_text(m, "slot_id"));
		page_cell(out, "t", page_utc(a, facts_number(m, "arrival_gps")));
		page_cell(out, "", facts_significant(a, facts_number(m, "network_snr"), 3));
		page_cell(out, "", facts_significant(a, facts_number(m, "chirp_mass_msun"), 3));
		page_cell(out, "", facts_significant(a, facts_number(m, "distance_mpc"), 3));
		buf_text(out, "</tr>\n");
	}
	if (json_array_size(list) == 0)
		buf_text(out, "<tr><td class=\"t\" colspan=\"5\">none</td></tr>");
	page_table_end(out);
	page_cut_note(out, json_array_size(list), "missed.csv");
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
		page_cell(out, "t", i == 0 ? label : "");
		page_cell(out, "t", name);
		page_cell(out, "", facts_count(a, facts_number(r, "n")));
		page_cell(out, "", facts_significant(a, facts_number(r, "mean") * factor, 3));
		page_cell(out, "", facts_significant(a, facts_number(r, "sd") * factor, 3));
		page_cell(out, "", facts_significant(a, facts_number(r, "median") * factor, 3));
		page_cell(out, "", facts_count(a, facts_number(r, "stated_above_truth")));
		page_cell(out, "", facts_count(a, facts_number(r, "stated_below_truth")));
		page_cell(out, "", facts_p_value(a, facts_number(r, "sign_p")));
		buf_text(out, "</tr>\n");
	}
}

void numbers_parameters(struct buf *out, const json_t *doc)
{
	page_section(
	    out, "parameters", "7. Stated against true values",
	    "Of found drills only. The sign test asks whether stated values lie above the truth as often as below; "
	    "it assumes "
	    "nothing about their distribution. Honest uncertainties give a scatter of about one stated sigma.");
	buf_text(out, "<figure><div class=\"pair\">");
	figures_residuals(out, doc, "arrival_gps");
	figures_residuals(out, doc, "chirp_mass_msun");
	buf_text(out,
	         "</div><figcaption>One dot per found drill; the tall mark is the median.</figcaption></figure>\n");
	page_table_begin(
	    out, "Residuals; p-values belong to one pipeline's parameters and are not corrected for their number",
	    "<|<pipeline|n|mean|scatter|median|above|below|sign test p");
	residual_rows(out, doc, "arrival_gps", "arrival, ms", 1e3);
	residual_rows(out, doc, "chirp_mass_msun", "chirp mass, stated sigmas", 1);
	page_table_end(out);
	buf_text(out, "</section>\n");
}

void numbers_nulls(struct buf *out, const json_t *doc)
{
	const char *name;
	char a[FACT];
	page_section(out, "nulls", "8. Null slots and accidents",
	             "Null slots take the same path as live ones at gain zero. Claims near them beyond chance mean a "
	             "disturbance, or a leak.");
	page_table_begin(
	    out,
	    "Unexplained claims near null slots (p-values of the blindness family, not corrected for their "
	    "number), and the "
	    "chance of an accidental match",
	    "<pipeline|null slots|claims near one|expected|p of so many|background claims|accidental "
	    "match|crowded drills|"
	    "fraction without them");
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name), *t = json_object_get(p, "null_slot_test");
		buf_text(out, "<tr>");
		page_cell(out, "t", name);
		page_cell(out, "", facts_count(a, facts_number(t, "null_slots")));
		page_cell(out, "", facts_count(a, facts_number(t, "near_null_claims")));
		page_cell(out, "", facts_significant(a, facts_number(t, "expected"), 2));
		page_cell(out, "", facts_p_value(a, facts_number(t, "p_too_many")));
		page_cell(out, "", facts_count(a, facts_number(p, "accidental.background_claims")));
		page_cell(out, "", facts_percent(a, facts_number(p, "accidental.probability")));
		page_cell(out, "", facts_count(a, facts_number(p, "efficiency_uncrowded.crowded_live")));
		page_cell(out, "", facts_percent(a, facts_number(p, "efficiency_uncrowded.estimate")));
		buf_text(out, "</tr>\n");
	}
	page_table_end(out);
	buf_text(out, "</section>\n");
}
