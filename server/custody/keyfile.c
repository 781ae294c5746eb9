/* Passphrase-protected files. Damage, a wrong passphrase and tampering are told apart, in this order. */
#include "server/custody/keyfile.h"

#include <errno.h>
#include <fcntl.h>
#include <sodium.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/custody/aead.h"

static const uint8_t magic[4] = {'Q', 'B', 'K', '1'};

#define FILE_VERSION     1
#define SALT_BYTES       16
#define NONCE_BYTES      24
#define COMMITMENT_BYTES 32
#define CHECK_BYTES      16
#define OVERHEAD         (KEYFILE_HEADER_BYTES + AEAD_TAG_BYTES + CHECK_BYTES)

_Static_assert(crypto_pwhash_argon2id_SALTBYTES == SALT_BYTES, "salt size");
_Static_assert(KEYFILE_HEADER_BYTES == 8 + SALT_BYTES + NONCE_BYTES + COMMITMENT_BYTES + 4, "header layout");

static const struct {
	unsigned long long passes;
	size_t memory_bytes;
} levels[] = {
    [KEYFILE_INTERACTIVE] = {2, (size_t)64 << 20},
    [KEYFILE_MODERATE] = {3, (size_t)256 << 20},
    [KEYFILE_SENSITIVE] = {4, (size_t)1024 << 20},
};

static bool level_ok(unsigned level)
{
	return level >= KEYFILE_INTERACTIVE && level <= KEYFILE_SENSITIVE;
}

static void check_sum(const uint8_t *p, size_t n, uint8_t out[static CHECK_BYTES])
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/keyfile/check");
	transcript_field(&t, p, n);
	transcript_end(&t, h);
	memcpy(out, h, CHECK_BYTES);
}

enum qb_status keyfile_inspect(const uint8_t *p, size_t n, struct keyfile_info *out, struct qb_error *e)
{
	uint8_t sum[CHECK_BYTES];
	struct cursor c = cursor_over(p, n);
	*out = (struct keyfile_info){0};
	const uint8_t *m = cursor_take(&c, sizeof magic);
	uint16_t version = cursor_u16(&c);
	uint8_t type = cursor_u8(&c), level = cursor_u8(&c);
	cursor_take(&c, SALT_BYTES + NONCE_BYTES + COMMITMENT_BYTES);
	uint32_t length = cursor_u32(&c);
	if (c.bad || memcmp(m, magic, sizeof magic) != 0 || version != FILE_VERSION)
		return qb_fail(e, QB_FORMAT, "key file", NULL, "it is not a key file of version %d", FILE_VERSION);
	if (length == 0 || length > KEYFILE_PAYLOAD_MAX || c.left != (size_t)length + AEAD_TAG_BYTES + CHECK_BYTES)
		return qb_fail(e, QB_FORMAT, "key file", "restore it from its backup",
		               "it is truncated, or bytes follow it");
	check_sum(p, n - CHECK_BYTES, sum);
	if (memcmp(sum, p + n - CHECK_BYTES, CHECK_BYTES) != 0)
		return qb_fail(e, QB_FORMAT, "key file", "restore it from its backup",
		               "it is damaged: its check sum is wrong");
	if (!level_ok(level))
		return qb_fail(e, QB_FORMAT, "key file", NULL, "unknown protection level %u", level);
	*out = (struct keyfile_info){type, (enum keyfile_level)level, level == KEYFILE_INTERACTIVE, length};
	return QB_OK;
}

/* 64 bytes: encryption key 32, commitment key 32. */
static enum qb_status derive(enum keyfile_level level, const char *passphrase, const uint8_t salt[static SALT_BYTES],
                             struct secret **out, struct qb_error *e)
{
	size_t n = strlen(passphrase);
	*out = NULL;
	if (n == 0 || n > KEYFILE_PASSPHRASE_MAX)
		return qb_fail(e, QB_RANGE, "passphrase", NULL, "it must have 1 to %d bytes", KEYFILE_PASSPHRASE_MAX);
	struct secret *key = secret_new(64);
	if (crypto_pwhash(secret_bytes(key), 64, passphrase, n, salt, levels[level].passes, levels[level].memory_bytes,
	                  crypto_pwhash_ALG_ARGON2ID13) != 0) {
		secret_free(&key);
		return qb_fail(e, QB_IO, "key file", "free some memory and try again",
		               "Argon2id needs %zu MiB of memory", levels[level].memory_bytes >> 20);
	}
	*out = key;
	return QB_OK;
}

/* Binds the derived key and everything in the header before the commitment. */
static void commit(const struct secret *key, const uint8_t *header, uint8_t out[static COMMITMENT_BYTES])
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/keyfile/commitment");
	transcript_field(&t, secret_view(key) + 32, 32);
	transcript_field(&t, header, 8 + SALT_BYTES + NONCE_BYTES);
	transcript_end(&t, h);
	memcpy(out, h, COMMITMENT_BYTES);
	wipe(h, sizeof h);
}

