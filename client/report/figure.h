/*
 * A small drawing board for the report's figures: an SVG with axes, ticks and marks, styled by the page's classes. No
 * plotting program is needed, and the same document always draws the same bytes.
 */
#ifndef QB_CLIENT_REPORT_FIGURE_H
#define QB_CLIENT_REPORT_FIGURE_H

#include <stdbool.h>

#include "server/base/buf.h"

struct figure_axis {
	double from, to;  /* data */
	double low, high; /* pixels of from and to */
	bool log;         /* then from > 0 */
};

struct figure {
	struct buf *out;
	double width, height; /* pixels */
	struct figure_axis x, y;
};

/* Text for HTML and SVG: the five special characters are escaped, everything else is passed on. */
void figure_escape(struct buf *out, const char *text);

/*
 * Given:    id      unique in the page
 *           title   short, read first by a screen reader; alt: what the figure shows, in a sentence or two
 *           left, bottom ...   margins around the plotting area, pixels
 */
void figure_begin(struct figure *f, struct buf *out, const char *id, const char *title, const char *alt, double width,
                  double height, const double margins[static 4]);
void figure_end(struct figure *f);

/* Data ranges; a range without width is widened. */
void figure_range_x(struct figure *f, double from, double to, bool log);
void figure_range_y(struct figure *f, double from, double to, bool log);
/* Rows 0 .. n-1 from top to bottom. */
void figure_rows(struct figure *f, size_t n);
double figure_px(const struct figure_axis *a, double value);

/* Axis with about n round ticks; unit is the label; grid: lines across. */
void figure_axis_x(struct figure *f, int n, double factor, const char *suffix, const char *label);
void figure_axis_y(struct figure *f, int n, double factor, const char *suffix, const char *label);

/* Marks, in data coordinates; cls is a class of the page's style. */
void figure_line(struct figure *f, const char *cls, double x0, double y0, double x1, double y1);
void figure_dot(struct figure *f, const char *cls, double x, double y, double radius);
void figure_diamond(struct figure *f, const char *cls, double x, double y, double radius);
/* In pixels: text and a rectangle. anchor: start, middle, end. */
void figure_label(struct figure *f, const char *cls, double px, double py, const char *anchor, const char *text);
void figure_box(struct figure *f, const char *cls, double px0, double py0, double px1, double py1);

#endif
