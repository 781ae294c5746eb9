/* Byte buffers, cursors, and whole files. */
#include "server/base/buf.h"

#include <errno.h>
#include <fcntl.h>
#include <libgen.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

static void room_for(struct buf *b, size_t n)
{
	size_t need;
	CHECK(!__builtin_add_overflow(b->len, n, &need) && need < SIZE_MAX / 4);
	if (need + 1 <= b->cap)
		return;
	size_t cap = b->cap * 2 > need + 1 ? b->cap * 2 : need + 1;
	if (cap < 64)
		cap = 64;
	b->data = qb_realloc(b->data, cap, 1);
	b->cap = cap;
}

void buf_put(struct buf *b, const void *p, size_t n)
{
	room_for(b, n);
	if (n > 0)
		memcpy(b->data + b->len, p, n);
	b->len += n;
	b->data[b->len] = 0;
}

void buf_zeros(struct buf *b, size_t n)
{
	room_for(b, n);
	memset(b->data + b->len, 0, n + 1);
	b->len += n;
}

static void put_le(struct buf *b, uint64_t v, size_t n)
{
	uint8_t le[8];
	le64_store(le, v);
	buf_put(b, le, n);
}

void buf_u8(struct buf *b, uint8_t v)
{
	put_le(b, v, 1);
}

void buf_u16(struct buf *b, uint16_t v)
{
	put_le(b, v, 2);
}

void buf_u32(struct buf *b, uint32_t v)
{
	put_le(b, v, 4);
}

void buf_u64(struct buf *b, uint64_t v)
{
	put_le(b, v, 8);
}

void buf_i64(struct buf *b, int64_t v)
{
	put_le(b, (uint64_t)v, 8);
}

void buf_text(struct buf *b, const char *s)
{
	buf_put(b, s, strlen(s));
}

void buf_printf(struct buf *b, const char *fmt, ...)
{
	va_list ap;
	va_start(ap, fmt);
	int n = vsnprintf(NULL, 0, fmt, ap);
	va_end(ap);
	CHECK(n >= 0);
	room_for(b, (size_t)n);
	va_start(ap, fmt);
	(void)vsnprintf((char *)b->data + b->len, (size_t)n + 1, fmt, ap);
	va_end(ap);
	b->len += (size_t)n;
}

void buf_clear(struct buf *b)
{
	b->len = 0;
	if (b->data != NULL)
		b->data[0] = 0;
}

void buf_free(struct buf *b)
{
	qb_free(b->data);
	*b = (struct buf){0};
}

void buf_wipe(struct buf *b)
{
	if (b->data != NULL)
		explicit_bzero(b->data, b->cap);
	buf_free(b);
}

struct cursor cursor_over(const void *p, size_t n)
{
	return (struct cursor){.p = p, .left = n};
}

const uint8_t *cursor_take(struct cursor *c, size_t n)
{
	if (c->bad || n > c->left) {
		c->bad = true;
		return NULL;
	}
	const uint8_t *p = c->p;
	c->p += n;
	c->left -= n;
	return p;
}

void cursor_copy(struct cursor *c, void *out, size_t n)
{
	const uint8_t *p = cursor_take(c, n);
	if (p != NULL && n > 0)
		memcpy(out, p, n);
	else
		memset(out, 0, n);
}

static uint64_t take_le(struct cursor *c, size_t n)
{
	uint8_t le[8] = {0};
	const uint8_t *p = cursor_take(c, n);
	if (p != NULL)
		memcpy(le, p, n);
	return le64_load(le);
}

uint8_t cursor_u8(struct cursor *c)
{
	return (uint8_t)take_le(c, 1);
}

uint16_t cursor_u16(struct cursor *c)
{
	return (uint16_t)take_le(c, 2);
}

uint32_t cursor_u32(struct cursor *c)
{
	return (uint32_t)take_le(c, 4);
}

uint64_t cursor_u64(struct cursor *c)
{
	return take_le(c, 8);
}

int64_t cursor_i64(struct cursor *c)
{
	return (int64_t)take_le(c, 8);
}

uint64_t le64_load(const uint8_t p[static 8])
{
	uint64_t v = 0;
	for (int i = 7; i >= 0; i--)
		v = v << 8 | p[i];
	return v;
}

void le64_store(uint8_t p[static 8], uint64_t v)
{
	for (int i = 0; i < 8; i++, v >>= 8)
		p[i] = (uint8_t)v;
}

enum qb_status file_read(const char *path, size_t limit, struct buf *out, struct qb_error *e)
{
	int fd = open(path, O_RDONLY | O_CLOEXEC);
	if (fd < 0)
		return qb_fail(e, QB_IO, path, "check the path and its permissions", "can't be opened: %s",
		               strerror(errno));
	enum qb_status st = QB_OK;
	size_t start = out->len;
	for (;;) {
		room_for(out, 65536);
		ssize_t n = read(fd, out->data + out->len, 65536);
		if (n < 0 && errno == EINTR)
			continue;
		if (n < 0) {
			st = qb_fail(e, QB_IO, path, NULL, "can't be read: %s", strerror(errno));
			break;
		}
		out->len += (size_t)n;
		out->data[out->len] = 0;
		if (out->len - start > limit) {
			st = qb_fail(e, QB_FORMAT, path, NULL, "is larger than the %zu bytes accepted here", limit);
			break;
		}
		if (n == 0)
			break;
	}
	close(fd);
	return st;
}

bool fd_write_all(int fd, const void *bytes, size_t n)
{
	const uint8_t *p = bytes;
	while (n > 0) {
		ssize_t w = write(fd, p, n);
		if (w < 0 && errno == EINTR)
			continue;
		if (w < 0)
			return false;
		p += w;
		n -= (size_t)w;
	}
	return true;
}

/* The directory entry must be on disk too, or a crash after the rename could bring the old file back. */
static bool sync_directory(const char *path)
{
	char *copy = qb_strdup(path);
	int fd = open(dirname(copy), O_RDONLY | O_DIRECTORY | O_CLOEXEC);
	qb_free(copy);
	if (fd < 0)
		return false;
	bool good = fsync(fd) == 0;
	close(fd);
	return good;
}

enum qb_status file_write(const char *path, unsigned mode, const void *p, size_t n, struct qb_error *e)
{
	struct buf name = {0};
	buf_printf(&name, "%s.new-%ld", path, (long)getpid());
	const char *tmp = (const char *)name.data;
	(void)unlink(tmp);
	int fd = open(tmp, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, (mode_t)mode);
	bool good = fd >= 0 && fchmod(fd, (mode_t)mode) == 0 && fd_write_all(fd, p, n) && fsync(fd) == 0;
	int saved = errno;
	if (fd >= 0 && close(fd) != 0)
		good = false;
	if (good && rename(tmp, path) != 0) {
		saved = errno;
		good = false;
	}
	if (good && !sync_directory(path)) {
		saved = errno;
		good = false;
	}
	if (!good)
		(void)unlink(tmp);
	buf_free(&name);
	if (!good)
		return qb_fail(e, QB_IO, path, "check free space and permissions", "can't be written: %s",
		               strerror(saved));
	return QB_OK;
}
