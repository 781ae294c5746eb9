/*
 * The audit of a campaign: opened truth and claims in, one document out. Pure: the same input gives the same document,
 * bit for bit.
 */
#ifndef QB_AUDIT_AUDIT_H
#define QB_AUDIT_AUDIT_H

#include "server/audit/input.h"

/*
 * Given:    in     complete input (docs/audit.md)
 * Returned: *out   the result, blocks as docs/audit.md describes; owned by the caller (json_decref)
 * Errors:   QB_FORMAT  identifiers that occur twice; QB_RANGE  a crowd too large to match
 */
enum qb_status audit_run(const struct audit_input *in, json_t **out, struct qb_error *e) QB_MUST_USE;

#endif
