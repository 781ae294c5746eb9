/*
 * The strict walker over human-written files: libyaml's nodes copied into a small tree that keeps line numbers, and
 * typed getters that refuse a wrong type, a missing key, a value out of range, and (at the end) every key that nobody
 * asked for. JSON files are accepted, since YAML contains JSON.
 */
#ifndef QB_BASE_YAML_H
#define QB_BASE_YAML_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/err.h"

enum yaml_kind { YAML_SCALAR, YAML_LIST, YAML_MAP };

struct yaml_node {
	enum yaml_kind kind;
	int line;                   /* 1 is the first */
	bool quoted;                /* scalar was quoted: never a number or a truth value */
	bool used;                  /* somebody asked for it */
	char *text;                 /* scalar text; for members of maps and lists see below */
	char *key;                  /* its key when it is a member of a map, else NULL */
	struct yaml_node *parent;   /* NULL at the root */
	struct yaml_node **members; /* of a map or list, in order */
	int n_members;
};

struct yaml_doc {
	char *file; /* name for errors */
	struct yaml_node *root;
};

/*
 * Given:    text, n   at most 4 MiB, one document; anchors, aliases, tags, duplicate keys and non-scalar keys are
 * refused file      name for errors Errors:   QB_FORMAT with file and line Owns:     the caller frees *out with
 * yaml_doc_free
 */
enum qb_status yaml_parse(const char *text, size_t n, const char *file, struct yaml_doc **out,
                          struct qb_error *e) QB_MUST_USE;
void yaml_doc_free(struct yaml_doc **doc);

/* "file:line: key.path[2].key", for errors; in out, always terminated. */
const char *yaml_where(const struct yaml_doc *doc, const struct yaml_node *n, char *out, size_t size);
/* Reports `seen` and `accepted` at node n: "is 'seen'; accepted: ...". Always returns status. */
enum qb_status yaml_refuse(const struct yaml_doc *doc, const struct yaml_node *n, enum qb_status status,
                           const char *accepted, struct qb_error *e);

/* The member, marked used, or NULL when it is absent (map only). */
struct yaml_node *yaml_find(struct yaml_node *map, const char *key);
/* The member, or QB_FORMAT "key is missing". */
enum qb_status yaml_need(const struct yaml_doc *doc, struct yaml_node *map, const char *key, struct yaml_node **out,
                         struct qb_error *e) QB_MUST_USE;
/* Kind checks: QB_FORMAT unless n is a map / a list. */
enum qb_status yaml_is(const struct yaml_doc *doc, const struct yaml_node *n, enum yaml_kind kind,
                       struct qb_error *e) QB_MUST_USE;

/* Scalars of a node. Ranges are inclusive; wrong type: QB_FORMAT, out of range: QB_RANGE. */
enum qb_status yaml_double(const struct yaml_doc *doc, const struct yaml_node *n, double min, double max, double *out,
                           struct qb_error *e) QB_MUST_USE;
enum qb_status yaml_int(const struct yaml_doc *doc, const struct yaml_node *n, int64_t min, int64_t max, int64_t *out,
                        struct qb_error *e) QB_MUST_USE;
enum qb_status yaml_bool(const struct yaml_doc *doc, const struct yaml_node *n, bool *out,
                         struct qb_error *e) QB_MUST_USE;
/* One line of text, at most max bytes; stays owned by the document. */
enum qb_status yaml_text(const struct yaml_doc *doc, const struct yaml_node *n, size_t max, const char **out,
                         struct qb_error *e) QB_MUST_USE;
enum qb_status yaml_name(const struct yaml_doc *doc, const struct yaml_node *n, const char **out,
                         struct qb_error *e) QB_MUST_USE; /* text_is_name */
/* A duration "1 h" -> ns; a GPS time "1488789012.0" or ISO 8601 UTC -> ns since the GPS epoch. */
enum qb_status yaml_duration(const struct yaml_doc *doc, const struct yaml_node *n, int64_t *out_ns,
                             struct qb_error *e) QB_MUST_USE;
enum qb_status yaml_time(const struct yaml_doc *doc, const struct yaml_node *n, int64_t *out_gps_ns,
                         struct qb_error *e) QB_MUST_USE;

/* QB_FORMAT "unknown key" for the first member below n that nobody asked for. Call it last. */
enum qb_status yaml_all_used(const struct yaml_doc *doc, const struct yaml_node *n, struct qb_error *e) QB_MUST_USE;

#endif
