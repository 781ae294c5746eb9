/* A consistent copy of a store, while the service that owns it works, and back. */
#include <fcntl.h>
#include <string.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/store/internal.h"

enum qb_status store_copy(const char *from, const char *to, struct qb_error *e)
{
	struct store *s = NULL;
	if (access(to, F_OK) == 0)
		return qb_fail(e, QB_CONFLICT, to, "choose another name", "is there already");
	enum qb_status st = store_open(from, false, &s, e);
	if (st == QB_OK)
		st = file_write(to, 0600, "", 0, e); /* VACUUM INTO takes an empty file, and keeps its mode */
	if (st == QB_OK) {
		struct query q = q_begin(s, "VACUUM INTO ?", e);
		q_text(&q, to);
		st = q_done(&q);
		int fd = st == QB_OK ? open(to, O_RDONLY | O_CLOEXEC) : -1;
		if (st == QB_OK && (fd < 0 || fsync(fd) != 0))
			st = qb_fail(e, QB_IO, to, "check free space", "can't be written through to the disk");
		if (fd >= 0)
			(void)close(fd);
		if (st != QB_OK)
			(void)unlink(to);
	}
	store_close(&s);
	return st;
}
