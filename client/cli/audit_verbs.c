/* The noun `audit`: computes the audit of an open set and writes its document. */
#include <string.h>

#include "client/cli/audit_source.h"
#include "client/cli/bundle_verify.h"
#include "client/cli/cli.h"
#include "client/report/report.h"
#include "server/audit/audit.h"
#include "server/base/alloc.h"
#include "server/base/buf.h"

#define PRETTY_UP_TO ((size_t)16 << 20) /* larger documents are for programs: written without indents */

static enum qb_status write_document(struct cli_call *c, const char *path, const json_t *doc)
{
	char *text = json_pretty(doc);
	if (strlen(text) > PRETTY_UP_TO) {
		qb_free(text);
		text = json_text(doc);
	}
	const enum qb_status st = file_write(path, 0644, text, strlen(text), cli_error(c));
	qb_free(text);
	return st;
}

/* With --out the document goes to the file and the terminal shows the report; else the document is the output. */
static enum qb_status show(struct cli_call *c, const json_t *doc, const char *out)
{
	struct buf text = {0};
	enum qb_status st = QB_OK;
	if (out != NULL)
		st = write_document(c, out, doc);
	if (st != QB_OK)
		return st;
	if (out == NULL || cli_wants_json(c)) {
		cli_json(c, doc);
		return QB_OK;
	}
	st = report_text(doc, &text, cli_error(c));
	if (st == QB_OK) {
		cli_print(c, "%s", (const char *)text.data);
		cli_note(c, "audit written to %s\n", out);
	}
	buf_free(&text);
	return st;
}

static enum qb_status run(struct cli_call *c)
{
	struct audit_input *in = NULL;
	json_t *doc = NULL;
	const char *set = cli_option(c, "set"), *bundle = cli_option(c, "bundle");
	if ((set != NULL) == (bundle != NULL))
		return qb_fail(cli_error(c), QB_USAGE, NULL, NULL, "give --bundle FILE or --set DIR");
	enum qb_status st =
	    set != NULL ? audit_source_folder(set, &in, cli_error(c)) : audit_source_bundle(bundle, &in, cli_error(c));
	if (st == QB_OK)
		st = audit_run(in, &doc, cli_error(c));
	if (st == QB_OK)
		st = show(c, doc, cli_option(c, "out"));
	json_decref(doc);
	audit_input_free(&in);
	return st;
}

static const struct cli_option run_options[] = {
    {"bundle", "FILE", false, "a bundle: verified first, then audited"},
    {"set", "DIR", false, "an audit folder: settings.json, slots.jsonl, claims.jsonl"},
    {"out", "FILE", false, "write the audit document here and print the report"},
    {NULL, NULL, false, NULL},
};

const struct cli_verb cli_audit_verbs[] = {
    {"audit", "run", "", run, run_options, "Match claims to drills and compute what was found, missed and unexplained.",
     "quietbell audit run --bundle campaign.bundle --out audit.json"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL},
};
