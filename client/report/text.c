/* The report for terminals: the same order as the page, in at most 100 columns. */
#include "client/report/report.h"

#include <math.h>
#include <string.h>

#include "client/report/facts.h"
#include "client/report/lines.h"

#define WIDTH 96
#define MANY  12 /* rows of a list; the tables hold the rest */

/* Wraps at blanks; continuation lines start under the text. Counts bytes, which is close enough for plain English. */
void lines_wrap(struct buf *out, const char *lead, const char *text)
{
	const size_t indent = strlen(lead);
	size_t column = indent;
	buf_text(out, lead);
	for (const char *p = text; *p != '\0';) {
		size_t n = strcspn(p, " ");
		if (p[n] == ' ' && p[n + 1] == '%') /* a number keeps its unit */
			n += 1 + strcspn(p + n + 1, " ");
		if (column > indent && column + 1 + n > WIDTH) {
			buf_printf(out, "\n%*s", (int)indent, "");
			column = indent;
		} else if (column > indent) {
			buf_text(out, " ");
			column++;
		}
		buf_put(out, p, n);
		column += n;
		p += p[n] == ' ' ? n + 1 : n;
	}
	buf_text(out, "\n");
}

void lines_heading(struct buf *out, const char *text)
{
	buf_printf(out, "\n%s\n", text);
	for (const char *p = text; *p != '\0'; p++)
		buf_text(out, "-");
	buf_text(out, "\n");
}

static void summary(struct buf *out, const json_t *doc)
{
	json_t *list = facts_summary(doc), *pair;
	size_t i;
	json_array_foreach(list, i, pair)
	{
		char lead[FACT];
		(void)snprintf(lead, sizeof lead, "%-18s ", json_string_value(json_array_get(pair, 0)));
		lines_wrap(out, lead, json_string_value(json_array_get(pair, 1)));
	}
	json_decref(list);
}

static void states(struct buf *out, const json_t *doc)
{
	const char *word;
	json_t *n;
	char a[FACT], b[FACT];
	lines_heading(out, "Campaign");
	buf_text(out, "slots: ");
	bool first = true;
	json_object_foreach((json_t *)(uintptr_t)json_object_get(doc, "slot_states"), word, n)
	{
		buf_printf(out, "%s%" JSON_INTEGER_FORMAT " %s", first ? "" : ", ", json_integer_value(n), word);
		first = false;
	}
	buf_printf(out, "\nobserving time %s, of it background (away from drills and vetoes) %s\n",
	           facts_duration(a, facts_number(doc, "observing_livetime_s")),
	           facts_duration(b, facts_number(doc, "background_livetime_s")));
}

static void groups(struct buf *out, const json_t *doc)
{
	const json_t *list = facts_at(doc, "unexplained_groups.groups");
	char utc[FACT];
	size_t i;
	json_t *g;
	lines_heading(out, "Claims that match no drill");
	json_array_foreach((json_t *)(uintptr_t)list, i, g)
	{
		if (i == MANY) {
			buf_printf(out, "... and %zu more groups (unexplained.csv)\n", json_array_size(list) - MANY);
			break;
		}
		buf_printf(out, "GPS %.3f  %s ", facts_number(g, "time_gps"),
		           facts_utc(utc, facts_number(g, "time_gps")));
		size_t k;
		json_t *name;
		json_array_foreach(json_object_get(g, "pipelines"), k, name)
		    buf_printf(out, " %s", json_string_value(name));
		buf_text(out, "\n");
	}
	if (json_array_size(list) == 0)
		buf_text(out, "none\n");
}

static void efficiency_line(struct buf *out, const char *name, const json_t *eff, const json_t *itt)
{
	char e[FACT], cp[FACT], w[FACT], c[FACT], t[FACT];
	buf_printf(out, "%-14s %5.0f %5.0f  %8s  %-17s  %-17s  %9s  %9s\n", name, facts_number(eff, "found"),
	           facts_number(eff, "live"), facts_percent(e, facts_number(eff, "estimate")),
	           facts_range(cp, json_object_get(eff, "clopper_pearson")),
	           facts_range(w, json_object_get(eff, "wilson")), facts_percent(c, facts_element(eff, "corrected", 0)),
	           facts_percent(t, facts_number(itt, "estimate")));
}

static void efficiencies(struct buf *out, const json_t *doc)
{
	const char *name;
	lines_heading(out, "Efficiency");
	buf_printf(out, "%-14s %5s %5s  %8s  %-17s  %-17s  %9s  %9s\n", "", "found", "live", "fraction", "guaranteed",
	           "Wilson", "corrected", "of played");
	efficiency_line(out, "at least one", facts_at(doc, "comparison.union"),
	                facts_at(doc, "comparison.union_intention_to_treat"));
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name);
		efficiency_line(out, name, json_object_get(p, "efficiency"), json_object_get(p, "intention_to_treat"));
	}
}

