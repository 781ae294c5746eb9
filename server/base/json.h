/*
 * JSON documents through jansson, with the strictness that messages from other parties need: duplicates refused, depth
 * and size bounded, unknown keys refused, and one-line errors that name the key.
 */
#ifndef QB_BASE_JSON_H
#define QB_BASE_JSON_H

#include <jansson.h>
#include <stdint.h>

#include "server/base/err.h"

/*
 * Given:    text, n     UTF-8 JSON, one document
 *           what        what it is, for the error ("claim file amber.json")
 * Returned: *out        owned by the caller (json_decref)
 * Errors:   QB_FORMAT with line and column; documents over 64 MiB or deeper than 64 are refused
 */
enum qb_status json_read(const char *text, size_t n, const char *what, json_t **out, struct qb_error *e) QB_MUST_USE;

/*
 * From here on every document's memory is overwritten when it is freed: a slot key passes through documents on its way.
 * Called by secret_setup.
 */
void json_wipe_on_free(void);

/* Compact text, keys in insertion order, reals with 17 digits; caller frees with qb_free. */
char *json_text(const json_t *doc);
/* The same with two spaces of indent and a final newline, for people. */
char *json_pretty(const json_t *doc);

/*
 * Typed members. `obj` may be any value (then: QB_FORMAT "is not an object"). Pointers stay owned by obj. The error's
 * where is `what: key`.
 */
enum qb_status json_str(const json_t *obj, const char *key, const char *what, const char **out,
                        struct qb_error *e) QB_MUST_USE;
enum qb_status json_int(const json_t *obj, const char *key, const char *what, int64_t min, int64_t max, int64_t *out,
                        struct qb_error *e) QB_MUST_USE;
enum qb_status json_num(const json_t *obj, const char *key, const char *what, double *out,
                        struct qb_error *e) QB_MUST_USE;
enum qb_status json_hex(const json_t *obj, const char *key, const char *what, uint8_t *out, size_t n,
                        struct qb_error *e) QB_MUST_USE;
/* GPS time: decimal string or number -> integer nanoseconds. */
enum qb_status json_gps(const json_t *obj, const char *key, const char *what, int64_t *out_ns,
                        struct qb_error *e) QB_MUST_USE;
/* Refuses any key of obj that is not in the NULL-ended list. */
enum qb_status json_only(const json_t *obj, const char *const *keys, const char *what, struct qb_error *e) QB_MUST_USE;

json_t *json_hex_new(const uint8_t *p, size_t n); /* a JSON string of lower-case hexadecimal */
json_t *json_gps_new(int64_t gps_ns);             /* a JSON string, decimal seconds */

#endif
