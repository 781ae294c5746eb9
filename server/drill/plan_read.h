/*
 * Inside the plan reader: getters over base/yaml that do nothing once an error was reported, so that a section of the
 * plan reads as a list of its keys. Not for other rooms.
 */
#ifndef QB_DRILL_PLAN_READ_H
#define QB_DRILL_PLAN_READ_H

#include "server/drill/plan.h"

struct plan_reader {
	const struct yaml_doc *doc;
	struct qb_error *e;
	enum qb_status status; /* QB_OK until the first error */
};

/* The member; NULL when it is absent or something failed before. */
struct yaml_node *read_find(struct plan_reader *r, struct yaml_node *map, const char *key);
/* The member that must be there, of this kind; NULL after an error. */
struct yaml_node *read_need(struct plan_reader *r, struct yaml_node *map, const char *key, enum yaml_kind kind);
/* An optional map or list; a wrong kind is an error. */
struct yaml_node *read_optional(struct plan_reader *r, struct yaml_node *map, const char *key, enum yaml_kind kind);

/* Scalars. The target keeps its value (the default) when the key is absent; read_*_needed refuse that. */
void read_double(struct plan_reader *r, struct yaml_node *map, const char *key, double min, double max, double *out);
void read_double_needed(struct plan_reader *r, struct yaml_node *map, const char *key, double min, double max,
                        double *out);
void read_int(struct plan_reader *r, struct yaml_node *map, const char *key, int min, int max, int *out);
void read_int_needed(struct plan_reader *r, struct yaml_node *map, const char *key, int min, int max, int *out);
void read_bool(struct plan_reader *r, struct yaml_node *map, const char *key, bool *out);
void read_duration(struct plan_reader *r, struct yaml_node *map, const char *key, double min_s, double max_s,
                   int64_t *out_ns);
void read_name_needed(struct plan_reader *r, struct yaml_node *map, const char *key, char out[PLAN_NAME_MAX]);
/* One word of a NULL-ended list; returns its position, or fallback when the key is absent. */
int read_word(struct plan_reader *r, struct yaml_node *map, const char *key, const char *const *words, int fallback);

/* Scalars of a node in hand. */
void read_name_of(struct plan_reader *r, const struct yaml_node *n, char out[PLAN_NAME_MAX]);
void read_key_of(struct plan_reader *r, const struct yaml_node *n, char out[PLAN_NAME_MAX]); /* a_z_0_9 words */
void read_double_of(struct plan_reader *r, const struct yaml_node *n, double min, double max, double *out);
/* Lists; replaced only when the key is there. */
void read_names(struct plan_reader *r, struct yaml_node *map, const char *key, struct plan_names *out);
void read_keys(struct plan_reader *r, struct yaml_node *map, const char *key, struct plan_names *out);
void read_numbers(struct plan_reader *r, struct yaml_node *map, const char *key, double min, double max,
                  struct plan_numbers *out);
/* Refuses n with what is accepted (once). */
void read_refuse(struct plan_reader *r, const struct yaml_node *n, enum qb_status status, const char *accepted);

/* Sections in files of their own. */
void plan_read_families(struct plan_reader *r, struct yaml_node *drills, struct drill_plan *plan);
void plan_read_audit(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan);

#endif