enum qb_status keyfile_encrypt(uint8_t type, enum keyfile_level level, const char *passphrase,
                               const struct secret *payload, struct buf *out, struct qb_error *e)
{
	struct buf file = {0};
	struct secret *key;
	uint8_t fresh[SALT_BYTES + NONCE_BYTES], mark[COMMITMENT_BYTES], sum[CHECK_BYTES];
	size_t n = secret_size(payload);
	if (n == 0 || n > KEYFILE_PAYLOAD_MAX || !level_ok(level))
		return qb_fail(e, QB_RANGE, "key file", NULL, "the payload is empty or too long, or the level unknown");
	random_bytes(fresh, sizeof fresh);
	enum qb_status s = derive(level, passphrase, fresh, &key, e);
	if (s != QB_OK)
		return s;
	buf_put(&file, magic, sizeof magic);
	buf_u16(&file, FILE_VERSION);
	buf_u8(&file, type);
	buf_u8(&file, (uint8_t)level);
	buf_put(&file, fresh, sizeof fresh);
	commit(key, file.data, mark);
	buf_put(&file, mark, sizeof mark);
	buf_u32(&file, (uint32_t)n);
	buf_zeros(&file, n + AEAD_TAG_BYTES);
	CHECK(crypto_aead_xchacha20poly1305_ietf_encrypt(file.data + KEYFILE_HEADER_BYTES, NULL, secret_view(payload),
	                                                 n, file.data, KEYFILE_HEADER_BYTES, NULL, fresh + SALT_BYTES,
	                                                 secret_view(key)) == 0);
	check_sum(file.data, file.len, sum);
	buf_put(&file, sum, sizeof sum);
	buf_put(out, file.data, file.len);
	buf_free(&file);
	secret_free(&key);
	return QB_OK;
}

enum qb_status keyfile_decrypt(const uint8_t *p, size_t n, uint8_t type, const char *passphrase, bool rehearsal,
                               struct secret **payload, struct qb_error *e)
{
	struct keyfile_info info;
	struct secret *key;
	uint8_t mark[COMMITMENT_BYTES];
	*payload = NULL;
	enum qb_status s = keyfile_inspect(p, n, &info, e);
	if (s != QB_OK)
		return s;
	if (info.type != type)
		return qb_fail(e, QB_FORMAT, "key file", NULL, "it holds something else (type %u, wanted %u)",
		               info.type, type);
	if (info.rehearsal_only && !rehearsal)
		return qb_fail(e, QB_REFUSED, "key file", "make keys without the rehearsal setting",
		               "it is marked rehearsal only: its passphrase protection is too weak");
	const uint8_t *salt = p + 8, *nonce = salt + SALT_BYTES, *commitment = nonce + NONCE_BYTES;
	s = derive(info.level, passphrase, salt, &key, e);
	if (s != QB_OK)
		return s;
	struct secret *plain = secret_new(info.payload_bytes);
	commit(key, p, mark);
	if (!same_bytes(mark, commitment, sizeof mark))
		s = qb_fail(e, QB_CRYPTO, "key file", NULL, "wrong passphrase");
	else if (crypto_aead_xchacha20poly1305_ietf_decrypt(secret_bytes(plain), NULL, NULL, p + KEYFILE_HEADER_BYTES,
	                                                    info.payload_bytes + AEAD_TAG_BYTES, p,
	                                                    KEYFILE_HEADER_BYTES, nonce, secret_view(key)) != 0)
		s = qb_fail(e, QB_CRYPTO, "key file", "restore it from its backup",
		            "the passphrase is right but the content was altered");
	secret_free(&key);
	if (s == QB_OK)
		*payload = plain;
	else
		secret_free(&plain);
	return s;
}

enum qb_status keyfile_write(const char *path, uint8_t type, enum keyfile_level level, const char *passphrase,
                             const struct secret *payload, struct qb_error *e)
{
	struct buf file = {0};
	enum qb_status s = keyfile_encrypt(type, level, passphrase, payload, &file, e);
	if (s == QB_OK)
		s = file_write(path, 0600, file.data, file.len, e);
	buf_free(&file);
	return s;
}

/* Opens without following a link, and judges the very file that is then read. */
static enum qb_status read_private(const char *path, struct buf *out, struct qb_error *e)
{
	struct stat st;
	enum qb_status s = QB_OK;
	int fd = open(path, O_RDONLY | O_CLOEXEC | O_NOFOLLOW | O_NONBLOCK);
	if (fd < 0)
		return qb_fail(e, errno == ELOOP ? QB_REFUSED : QB_IO, path, NULL, "can't be opened: %s",
		               strerror(errno));
	if (fstat(fd, &st) != 0)
		s = qb_fail(e, QB_IO, path, NULL, "can't be examined: %s", strerror(errno));
	else if (!S_ISREG(st.st_mode))
		s = qb_fail(e, QB_REFUSED, path, NULL, "is not a plain file");
	else if ((st.st_mode & 077) != 0)
		s = qb_fail(e, QB_REFUSED, path, "chmod 600, and ask who may have read it",
		            "others can read or write it");
	else if (st.st_size > (off_t)(KEYFILE_PAYLOAD_MAX + OVERHEAD))
		s = qb_fail(e, QB_FORMAT, path, NULL, "is too large for a key file");
	uint8_t part[4096];
	ssize_t n = 0;
	while (s == QB_OK && (n = read(fd, part, sizeof part)) != 0) {
		if (n < 0 && errno == EINTR)
			continue;
		if (n < 0)
			s = qb_fail(e, QB_IO, path, NULL, "can't be read: %s", strerror(errno));
		else if (out->len + (size_t)n > KEYFILE_PAYLOAD_MAX + OVERHEAD)
			s = qb_fail(e, QB_FORMAT, path, NULL, "is too large for a key file");
		else
			buf_put(out, part, (size_t)n);
	}
	close(fd);
	return s;
}

