/* Claim files: one JSON document or JSON lines, validated strictly before anything is sealed. */
#ifndef QB_CLIENT_CLI_CLAIM_FILE_H
#define QB_CLIENT_CLI_CLAIM_FILE_H

#include "server/base/json.h"

/*
 * Returned: *out      array of the claims as read, owned by the caller
 * Errors:   QB_IO; QB_FORMAT, QB_RANGE with file:line and key
 */
enum qb_status claim_file_read(const char *path, json_t **out, struct qb_error *e) QB_MUST_USE;
/* One claim; where is file:line. */
enum qb_status claim_check(const json_t *claim, const char *where, struct qb_error *e) QB_MUST_USE;

#endif
