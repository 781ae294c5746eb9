/* A driver's one-time keys in a file of fixed places; see prekeys.h. */
#include "client/agent/prekeys.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/drill/slots.h"

#define VERSION  1
#define AD_BYTES (PREKEYS_HEADER_BYTES + 8)

struct prekeys {
	int fd;
	char *path;
	uint8_t header[PREKEYS_HEADER_BYTES];
	int64_t count;
};

static void encode_header(const struct prekeys_for *what, uint8_t out[static PREKEYS_HEADER_BYTES])
{
	struct buf b = {0};
	size_t n = strlen(what->station);
	CHECK(n < sizeof what->station);
	buf_put(&b, "QBPK", 4);
	buf_u32(&b, VERSION);
	buf_u32(&b, (uint32_t)what->place);
	buf_u32(&b, 0);
	buf_put(&b, what->campaign, CAMPAIGN_ID_BYTES);
	buf_put(&b, what->station, n);
	buf_zeros(&b, sizeof what->station - n);
	buf_u64(&b, (uint64_t)what->count);
	buf_zeros(&b, PREKEYS_HEADER_BYTES - b.len);
	memcpy(out, b.data, PREKEYS_HEADER_BYTES);
	buf_free(&b);
}

static off_t point_at(int64_t slot)
{
	return (off_t)(PREKEYS_HEADER_BYTES + slot * POINT_BYTES);
}

static off_t box_at(int64_t count, int64_t slot)
{
	return (off_t)(PREKEYS_HEADER_BYTES + count * POINT_BYTES + slot * PREKEYS_BOX_BYTES);
}

static void associated(const uint8_t header[static PREKEYS_HEADER_BYTES], int64_t slot, uint8_t out[static AD_BYTES])
{
	memcpy(out, header, PREKEYS_HEADER_BYTES);
	le64_store(out + PREKEYS_HEADER_BYTES, (uint64_t)slot);
}

enum qb_status prekeys_create(const char *path, const struct prekeys_for *what, const struct party_key *me,
                              struct qb_error *e)
{
	uint8_t header[PREKEYS_HEADER_BYTES], ad[AD_BYTES];
	struct buf points = {0}, boxes = {0};
	struct party_public own;
	struct stat info;
	enum qb_status st = QB_OK;
	if (what->count < 1 || what->count > SLOTS_MAX)
		return qb_fail(e, QB_RANGE, path, NULL, "%lld slots are no campaign", (long long)what->count);
	if (lstat(path, &info) == 0 || errno != ENOENT)
		return qb_fail(e, QB_CONFLICT, path, NULL, "is there already");
	encode_header(what, header);
	party_key_public(me, &own);
	buf_put(&points, header, sizeof header);
	for (int64_t i = 0; st == QB_OK && i < what->count; i++) {
		uint8_t point[POINT_BYTES];
		struct secret *scalar = recipe_prekey_new(point);
		associated(header, i, ad);
		buf_put(&points, point, sizeof point);
		st = box_seal(own.exchange, PREKEYS_PURPOSE, ad, sizeof ad, secret_view(scalar), SCALAR_BYTES,
		              SCALAR_BYTES, &boxes, e);
		secret_free(&scalar);
	}
	if (st == QB_OK) {
		CHECK(boxes.len == (size_t)what->count * PREKEYS_BOX_BYTES);
		buf_put(&points, boxes.data, boxes.len);
		st = file_write(path, 0600, points.data, points.len, e);
	}
	buf_free(&points);
	buf_free(&boxes);
	return st;
}

static enum qb_status check_file(const struct prekeys *p, const struct prekeys_for *what, struct qb_error *e)
{
	uint8_t header[PREKEYS_HEADER_BYTES];
	struct stat info;
	if (fstat(p->fd, &info) != 0 || !S_ISREG(info.st_mode))
		return qb_fail(e, QB_FORMAT, p->path, NULL, "is no plain file");
	if ((info.st_mode & 077) != 0)
		return qb_fail(e, QB_REFUSED, p->path, "chmod 600", "can be read by others");
	if (pread(p->fd, header, sizeof header, 0) != (ssize_t)sizeof header || memcmp(header, "QBPK", 4) != 0)
		return qb_fail(e, QB_FORMAT, p->path, NULL, "is not a file of one-time keys");
	if (memcmp(header, p->header, sizeof header) != 0)
		return qb_fail(e, QB_FORMAT, p->path, "use the home directory of this station's driver",
		               "holds one-time keys of another campaign, station, place or number of slots");
	if (info.st_size != box_at(what->count, what->count))
		return qb_fail(e, QB_FORMAT, p->path, NULL, "has the wrong length");
	return QB_OK;
}

