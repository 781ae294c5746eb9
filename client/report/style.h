/* The look of the report's page: one style sheet, inline, so that the page stays in one piece. NULL ends it. */
#ifndef QB_CLIENT_REPORT_STYLE_H
#define QB_CLIENT_REPORT_STYLE_H

extern const char *const report_style[];

#endif
