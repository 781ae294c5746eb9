/*
 * An audit document made readable: one self-contained page, one text for terminals, and CSV tables. All are pure
 * functions of the document; what is missing in it is said to be missing.
 */
#ifndef QB_CLIENT_REPORT_H
#define QB_CLIENT_REPORT_H

#include <stddef.h>

#include "server/base/buf.h"
#include "server/base/err.h"
#include "server/base/json.h"

/*
 * Given:    audit   the document of audit_run(), perhaps read back from a file
 * Returned: appended to out: UTF-8; the page holds no script and asks the network for nothing
 * Errors:   QB_FORMAT   not an audit document
 */
enum qb_status report_html(const json_t *audit, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status report_text(const json_t *audit, struct buf *out, struct qb_error *e) QB_MUST_USE;

/* The CSV tables (RFC 4180, header row first): how many, their file names, and the content of each. */
size_t report_csv_count(void);
const char *report_csv_name(size_t i);
enum qb_status report_csv(const json_t *audit, size_t i, struct buf *out, struct qb_error *e) QB_MUST_USE;

#endif
