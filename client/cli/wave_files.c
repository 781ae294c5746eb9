/* Reading network and source files from disk. */
#include "client/cli/wave_files.h"

#include <libgen.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

#define FILE_MAX ((size_t)4 << 20)

enum qb_status text_file_read(const char *path, struct buf *out, struct qb_error *e)
{
	enum qb_status st = file_read(path, FILE_MAX, out, e);
	if (st == QB_OK && out->data == NULL)
		st = qb_fail(e, QB_FORMAT, path, NULL, "the file is empty");
	if (st == QB_OK && strlen((const char *)out->data) != out->len)
		st = qb_fail(e, QB_FORMAT, path, NULL, "is not plain text");
	return st;
}

static enum qb_status fetch(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	const char *dir = state;
	if (strchr(name, '/') != NULL || name[0] == '.')
		return qb_fail(e, QB_FORMAT, name, "put the file beside the network file and give its bare name",
		               "is not a plain file name");
	char *path = text_printf("%s/%s", dir, name);
	enum qb_status st = text_file_read(path, out, e);
	qb_free(path);
	return st;
}

enum qb_status network_file_read(const char *path, struct wave_network **out, struct qb_error *e)
{
	struct buf b = {0};
	char *copy = qb_strdup(path);
	*out = NULL;
	enum qb_status st = text_file_read(path, &b, e);
	if (st == QB_OK)
		st = network_parse((const char *)b.data, b.len, path, fetch, dirname(copy), out, e);
	buf_free(&b);
	qb_free(copy);
	return st;
}

enum qb_status source_file_read(const char *path, struct wave_source *out, struct qb_error *e)
{
	struct buf b = {0};
	enum qb_status st = text_file_read(path, &b, e);
	if (st == QB_OK)
		st = source_parse((const char *)b.data, b.len, path, out, e);
	buf_free(&b);
	return st;
}
