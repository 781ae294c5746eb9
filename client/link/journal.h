/*
 * Files of a home that only grow: written at their end, flushed to disk before the call returns, safe against a crash
 * and against a second command of the same person at the same time.
 */
#ifndef QB_CLIENT_JOURNAL_H
#define QB_CLIENT_JOURNAL_H

#include <stdbool.h>

#include "server/base/buf.h"

/*
 * Appends to a file (mode 0600, created when missing) that must end at `at`.
 *
 * Returned: *done     false when it ends elsewhere: another command wrote meanwhile, or a crash cut the last write
 *           *size     how long the file was; may be NULL
 * Errors:   QB_IO     nothing is appended then
 */
enum qb_status journal_append(const char *path, size_t at, const void *p, size_t n, bool *done, size_t *size,
                              struct qb_error *e) QB_MUST_USE;

#endif
