/* What each figure shows is decided by what a board must decide: where drills were missed, and how sure the number is.
 */
#include "client/report/figures.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/report/facts.h"
#include "client/report/figure.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

#define MOST_POINTS 4000 /* of one figure; beyond that every k-th is drawn */

struct span {
	double min, max;
};

static void stretch(struct span *s, double x)
{
	if (!isfinite(x))
		return;
	s->min = fmin(s->min, x);
	s->max = fmax(s->max, x);
}

static size_t stride_for(size_t n)
{
	return n / MOST_POINTS + 1;
}

static void campaign_points(struct figure *f, const json_t *drills, double start)
{
	const size_t stride = stride_for(json_array_size(drills));
	for (size_t i = 0; i < json_array_size(drills); i += stride) {
		const json_t *d = json_array_get(drills, i);
		const double x = (facts_number(d, "arrival_gps") - start) / 86400, snr = facts_number(d, "network_snr");
		if (!(snr > 0))
			continue;
		if (strcmp(facts_text(d, "state"), "live") != 0)
			figure_diamond(f, "aside", x, snr, 5);
		else if (json_array_size(json_object_get(d, "claimed_by")) > 0)
			figure_dot(f, "found", x, snr, stride > 1 ? 3 : 5);
		else
			figure_dot(f, "missed", x, snr, stride > 1 ? 3 : 5);
	}
}

void figures_campaign(struct buf *out, const json_t *doc)
{
	const json_t *drills = facts_at(doc, "drills"),
	             *times = facts_at(doc, "unexplained_groups.all_pipelines_times_gps");
	struct span t = {INFINITY, -INFINITY}, snr = {INFINITY, -INFINITY};
	struct figure f;
	size_t i;
	json_t *d;
	json_array_foreach((json_t *)(uintptr_t)drills, i, d)
	{
		stretch(&t, facts_number(d, "arrival_gps"));
		if (facts_number(d, "network_snr") > 0)
			stretch(&snr, facts_number(d, "network_snr"));
	}
	json_array_foreach((json_t *)(uintptr_t)times, i, d) stretch(&t, json_number_value(d));
	if (!(snr.max >= snr.min))
		return;
	const double start = t.min, days = (t.max - t.min) / 86400;
	figure_begin(
	    &f, out, "campaign", "Played drills over the campaign",
	    "Each mark is one played drill, by time and network signal-to-noise ratio: found, missed by every "
	    "pipeline, "
	    "or set aside. Dashed lines mark times at which every pipeline claimed a signal that was no drill.",
	    980, 330, (double[4]){30, 20, 46, 56});
	figure_range_x(&f, -0.02 * days, 1.02 * days, false);
	figure_range_y(&f, snr.min * 0.85, snr.max * 1.2, true);
	figure_axis_y(&f, 5, 1, "", "network signal-to-noise ratio");
	figure_axis_x(&f, 10, 1, "", "days since the first played drill");
	json_array_foreach((json_t *)(uintptr_t)times, i, d)
	{
		const double x = (json_number_value(d) - start) / 86400;
		figure_line(&f, "event", x, f.y.from, x, f.y.to);
		if (i < 12)
			figure_label(&f, "event-label", figure_px(&f.x, x), f.y.high - 6, "middle", "unexplained, all");
	}
	campaign_points(&f, drills, start);
	figure_end(&f);
}

static void interval_row(struct figure *f, double row, const char *name, const json_t *eff, const json_t *itt)
{
	char text[FACT];
	const double y = figure_px(&f->y, row), e = facts_number(eff, "estimate");
	figure_label(f, "name", f->x.low - 14, y + 5, "end", name);
	if (!isfinite(e)) {
		figure_label(f, "tick", f->x.low + 8, y + 4, "start", "no live drill");
		return;
	}
	figure_box(f, "wide", figure_px(&f->x, facts_element(eff, "clopper_pearson", 0)), y - 9,
	           figure_px(&f->x, facts_element(eff, "clopper_pearson", 1)), y + 9);
	figure_box(f, "narrow", figure_px(&f->x, facts_element(eff, "wilson", 0)), y - 4,
	           figure_px(&f->x, facts_element(eff, "wilson", 1)), y + 4);
	if (isfinite(facts_number(itt, "estimate")))
		figure_diamond(f, "itt", facts_number(itt, "estimate"), row, 6);
	figure_dot(f, "point", e, row, 6);
	figure_label(f, "value", f->x.high + 12, y + 5, "start", facts_percent(text, e));
}

void figures_intervals(struct buf *out, const json_t *doc)
{
	const char *name;
	struct figure f;
	size_t rows = 1;
	while (facts_pipeline(doc, rows - 1) != NULL)
		rows++;
	figure_begin(
	    &f, out, "intervals", "Efficiency and its intervals",
	    "For at least one pipeline and for each alone: the fraction of live drills found (dot), its "
	    "Clopper-Pearson "
	    "interval (wide bar), its Wilson interval (narrow bar) and the fraction of all played drills (diamond).",
	    980, 60 + 46 * (double)rows, (double[4]){8, 90, 46, 150});
	figure_range_x(&f, 0, 1, false);
	figure_rows(&f, rows);
	figure_axis_x(&f, 5, 100, " %", "drills found");
	interval_row(&f, 0, "at least one", facts_at(doc, "comparison.union"),
	             facts_at(doc, "comparison.union_intention_to_treat"));
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name);
		interval_row(&f, (double)i + 1, name, json_object_get(p, "efficiency"),
		             json_object_get(p, "intention_to_treat"));
	}
	figure_end(&f);
}

