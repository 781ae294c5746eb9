/*
 * Bytes as lines of letters for paper, for a backup that survives every disk: meant for a key file, which is encrypted
 * already. Sixteen letters that are not mistaken for each other or for digits, a number and a check on every line, so
 * that the line with the slip of the pen is named, and a check over all, so that lines of two copies do not mix.
 *
 *   # title
 *   01  ACDE FHJK MNPR TWXY ACDE FHJK  MNPR
 *   02  ...
 */
#ifndef QB_CUSTODY_PAPER_H
#define QB_CUSTODY_PAPER_H

#include <stddef.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/err.h"

#define PAPER_LETTERS    "ACDEFHJKMNPRTWXY" /* values 0..15 */
#define PAPER_BYTES_MAX  4096
#define PAPER_LINE_BYTES 12
#define PAPER_TEXT_MAX   65536

/*
 * Given:    p, n            1..PAPER_BYTES_MAX bytes; nothing that is done depends on their values
 *           title           one line for people, or NULL; not part of what is checked
 * Returned: out             the text is appended, each line with its end
 */
void paper_encode(const uint8_t *p, size_t n, const char *title, struct buf *out);

/*
 * Reads it back: case, spaces, dots, dashes and empty lines do not matter, nor do lines that begin with #.
 *
 * Returned: out             the n bytes are appended
 * Errors:   QB_FORMAT       the line at fault is in `where` as "line 7"; or "paper copy" when it is not one line's
 * fault
 */
enum qb_status paper_decode(const char *text, size_t n, struct buf *out, struct qb_error *e) QB_MUST_USE;

#endif
