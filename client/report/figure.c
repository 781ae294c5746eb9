/* SVG primitives. Coordinates are printed with a tenth of a pixel, which keeps files small and stable. */
#include "client/report/figure.h"

#include <math.h>
#include <stdio.h>

void figure_escape(struct buf *out, const char *text)
{
	for (; *text != '\0'; text++) {
		if (text[0] == ' ' && text[1] == '%') {
			buf_text(out, "&#160;"); /* a number keeps its unit when the line breaks */
			continue;
		}
		switch (*text) {
		case '&':
			buf_text(out, "&amp;");
			break;
		case '<':
			buf_text(out, "&lt;");
			break;
		case '>':
			buf_text(out, "&gt;");
			break;
		case '"':
			buf_text(out, "&quot;");
			break;
		case '\'':
			buf_text(out, "&#39;");
			break;
		default:
			buf_put(out, text, 1);
		}
	}
}

void figure_begin(struct figure *f, struct buf *out, const char *id, const char *title, const char *alt, double width,
                  double height, const double margins[static 4])
{
	*f = (struct figure){.out = out, .width = width, .height = height};
	f->x.low = margins[3];
	f->x.high = width - margins[1];
	f->y.low = height - margins[2];
	f->y.high = margins[0];
	buf_printf(out, "<svg viewBox=\"0 0 %.0f %.0f\" role=\"img\" aria-labelledby=\"%s-t %s-d\">", width, height, id,
	           id);
	buf_printf(out, "<title id=\"%s-t\">", id);
	figure_escape(out, title);
	buf_printf(out, "</title><desc id=\"%s-d\">", id);
	figure_escape(out, alt);
	buf_text(out, "</desc>\n");
}

void figure_end(struct figure *f)
{
	buf_text(f->out, "</svg>\n");
}

static void set_range(struct figure_axis *a, double from, double to, bool log)
{
	if (!isfinite(from) || !isfinite(to) || (log && !(from > 0))) {
		from = 1;
		to = 10;
	}
	if (!(to > from)) {
		const double margin = fabs(from) > 0 ? fabs(from) / 2 : 1;
		to = from + margin;
		from -= log ? from / 3 : margin;
	}
	a->from = from;
	a->to = to;
	a->log = log;
}

void figure_range_x(struct figure *f, double from, double to, bool log)
{
	set_range(&f->x, from, to, log);
}

void figure_range_y(struct figure *f, double from, double to, bool log)
{
	set_range(&f->y, from, to, log);
}

void figure_rows(struct figure *f, size_t n)
{
	f->y.from = (double)n - 0.4;
	f->y.to = -0.6;
	f->y.log = false;
}

double figure_px(const struct figure_axis *a, double value)
{
	double part;
	if (a->log)
		part = value > 0 ? log(value / a->from) / log(a->to / a->from) : 0;
	else
		part = (value - a->from) / (a->to - a->from);
	part = fmin(1, fmax(0, part));
	return a->low + part * (a->high - a->low);
}

/* The next round tick after `at`: steps of 1, 2 or 5 times a power of ten; on a log axis 1, 2, 5, 10 ... */
static double next_tick(const struct figure_axis *a, double step, double at)
{
	if (!a->log)
		return at + step;
	const double power = pow(10, floor(log10(at) + 1e-9)), lead = at / power;
	return power * (lead < 1.5 ? 2 : lead < 3 ? 5 : 10);
}

static double first_tick(const struct figure_axis *a, double step)
{
	if (!a->log)
		return ceil(a->from / step - 1e-9) * step;
	double at = pow(10, floor(log10(a->from)));
	while (at < a->from * (1 - 1e-9))
		at = next_tick(a, step, at);
	return at;
}

static double round_step(double span, int n)
{
	const double raw = span / n, power = pow(10, floor(log10(raw))), lead = raw / power;
	return power * (lead <= 1 ? 1 : lead <= 2 ? 2 : lead <= 2.5 ? 2.5 : lead <= 5 ? 5 : 10);
}

