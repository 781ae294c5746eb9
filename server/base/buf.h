/*
 * A growing byte buffer for writers and a bounded cursor for readers. Every binary format of the project goes through
 * these two, so that no parser does pointer arithmetic of its own. All integers are little-endian.
 */
#ifndef QB_BASE_BUF_H
#define QB_BASE_BUF_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/err.h"

struct buf {
	uint8_t *data; /* owned; NULL while empty; a zero byte always follows the content */
	size_t len, cap;
};

void buf_put(struct buf *b, const void *p, size_t n);
void buf_zeros(struct buf *b, size_t n);
void buf_u8(struct buf *b, uint8_t v);
void buf_u16(struct buf *b, uint16_t v);
void buf_u32(struct buf *b, uint32_t v);
void buf_u64(struct buf *b, uint64_t v);
void buf_i64(struct buf *b, int64_t v);
void buf_text(struct buf *b, const char *s); /* without its end */
void buf_printf(struct buf *b, const char *fmt, ...) QB_PRINTF(2, 3);
void buf_clear(struct buf *b); /* length 0, memory kept */
void buf_free(struct buf *b);  /* memory given back, all fields zero */
void buf_wipe(struct buf *b);  /* content overwritten, then freed */

/* Reads front to back; after the first short read `bad` stays true and every read gives zeros. */
struct cursor {
	const uint8_t *p;
	size_t left;
	bool bad;
};

struct cursor cursor_over(const void *p, size_t n);
/* The next n bytes, or NULL (and bad) when fewer are left. Points into the caller's memory. */
const uint8_t *cursor_take(struct cursor *c, size_t n);
void cursor_copy(struct cursor *c, void *out, size_t n);
uint8_t cursor_u8(struct cursor *c);
uint16_t cursor_u16(struct cursor *c);
uint32_t cursor_u32(struct cursor *c);
uint64_t cursor_u64(struct cursor *c);
int64_t cursor_i64(struct cursor *c);

uint64_t le64_load(const uint8_t p[static 8]);
void le64_store(uint8_t p[static 8], uint64_t v);

/* All n bytes, across interruptions; false with errno set. */
bool fd_write_all(int fd, const void *bytes, size_t n) QB_MUST_USE;
/*
 * Whole-file reading and atomic writing (create, write, fsync, rename, fsync of the directory).
 *
 * Given:    path, mode (0600 for anything private), limit (largest size accepted, bytes)
 * Errors:   QB_IO; QB_FORMAT when the file is larger than limit
 */
enum qb_status file_read(const char *path, size_t limit, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status file_write(const char *path, unsigned mode, const void *p, size_t n, struct qb_error *e) QB_MUST_USE;

#endif
