/* Inside plan_check: how a rule reports what it found. Not for other rooms. */
#ifndef QB_DRILL_PLAN_CHECK_H
#define QB_DRILL_PLAN_CHECK_H

#include "server/drill/plan.h"

struct plan_checker {
	const struct drill_plan *plan;
	struct plan_findings *out;
};

/* The node at a path of map keys below `from` (NULL: the root), ended by NULL; the deepest one that exists. */
const struct yaml_node *check_node(const struct plan_checker *c, struct yaml_node *from, ...) __attribute__((sentinel));
/* Node of family i. */
struct yaml_node *check_family_node(const struct plan_checker *c, int i);
void check_add(struct plan_checker *c, enum plan_severity severity, const char *rule, const struct yaml_node *at,
               const char *mend, const char *fmt, ...) QB_PRINTF(6, 7);

enum qb_status plan_check_families(struct plan_checker *c, struct qb_error *e) QB_MUST_USE;

#endif
