/*
 * The report's figures, each drawn from the audit document alone. Every one has a table of the same numbers behind it
 * in the page (html.c).
 */
#ifndef QB_CLIENT_REPORT_FIGURES_H
#define QB_CLIENT_REPORT_FIGURES_H

#include "server/base/buf.h"
#include "server/base/json.h"

void figures_campaign(struct buf *out, const json_t *doc);  /* drills over time and loudness */
void figures_intervals(struct buf *out, const json_t *doc); /* efficiency with its intervals */
void figures_curve(struct buf *out, const json_t *curve, const char *name, unsigned number); /* one pipeline's bins */
void figures_residuals(struct buf *out, const json_t *doc, const char *parameter);           /* strips per pipeline */

#endif
