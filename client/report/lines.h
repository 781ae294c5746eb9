/* Lines of the report for terminals, and the part of both reports that tells the course of the campaign (course.c). */
#ifndef QB_CLIENT_REPORT_LINES_H
#define QB_CLIENT_REPORT_LINES_H

#include "server/base/buf.h"
#include "server/base/json.h"

/* Wraps at blanks; continuation lines start under the text. */
void lines_wrap(struct buf *out, const char *lead, const char *text);
void lines_heading(struct buf *out, const char *text);

/* Incidents and whatever else is in the document's `course`; nothing when it has none. */
void course_html(struct buf *out, const json_t *doc);
void course_text(struct buf *out, const json_t *doc);

/* Who held the key, and the register of every campaign: the document's `course.custody` and `course.register`. */
void register_html(struct buf *out, const json_t *doc);
void register_text(struct buf *out, const json_t *doc);

#endif
