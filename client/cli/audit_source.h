/*
 * Where an audit's input comes from. Each source fills an audit_input; the audit itself never knows which one it was. A
 * bundle reader joins here as audit_source_bundle() with the same shape.
 */
#ifndef QB_CLIENT_AUDIT_SOURCE_H
#define QB_CLIENT_AUDIT_SOURCE_H

#include "server/audit/input.h"

/*
 * An audit folder: settings.json, slots.jsonl, claims.jsonl (docs/audit.md).
 *
 * Given:    dir    path of the folder
 * Returned: *out   owned by the caller (audit_input_free)
 * Errors:   QB_IO for a missing file, QB_FORMAT and QB_RANGE with file and line
 */
enum qb_status audit_source_folder(const char *dir, struct audit_input **out, struct qb_error *e) QB_MUST_USE;

#endif
