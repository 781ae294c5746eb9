/* Loads the demo plans, whole or with one passage changed, for the drill room's tests. */
#ifndef QB_TESTS_DRILL_DEMO_H
#define QB_TESTS_DRILL_DEMO_H

#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/drill/draw.h"
#include "tests/near.h"

#define DEMO_PLAN  "plan.yaml"
#define SHORT_PLAN "short-plan.yaml"

static inline enum qb_status demo_fetch(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	char path[300];
	(void)state;
	(void)snprintf(path, sizeof path, "deploy/demo/%s", name);
	return file_read(path, 1 << 20, out, e);
}

/* The plan file with the first `from` replaced by `to` (NULL: as it is). */
static inline enum qb_status demo_parse(const char *name, const char *from, const char *to, struct drill_plan **plan,
                                        struct qb_error *e)
{
	struct buf b = {0};
	assert_int_equal(demo_fetch(NULL, name, &b, e), QB_OK);
	char *text = (char *)b.data, *at = from != NULL ? strstr(text, from) : NULL;
	if (from != NULL && at == NULL)
		fail_msg("%s does not hold '%s'", name, from);
	char *changed =
	    at == NULL ? qb_strdup(text) : text_printf("%.*s%s%s", (int)(at - text), text, to, at + strlen(from));
	enum qb_status st = plan_parse(changed, strlen(changed), name, demo_fetch, NULL, plan, e);
	qb_free(changed);
	buf_free(&b);
	return st;
}

static inline struct drill_plan *demo_plan(const char *name)
{
	struct drill_plan *plan = NULL;
	struct qb_error e = {0};
	char line[900];
	if (demo_parse(name, NULL, NULL, &plan, &e) != QB_OK)
		fail_msg("%s", qb_error_line(&e, line, sizeof line));
	return plan;
}

/* Deterministic variates: a hash of slot and number stands for the sealed seed. */
struct demo_seed {
	uint64_t slot, calls, largest;
};
static inline double demo_uniform(void *state, uint64_t m)
{
	struct demo_seed *s = state;
	s->calls++;
	s->largest = m > s->largest ? m : s->largest;
	return uniform_from_u64(splitmix64(splitmix64(s->slot * 1000003 + 17) ^ m));
}

static inline void demo_draw(const struct drill_plan *plan, bool empty, int64_t slot, struct drill_truth *t)
{
	struct demo_seed seed = {(uint64_t)slot, 0, 0};
	struct draw_uniforms u = {demo_uniform, &seed};
	struct qb_error e = {0};
	char line[900];
	if (draw_slot(plan, empty, slot, &u, t, &e) != QB_OK)
		fail_msg("slot %d: %s", (int)slot, qb_error_line(&e, line, sizeof line));
}

#endif