enum qb_status prekeys_open(const char *path, const struct prekeys_for *what, struct prekeys **out, struct qb_error *e)
{
	int fd = open(path, O_RDWR | O_CLOEXEC | O_NOFOLLOW);
	if (fd < 0)
		return qb_fail(e, errno == ENOENT ? QB_NOT_FOUND : QB_IO, path, NULL, "cannot open: %s",
		               strerror(errno));
	struct prekeys *p = QB_NEW(struct prekeys);
	p->fd = fd;
	p->path = qb_strdup(path);
	p->count = what->count;
	encode_header(what, p->header);
	enum qb_status st = check_file(p, what, e);
	if (st == QB_OK)
		*out = p;
	else
		prekeys_close(&p);
	return st;
}

void prekeys_close(struct prekeys **p)
{
	if (*p == NULL)
		return;
	close((*p)->fd);
	qb_free((*p)->path);
	qb_free(*p);
	*p = NULL;
}

static enum qb_status read_at(const struct prekeys *p, off_t at, uint8_t *out, size_t n, struct qb_error *e)
{
	ssize_t got = pread(p->fd, out, n, at);
	return got == (ssize_t)n
	           ? QB_OK
	           : qb_fail(e, QB_IO, p->path, NULL, "cannot read: %s", got < 0 ? strerror(errno) : "too short");
}

enum qb_status prekeys_points(const struct prekeys *p, struct buf *out, struct qb_error *e)
{
	uint8_t point[POINT_BYTES];
	enum qb_status st = QB_OK;
	for (int64_t i = 0; st == QB_OK && i < p->count; i++) {
		st = read_at(p, point_at(i), point, sizeof point, e);
		if (st == QB_OK)
			buf_put(out, point, sizeof point);
	}
	return st;
}

static enum qb_status check_scalar(const struct prekeys *p, const uint8_t *scalar, const uint8_t *point,
                                   struct qb_error *e)
{
	uint8_t own[POINT_BYTES];
	bool fits = group_mul_base(own, scalar) && memcmp(own, point, sizeof own) == 0;
	return fits ? QB_OK : qb_fail(e, QB_CRYPTO, p->path, NULL, "a one-time key does not fit its public half");
}

enum qb_status prekeys_take(const struct prekeys *p, int64_t slot, const struct party_key *me, struct secret **out,
                            struct qb_error *e)
{
	static const uint8_t erased[PREKEYS_BOX_BYTES];
	uint8_t box[PREKEYS_BOX_BYTES], point[POINT_BYTES], ad[AD_BYTES];
	struct buf scalar = {0};
	CHECK(slot >= 0 && slot < p->count);
	enum qb_status st = read_at(p, box_at(p->count, slot), box, sizeof box, e);
	if (st == QB_OK)
		st = read_at(p, point_at(slot), point, sizeof point, e);
	if (st == QB_OK && memcmp(box, erased, sizeof box) == 0)
		st =
		    qb_fail(e, QB_NOT_FOUND, p->path, NULL, "the one-time key of slot %lld is erased", (long long)slot);
	associated(p->header, slot, ad);
	if (st == QB_OK)
		st = box_open(me->exchange, PREKEYS_PURPOSE, ad, sizeof ad, box, sizeof box, &scalar, e);
	if (st == QB_OK && scalar.len != SCALAR_BYTES)
		st = qb_fail(e, QB_FORMAT, p->path, NULL, "a one-time key has the wrong length");
	if (st == QB_OK)
		st = check_scalar(p, scalar.data, point, e);
	if (st == QB_OK)
		*out = secret_from(scalar.data, SCALAR_BYTES);
	buf_wipe(&scalar);
	wipe(box, sizeof box);
	return st;
}

enum qb_status prekeys_erase(struct prekeys *p, int64_t slot, struct qb_error *e)
{
	static const uint8_t zeros[PREKEYS_BOX_BYTES];
	CHECK(slot >= 0 && slot < p->count);
	if (pwrite(p->fd, zeros, sizeof zeros, box_at(p->count, slot)) != (ssize_t)sizeof zeros || fsync(p->fd) != 0)
		return qb_fail(e, QB_IO, p->path, NULL, "cannot erase the one-time key of slot %lld: %s",
		               (long long)slot, strerror(errno));
	return QB_OK;
}
