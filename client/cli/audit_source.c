/* Reads an audit folder's files into the audit's input. */
#include "client/cli/audit_source.h"

#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/buf.h"
#include "server/base/text.h"

#define SETTINGS_MAX ((size_t)64 << 20)
#define LINES_MAX    ((size_t)1 << 30)

typedef enum qb_status taker(struct audit_input *, const char *text, size_t n, const char *what, struct qb_error *);

static enum qb_status take_file(const char *dir, const char *name, size_t limit, taker *take, struct audit_input *in,
                                struct qb_error *e)
{
	struct buf b = {0};
	char *path = text_printf("%s/%s", dir, name);
	enum qb_status st = file_read(path, limit, &b, e);
	if (st == QB_OK)
		st = take(in, b.data != NULL ? (const char *)b.data : "", b.len, path, e);
	qb_free(path);
	buf_free(&b);
	return st;
}

enum qb_status audit_source_folder(const char *dir, struct audit_input **out, struct qb_error *e)
{
	struct audit_input *in = audit_input_new();
	enum qb_status st = take_file(dir, "settings.json", SETTINGS_MAX, audit_input_settings_text, in, e);
	if (st == QB_OK)
		st = take_file(dir, "slots.jsonl", LINES_MAX, audit_input_slots_text, in, e);
	if (st == QB_OK)
		st = take_file(dir, "claims.jsonl", LINES_MAX, audit_input_claims_text, in, e);
	/* The course of a campaign is there when the folder comes from a bundle. */
	char *course = text_printf("%s/course.json", dir);
	if (st == QB_OK && access(course, F_OK) == 0)
		st = take_file(dir, "course.json", SETTINGS_MAX, audit_input_course_text, in, e);
	qb_free(course);
	if (st != QB_OK)
		audit_input_free(&in);
	*out = in;
	return st;
}
