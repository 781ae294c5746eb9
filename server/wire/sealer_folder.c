/* Messages as files: type u32, then the body. */
#include "server/wire/sealer_folder.h"

#include <inttypes.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

static char *path_of(const char *folder, const char *side, uint64_t number)
{
	return text_printf("%s/%s-%08" PRIu64 ".qbs", folder, side, number);
}

enum qb_status sealer_folder_put(const char *folder, const char *side, uint64_t number, enum sealer_message type,
                                 const struct buf *body, struct qb_error *e)
{
	char *path = path_of(folder, side, number);
	struct buf b = {0};
	buf_u32(&b, (uint32_t)type);
	buf_put(&b, body->data, body->len);
	enum qb_status st = file_write(path, 0600, b.data, b.len, e);
	buf_free(&b);
	qb_free(path);
	return st;
}

enum qb_status sealer_folder_get(const char *folder, const char *side, uint64_t number, enum sealer_message *type,
                                 struct buf *body, struct qb_error *e)
{
	char *path = path_of(folder, side, number);
	struct buf b = {0};
	enum qb_status st = access(path, F_OK) == 0 ? file_read(path, SEALER_MESSAGE_MAX + 4, &b, e) : QB_NOT_FOUND;
	if (st == QB_OK && b.len < 4)
		st = qb_fail(e, QB_FORMAT, path, "carry it over again", "is no message of a sealer");
	if (st == QB_OK) {
		struct cursor c = cursor_over(b.data, b.len);
		*type = (enum sealer_message)cursor_u32(&c);
		buf_clear(body);
		buf_put(body, c.p, c.left);
	}
	buf_free(&b);
	qb_free(path);
	return st;
}