enum qb_status keyfile_read(const char *path, uint8_t type, const char *passphrase, bool rehearsal,
                            struct secret **payload, struct keyfile_info *info, struct qb_error *e)
{
	struct buf file = {0};
	struct keyfile_info seen;
	*payload = NULL;
	enum qb_status s = read_private(path, &file, e);
	if (s == QB_OK)
		s = keyfile_inspect(file.data, file.len, &seen, e);
	if (s == QB_OK)
		s = keyfile_decrypt(file.data, file.len, type, passphrase, rehearsal, payload, e);
	if (s == QB_OK && info != NULL)
		*info = seen;
	buf_free(&file);
	return s;
}

enum qb_status keyfile_write_party(const char *path, enum keyfile_level level, const char *passphrase,
                                   const struct party_key *key, struct qb_error *e)
{
	struct secret *payload = secret_new(64);
	memcpy(secret_bytes(payload), secret_view(key->seed), 32);
	memcpy(secret_bytes(payload) + 32, secret_view(key->exchange), SCALAR_BYTES);
	enum qb_status s = keyfile_write(path, KEYFILE_PARTY, level, passphrase, payload, e);
	secret_free(&payload);
	return s;
}

enum qb_status keyfile_read_party(const char *path, const char *passphrase, bool rehearsal, struct party_key *out,
                                  struct qb_error *e)
{
	struct secret *payload;
	*out = (struct party_key){0};
	enum qb_status s = keyfile_read(path, KEYFILE_PARTY, passphrase, rehearsal, &payload, NULL, e);
	if (s == QB_OK && secret_size(payload) != 64)
		s = qb_fail(e, QB_FORMAT, path, NULL, "does not hold a party key");
	if (s == QB_OK)
		s = party_key_from(secret_view(payload), secret_view(payload) + 32, out, e);
	secret_free(&payload);
	return s;
}

#define SHARE_PAYLOAD (CAMPAIGN_ID_BYTES + 8 + 64 + 4 + SCALAR_BYTES)

enum qb_status keyfile_write_share(const char *path, enum keyfile_level level, const char *passphrase,
                                   const struct keyfile_share *share, struct qb_error *e)
{
	struct secret *payload = secret_new(SHARE_PAYLOAD);
	struct buf b = {0};
	CHECK(secret_size(share->share) == SCALAR_BYTES);
	buf_put(&b, share->campaign, sizeof share->campaign);
	buf_u64(&b, share->epoch);
	buf_put(&b, share->th, sizeof share->th);
	buf_u32(&b, share->index);
	memcpy(secret_bytes(payload), b.data, b.len);
	memcpy(secret_bytes(payload) + b.len, secret_view(share->share), SCALAR_BYTES);
	buf_free(&b);
	enum qb_status s = keyfile_write(path, KEYFILE_SHARE, level, passphrase, payload, e);
	secret_free(&payload);
	return s;
}

enum qb_status keyfile_read_share(const char *path, const char *passphrase, bool rehearsal, struct keyfile_share *out,
                                  struct qb_error *e)
{
	struct secret *payload;
	*out = (struct keyfile_share){0};
	enum qb_status s = keyfile_read(path, KEYFILE_SHARE, passphrase, rehearsal, &payload, NULL, e);
	if (s == QB_OK && secret_size(payload) != SHARE_PAYLOAD)
		s = qb_fail(e, QB_FORMAT, path, NULL, "does not hold a key share");
	if (s == QB_OK) {
		struct cursor c = cursor_over(secret_view(payload), SHARE_PAYLOAD);
		cursor_copy(&c, out->campaign, sizeof out->campaign);
		out->epoch = cursor_u64(&c);
		cursor_copy(&c, out->th, sizeof out->th);
		out->index = cursor_u32(&c);
		const uint8_t *share = cursor_take(&c, SCALAR_BYTES);
		if (out->index == 0 || out->index > CUSTODY_MAX || !group_scalar_ok(share))
			s = qb_fail(e, QB_FORMAT, path, NULL, "holds an impossible key share");
		else
			out->share = secret_from(share, SCALAR_BYTES);
	}
	secret_free(&payload);
	return s;
}