static void curve(struct buf *out, const json_t *doc)
{
	char w[FACT], e[FACT], a[FACT], b[FACT];
	size_t i;
	json_t *bin;
	const json_t *bins = facts_at(doc, "comparison.union_curves.network_snr.bins");
	if (json_array_size(bins) == 0)
		return;
	lines_heading(out, "Efficiency along network signal-to-noise ratio, at least one pipeline");
	json_array_foreach((json_t *)(uintptr_t)bins, i, bin)
	{
		const double x = facts_number(bin, "efficiency");
		buf_printf(out, "%7s to %-7s %3.0f of %-3.0f %8s  %-16s ",
		           facts_significant(a, facts_number(bin, "lower_edge"), 3),
		           facts_significant(b, facts_number(bin, "upper_edge"), 3), facts_number(bin, "found"),
		           facts_number(bin, "drills"), facts_percent(e, x),
		           facts_range(w, json_object_get(bin, "wilson")));
		for (int k = 0; k < (int)(20 * x + 0.5); k++)
			buf_text(out, "#");
		buf_text(out, "\n");
	}
}

static void missed(struct buf *out, const json_t *doc)
{
	json_t *list = facts_missed(doc);
	char utc[FACT], snr[FACT], mass[FACT], d[FACT];
	size_t i;
	json_t *m;
	lines_heading(out, "Live drills found by nobody, loudest first");
	json_array_foreach((json_t *)(uintptr_t)list, i, m)
	{
		if (i == MANY) {
			buf_printf(out, "... and %zu more (missed.csv)\n", json_array_size(list) - MANY);
			break;
		}
		buf_printf(out, "%-14s %s  SNR %-6s chirp mass %-6s Msun  %s Mpc\n", facts_text(m, "slot_id"),
		           facts_utc(utc, facts_number(m, "arrival_gps")),
		           facts_significant(snr, facts_number(m, "network_snr"), 3),
		           facts_significant(mass, facts_number(m, "chirp_mass_msun"), 3),
		           facts_significant(d, facts_number(m, "distance_mpc"), 3));
	}
	if (json_array_size(list) == 0)
		buf_text(out, "none\n");
	json_decref(list);
}

static void found_by(struct buf *out, const json_t *doc)
{
	const char *bits, *name;
	json_t *n;
	lines_heading(out, "Found by");
	json_object_foreach((json_t *)(uintptr_t)facts_at(doc, "comparison.found_by"), bits, n)
	{
		buf_printf(out, "%5" JSON_INTEGER_FORMAT "  ", json_integer_value(n));
		bool any = false;
		for (size_t i = 0; bits[i] != '\0' && (name = facts_pipeline(doc, i)) != NULL; i++) {
			if (bits[i] != '1')
				continue;
			buf_printf(out, "%s%s", any ? " + " : "", name);
			any = true;
		}
		buf_text(out, any ? "\n" : "nobody\n");
	}
}

static void residuals(struct buf *out, const json_t *doc)
{
	const char *name;
	char a[FACT], b[FACT], p[FACT];
	lines_heading(out, "Stated against true values of found drills");
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *r = json_object_get(json_object_get(doc, "residuals"), name);
		const json_t *t = json_object_get(r, "arrival_gps"), *m = json_object_get(r, "chirp_mass_msun");
		buf_printf(out, "%-14s arrival: median %s ms late, scatter %s ms, sign test p = %s (n = %.0f)\n", name,
		           facts_significant(a, 1e3 * facts_number(t, "median"), 3),
		           facts_significant(b, 1e3 * facts_number(t, "sd"), 3),
		           facts_p_value(p, facts_number(t, "sign_p")), facts_number(t, "n"));
		buf_printf(out, "%-14s chirp mass: median %s stated sigmas, scatter %s, sign test p = %s (n = %.0f)\n",
		           "", facts_significant(a, facts_number(m, "median"), 3),
		           facts_significant(b, facts_number(m, "sd"), 3), facts_p_value(p, facts_number(m, "sign_p")),
		           facts_number(m, "n"));
	}
}

static enum qb_status must_be_audit(const json_t *doc, struct qb_error *e)
{
	if (strcmp(facts_text(doc, "document"), "audit") != 0)
		return qb_fail(e, QB_FORMAT, "report", "give the file that `audit run` wrote",
		               "is not an audit document");
	return QB_OK;
}

enum qb_status report_text(const json_t *doc, struct buf *out, struct qb_error *e)
{
	const enum qb_status st = must_be_audit(doc, e);
	if (st != QB_OK)
		return st;
	buf_printf(out, "Audit of %s\n\n", *facts_text(doc, "set") != '\0' ? facts_text(doc, "set") : "an unnamed set");
	summary(out, doc);
	states(out, doc);
	course_text(out, doc);
	register_text(out, doc);
	groups(out, doc);
	efficiencies(out, doc);
	curve(out, doc);
	found_by(out, doc);
	missed(out, doc);
	residuals(out, doc);
	lines_heading(out, "How to read this");
	json_t *list = facts_limits(doc), *line;
	size_t i;
	json_array_foreach(list, i, line) lines_wrap(out, "- ", json_string_value(line));
	json_decref(list);
	return QB_OK;
}
