/* A plan file together with the files that it names, as a draft sends them. */
#ifndef QB_CLIENT_CLI_PLAN_FILE_H
#define QB_CLIENT_CLI_PLAN_FILE_H

#include "server/base/json.h"
#include "server/drill/plan.h"

struct plan_file {
	char *text;              /* owned; the plan's exact bytes */
	char *dir;               /* owned; where it lies */
	json_t *files;           /* owned; {name: text} of every file it names */
	struct drill_plan *plan; /* owned */
};
/* Errors: QB_IO, QB_FORMAT, QB_RANGE */
enum qb_status plan_file_read(const char *path, struct plan_file *out, struct qb_error *e) QB_MUST_USE;
void plan_file_free(struct plan_file *p);

#endif
