/* The noun `report`: an audit document as a page, a text and tables. */
#include <errno.h>
#include <string.h>
#include <sys/stat.h>

#include "client/cli/cli.h"
#include "client/report/report.h"
#include "server/base/alloc.h"
#include "server/base/buf.h"
#include "server/base/text.h"

#define AUDIT_MAX_BYTES ((size_t)64 << 20)

static enum qb_status read_audit(struct cli_call *c, const char *path, json_t **doc)
{
	struct buf b = {0};
	enum qb_status st = file_read(path, AUDIT_MAX_BYTES, &b, cli_error(c));
	if (st == QB_OK)
		st = json_read(b.data != NULL ? (const char *)b.data : "", b.len, path, doc, cli_error(c));
	buf_free(&b);
	return st;
}

static enum qb_status write_one(struct cli_call *c, const char *dir, const char *name, const struct buf *b,
                                json_t *files)
{
	char *path = text_printf("%s/%s", dir, name);
	const enum qb_status st = file_write(path, 0644, b->data, b->len, cli_error(c));
	json_array_append_new(files, json_string(path));
	qb_free(path);
	return st;
}

static enum qb_status write_all(struct cli_call *c, const json_t *doc, const char *dir, json_t *files)
{
	struct buf b = {0};
	enum qb_status st = QB_OK;
	if (mkdir(dir, 0755) != 0 && errno != EEXIST)
		return qb_fail(cli_error(c), QB_IO, dir, NULL, "can't be created: %s", strerror(errno));
	st = report_html(doc, &b, cli_error(c));
	if (st == QB_OK)
		st = write_one(c, dir, "index.html", &b, files);
	buf_clear(&b);
	if (st == QB_OK)
		st = report_text(doc, &b, cli_error(c));
	if (st == QB_OK)
		st = write_one(c, dir, "summary.txt", &b, files);
	for (size_t i = 0; st == QB_OK && i < report_csv_count(); i++) {
		buf_clear(&b);
		st = report_csv(doc, i, &b, cli_error(c));
		if (st == QB_OK)
			st = write_one(c, dir, report_csv_name(i), &b, files);
	}
	buf_free(&b);
	return st;
}

static enum qb_status report(struct cli_call *c)
{
	json_t *doc = NULL, *files = json_array();
	struct buf text = {0};
	const char *dir = cli_option(c, "out");
	enum qb_status st = read_audit(c, cli_arg(c, 0), &doc);
	if (st == QB_OK)
		st = write_all(c, doc, dir, files);
	if (st == QB_OK)
		st = report_text(doc, &text, cli_error(c));
	if (st == QB_OK && cli_wants_json(c)) {
		json_t *answer = json_object();
		json_object_set(answer, "files", files);
		cli_json(c, answer);
		json_decref(answer);
	} else if (st == QB_OK) {
		cli_print(c, "%s", (const char *)text.data);
		cli_note(c, "report written to %s/index.html\n", dir);
	}
	buf_free(&text);
	json_decref(doc);
	json_decref(files);
	return st;
}

static const struct cli_option report_options[] = {
    {"out", "DIR", true, "folder for index.html, summary.txt and the tables; made if missing"},
    {NULL, NULL, false, NULL},
};

const struct cli_verb cli_report_verbs[] = {
    {"report", "", "AUDIT.json", report, report_options,
     "Write an audit as a self-contained page, a text and CSV tables.", "quietbell report audit.json --out report"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL},
};
