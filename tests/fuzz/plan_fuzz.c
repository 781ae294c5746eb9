/* Fuzz target: any bytes as a plan file, and if they parse, the rules. The network stays the demo's. */
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include "server/drill/plan.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static enum qb_status fetch(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	(void)state;
	if (strcmp(name, "network.yaml") != 0)
		return qb_fail(e, QB_NOT_FOUND, name, NULL, "is not there");
	return file_read("deploy/demo/network.yaml", 1 << 20, out, e);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct drill_plan *plan = NULL;
	struct plan_findings f = {0};
	struct qb_error e = {0};
	if (plan_parse((const char *)data, size, "fuzz.yaml", fetch, NULL, &plan, &e) == QB_OK) {
		if (plan_check(plan, &f, &e) != QB_OK && e.what[0] == '\0')
			__builtin_trap();
		plan_findings_free(&f);
	} else if (e.what[0] == '\0') {
		__builtin_trap(); /* every refusal has its words */
	}
	plan_free(&plan);
	return 0;
}
