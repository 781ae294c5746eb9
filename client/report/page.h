/*
 * Pieces of HTML that the page's sections share, and the sections that hold the numbers (numbers.c).
 */
#ifndef QB_CLIENT_REPORT_PAGE_H
#define QB_CLIENT_REPORT_PAGE_H

#include "client/report/facts.h"

#define PAGE_ROWS 60 /* rows of a list in the page; the CSV tables hold them all */

/* A section is closed by its writer with </section>; title and lead are our own text, not escaped. */
void page_section(struct buf *out, const char *id, const char *title, const char *lead);
/* heads: column heads separated by '|'; a leading '<' aligns left. */
void page_table_begin(struct buf *out, const char *caption, const char *heads);
void page_table_end(struct buf *out);
/* cls: "" for numbers, "t" for text, "w" for text that may wrap. */
void page_cell(struct buf *out, const char *cls, const char *text);
/* Says where the rest is when n rows are too many. */
void page_cut_note(struct buf *out, size_t n, const char *file);
/* A time for columns whose head names the scale. */
const char *page_utc(char out[static FACT], double gps);

void numbers_efficiency(struct buf *out, const json_t *doc);
void numbers_curves(struct buf *out, const json_t *doc);
void numbers_found_by(struct buf *out, const json_t *doc);
void numbers_missed(struct buf *out, const json_t *doc);
void numbers_parameters(struct buf *out, const json_t *doc);
void numbers_nulls(struct buf *out, const json_t *doc);

#endif
