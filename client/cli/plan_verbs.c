/* The noun `plan`: checking a plan file, with every broken rule at once. Also reads plans with their files for drafts.
 */
#include "client/cli/plan_file.h"

#include <libgen.h>
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define PLAN_FILE_MAX ((size_t)4 << 20)

static enum qb_status fetch(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	struct plan_file *p = state;
	/* Files lie beside the plan; a path out of its directory would not be found again in the ledger. */
	if (strchr(name, '/') != NULL || name[0] == '.')
		return qb_fail(e, QB_FORMAT, name, "put the file beside the plan and give its bare name",
		               "is not a plain file name");
	char *path = text_printf("%s/%s", p->dir, name);
	size_t before = out->len;
	enum qb_status st = file_read(path, PLAN_FILE_MAX, out, e);
	if (st == QB_OK) {
		char *text = qb_memdup(out->data + before, out->len - before);
		if (strlen(text) != out->len - before || !text_is_utf8(text, strlen(text)))
			st = qb_fail(e, QB_FORMAT, path, NULL, "is not plain text");
		else
			json_object_set_new(p->files, name, json_string(text));
		qb_free(text);
	}
	qb_free(path);
	return st;
}

enum qb_status plan_file_read(const char *path, struct plan_file *out, struct qb_error *e)
{
	struct buf b = {0};
	char *copy = qb_strdup(path);
	*out = (struct plan_file){.files = json_object()};
	out->dir = qb_strdup(dirname(copy));
	qb_free(copy);
	enum qb_status st = file_read(path, PLAN_FILE_MAX, &b, e);
	if (st == QB_OK) {
		out->text = qb_memdup(b.data != NULL ? (const char *)b.data : "", b.len);
		st = plan_parse(out->text, strlen(out->text), path, fetch, out, &out->plan, e);
	}
	buf_free(&b);
	if (st != QB_OK)
		plan_file_free(out);
	return st;
}

void plan_file_free(struct plan_file *p)
{
	plan_free(&p->plan);
	qb_free(p->text);
	qb_free(p->dir);
	json_decref(p->files);
	*p = (struct plan_file){0};
}

static json_t *finding_json(const struct plan_finding *f)
{
	json_t *j = json_object();
	json_object_set_new(j, "severity", json_string(f->severity == PLAN_REFUSAL ? "refusal" : "warning"));
	json_object_set_new(j, "rule", json_string(f->rule));
	json_object_set_new(j, "where", json_string(f->where));
	json_object_set_new(j, "what", json_string(f->what));
	json_object_set_new(j, "mend", json_string(f->mend));
	return j;
}

static void print_summary(struct cli_call *c, const struct drill_plan *p)
{
	char from[40], to[40];
	cli_print(c, "plan '%s' (%s) may be drafted\n", p->campaign, plan_phase_word(p->phase));
	cli_print(c, "  %lld slots of %g s, %s to %s\n", (long long)slots_count(&p->slots),
	          (double)p->slots.slot_ns / 1e9, clock_utc_text(p->slots.start_gps_ns, from, sizeof from),
	          clock_utc_text(p->slots.end_gps_ns, to, sizeof to));
	cli_print(c, "  mean live drills %g, chance of none %.3g; %d of %d custodians open\n", p->expected_live,
	          plan_chance_of_none(p), p->custodians_needed, p->custodians);
}

static enum qb_status run_check(struct cli_call *c)
{
	struct plan_file p;
	struct plan_findings f = {0};
	char line[900];
	enum qb_status st = plan_file_read(cli_arg(c, 0), &p, &c->error);
	if (st != QB_OK)
		return st;
	/* The list says it all; the error record is for the files that can't be read. */
	st = plan_check(p.plan, &f, NULL);
	if (cli_wants_json(c)) {
		json_t *doc = json_object(), *list = json_array();
		for (int i = 0; i < f.n; i++)
			json_array_append_new(list, finding_json(&f.finding[i]));
		json_object_set_new(doc, "accepted", json_boolean(st == QB_OK));
		json_object_set_new(doc, "findings", list);
		cli_json(c, doc);
		json_decref(doc);
	} else {
		for (int i = 0; i < f.n; i++)
			cli_note(c, "%s\n", plan_finding_line(&f.finding[i], line, sizeof line));
		if (st == QB_OK)
			print_summary(c, p.plan);
	}
	plan_findings_free(&f);
	plan_file_free(&p);
	return st;
}

const struct cli_verb cli_plan_verbs[] = {{"plan", "check", "PLAN", run_check, NULL,
                                           "checks a plan file and lists every broken rule",
                                           "quietbell plan check deploy/demo/plan.yaml"},
                                          {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