void figures_curve(struct buf *out, const json_t *curve, const char *name, unsigned number)
{
	const json_t *bins = json_object_get(curve, "bins"), *band = json_object_get(curve, "monotone_band");
	struct span x = {INFINITY, -INFINITY};
	struct figure f;
	char id[24];
	size_t i;
	json_t *b;
	json_array_foreach((json_t *)(uintptr_t)bins, i, b)
	{
		if (facts_number(b, "lower_edge") > 0)
			stretch(&x, facts_number(b, "lower_edge"));
		stretch(&x, facts_number(b, "upper_edge"));
	}
	(void)snprintf(id, sizeof id, "curve-%u", number);
	char *title = text_printf("Efficiency along network signal-to-noise ratio: %s", name);
	figure_begin(
	    &f, out, id, title,
	    "Each bin of equally many drills: the fraction found (dot at the mean), its range of signal-to-noise ratio "
	    "(horizontal line) and its Wilson interval (vertical line).",
	    470, 270, (double[4]){34, 16, 46, 56});
	qb_free(title);
	figure_range_x(&f, x.min * 0.9, x.max * 1.1, true);
	figure_range_y(&f, 0, 1, false);
	figure_axis_y(&f, 4, 100, " %", NULL);
	figure_axis_x(&f, 5, 1, "", "network signal-to-noise ratio");
	figure_label(&f, "name", f.x.low, 18, "start", name);
	if (band != NULL) {
		const double at = facts_number(band, "at");
		const double px = figure_px(&f.x, at);
		figure_box(&f, "band", px - 7, figure_px(&f.y, facts_element(band, "interval", 0)), px + 7,
		           figure_px(&f.y, facts_element(band, "interval", 1)));
	}
	json_array_foreach((json_t *)(uintptr_t)bins, i, b)
	{
		const double mean = facts_number(b, "mean"), e = facts_number(b, "efficiency");
		figure_line(&f, "whisker", mean, facts_element(b, "wilson", 0), mean, facts_element(b, "wilson", 1));
		figure_line(&f, "extent", facts_number(b, "lower_edge"), e, facts_number(b, "upper_edge"), e);
		figure_dot(&f, "point", mean, e, 5);
	}
	figure_end(&f);
}

static void strip(struct figure *f, double row, const char *name, const json_t *block, const char *member,
                  double factor)
{
	const json_t *list = json_object_get(block, "list");
	const size_t stride = stride_for(json_array_size(list));
	const double y = figure_px(&f->y, row);
	figure_label(f, "name", f->x.low - 12, y + 5, "end", name);
	for (size_t i = 0; i < json_array_size(list); i += stride) {
		const double v = facts_number(json_array_get(list, i), member) * factor;
		if (isfinite(v))
			figure_dot(f, "residual", v, row + 0.12 * ((double)(i % 5) - 2), 4);
	}
	const double median = facts_number(block, "median") * factor;
	if (isfinite(median))
		figure_line(f, "median", median, row - 0.36, median, row + 0.36);
}

void figures_residuals(struct buf *out, const json_t *doc, const char *parameter)
{
	const bool time = strcmp(parameter, "arrival_gps") == 0;
	const char *member = time ? "difference_s" : "z", *name;
	const double factor = time ? 1e3 : 1;
	double reach = 0;
	size_t rows = 0, i;
	struct figure f;
	for (; (name = facts_pipeline(doc, rows)) != NULL; rows++) {
		json_t *r;
		const json_t *block =
		    json_object_get(json_object_get(json_object_get(doc, "residuals"), name), parameter);
		json_array_foreach((json_t *)(uintptr_t)json_object_get(block, "list"), i, r)
		{
			const double v = fabs(facts_number(r, member) * factor);
			reach = isfinite(v) ? fmax(reach, v) : reach;
		}
	}
	figure_begin(&f, out, time ? "res-time" : "res-mass",
	             time ? "Arrival time: stated minus true" : "Chirp mass: stated minus true, in stated sigmas",
	             "One dot per found drill, one row per pipeline; the tall mark is the median. Dots left of zero "
	             "are stated too "
	             "early or too low, right of zero too late or too high.",
	             470, 74 + 48 * (double)rows, (double[4]){10, 16, 46, 92});
	figure_range_x(&f, -1.1 * fmax(reach, 1e-3), 1.1 * fmax(reach, 1e-3), false);
	figure_rows(&f, rows);
	figure_axis_x(&f, 5, 1, "",
	              time ? "stated \xe2\x88\x92 true arrival, ms"
	                   : "stated \xe2\x88\x92 true chirp mass, stated sigmas");
	figure_line(&f, "zero", 0, f.y.from, 0, f.y.to);
	for (i = 0; (name = facts_pipeline(doc, i)) != NULL; i++)
		strip(&f, (double)i, name,
		      json_object_get(json_object_get(json_object_get(doc, "residuals"), name), parameter), member,
		      factor);
	figure_end(&f);
}