static void tick_text(char out[static 40], double value, const char *suffix)
{
	if (fabs(value) < 1e-12)
		value = 0;
	(void)snprintf(out, 40, "%s%.6g%s", value < 0 ? "\xe2\x88\x92" : "", fabs(value), suffix);
}

void figure_axis_x(struct figure *f, int n, double factor, const char *suffix, const char *label)
{
	const double step = round_step(f->x.to - f->x.from, n);
	for (double at = first_tick(&f->x, step); at <= f->x.to * (1 + 1e-9) + 1e-12; at = next_tick(&f->x, step, at)) {
		char text[40];
		const double px = figure_px(&f->x, at);
		buf_printf(f->out, "<line class=\"grid\" x1=\"%.1f\" y1=\"%.1f\" x2=\"%.1f\" y2=\"%.1f\"/>", px,
		           f->y.low, px, f->y.high);
		tick_text(text, at * factor, suffix);
		figure_label(f, "tick", px, f->y.low + 16, "middle", text);
	}
	buf_printf(f->out, "<line class=\"axis\" x1=\"%.1f\" y1=\"%.1f\" x2=\"%.1f\" y2=\"%.1f\"/>", f->x.low, f->y.low,
	           f->x.high, f->y.low);
	if (label != NULL)
		figure_label(f, "unit", (f->x.low + f->x.high) / 2, f->y.low + 35, "middle", label);
}

void figure_axis_y(struct figure *f, int n, double factor, const char *suffix, const char *label)
{
	const double step = round_step(f->y.to - f->y.from, n);
	for (double at = first_tick(&f->y, step); at <= f->y.to * (1 + 1e-9) + 1e-12; at = next_tick(&f->y, step, at)) {
		char text[40];
		const double py = figure_px(&f->y, at);
		buf_printf(f->out, "<line class=\"grid\" x1=\"%.1f\" y1=\"%.1f\" x2=\"%.1f\" y2=\"%.1f\"/>", f->x.low,
		           py, f->x.high, py);
		tick_text(text, at * factor, suffix);
		figure_label(f, "tick", f->x.low - 8, py + 4, "end", text);
	}
	if (label != NULL)
		figure_label(f, "unit", f->x.low - 8, f->y.high - 12, "start", label);
}

void figure_line(struct figure *f, const char *cls, double x0, double y0, double x1, double y1)
{
	buf_printf(f->out, "<line class=\"%s\" x1=\"%.1f\" y1=\"%.1f\" x2=\"%.1f\" y2=\"%.1f\"/>\n", cls,
	           figure_px(&f->x, x0), figure_px(&f->y, y0), figure_px(&f->x, x1), figure_px(&f->y, y1));
}

void figure_dot(struct figure *f, const char *cls, double x, double y, double radius)
{
	buf_printf(f->out, "<circle class=\"%s\" cx=\"%.1f\" cy=\"%.1f\" r=\"%.1f\"/>\n", cls, figure_px(&f->x, x),
	           figure_px(&f->y, y), radius);
}

void figure_diamond(struct figure *f, const char *cls, double x, double y, double radius)
{
	const double px = figure_px(&f->x, x), py = figure_px(&f->y, y);
	buf_printf(f->out, "<path class=\"%s\" d=\"M%.1f %.1fl%.1f %.1fl%.1f %.1fl%.1f %.1fz\"/>\n", cls, px,
	           py - radius, radius, radius, -radius, radius, -radius, -radius);
}

void figure_label(struct figure *f, const char *cls, double px, double py, const char *anchor, const char *text)
{
	buf_printf(f->out, "<text class=\"%s\" x=\"%.1f\" y=\"%.1f\" text-anchor=\"%s\">", cls, px, py, anchor);
	figure_escape(f->out, text);
	buf_text(f->out, "</text>\n");
}

void figure_box(struct figure *f, const char *cls, double px0, double py0, double px1, double py1)
{
	buf_printf(f->out, "<rect class=\"%s\" x=\"%.1f\" y=\"%.1f\" width=\"%.1f\" height=\"%.1f\" rx=\"2\"/>\n", cls,
	           fmin(px0, px1), fmin(py0, py1), fabs(px1 - px0), fabs(py1 - py0));
}
