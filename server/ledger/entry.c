/* Codec, signature and commitment of ledger entries. */
#include "server/ledger/entry.h"

#include <string.h>

static const uint8_t magic[4] = {'Q', 'B', 'L', '1'};

static enum qb_status check_values(const struct entry *entry, struct qb_error *e)
{
	if (entry->kind != ENTRY_PUBLIC && entry->kind != ENTRY_HIDDEN)
		return qb_fail(e, QB_FORMAT, "ledger entry", NULL, "unknown kind %d", (int)entry->kind);
	if (entry->received_gps_ns < 0)
		return qb_fail(e, QB_RANGE, "ledger entry", NULL, "the time received is before the GPS epoch");
	if (entry->body_len == 0 || entry->body_len > ENTRY_BODY_MAX)
		return qb_fail(e, QB_RANGE, "ledger entry", NULL, "the body has %zu bytes, accepted: 1 to %zu",
		               entry->body_len, ENTRY_BODY_MAX);
	if (entry->kind == ENTRY_HIDDEN && entry->body_len != ENTRY_COMMITMENT_BYTES)
		return qb_fail(e, QB_FORMAT, "ledger entry", NULL,
		               "a hidden entry's body is not a commitment of 64 bytes");
	return QB_OK;
}

enum qb_status entry_encode(const struct entry *entry, struct buf *out, struct qb_error *e)
{
	enum qb_status s = check_values(entry, e);
	if (s != QB_OK)
		return s;
	buf_put(out, magic, sizeof magic);
	buf_u8(out, (uint8_t)entry->kind);
	buf_zeros(out, 3);
	buf_u64(out, entry->seq);
	buf_i64(out, entry->received_gps_ns);
	buf_put(out, entry->author, sizeof entry->author);
	buf_u64(out, entry->body_len);
	buf_put(out, entry->body, entry->body_len);
	buf_put(out, entry->signature, sizeof entry->signature);
	return QB_OK;
}

enum qb_status entry_decode(const uint8_t *p, size_t n, struct entry *out, struct qb_error *e)
{
	static const uint8_t zeros[3];
	*out = (struct entry){0};
	struct cursor c = cursor_over(p, n);
	const uint8_t *m = cursor_take(&c, sizeof magic);
	if (m == NULL || memcmp(m, magic, sizeof magic) != 0)
		return qb_fail(e, QB_FORMAT, "ledger entry", NULL, "it does not start with QBL1");
	uint8_t kind = cursor_u8(&c);
	const uint8_t *fill = cursor_take(&c, sizeof zeros);
	out->seq = cursor_u64(&c);
	out->received_gps_ns = cursor_i64(&c);
	cursor_copy(&c, out->author, sizeof out->author);
	uint64_t len = cursor_u64(&c);
	if (c.bad || len > ENTRY_BODY_MAX || len + SIGN_BYTES != c.left)
		return qb_fail(e, QB_FORMAT, "ledger entry", NULL, "it is truncated, or bytes follow it");
	if (memcmp(fill, zeros, sizeof zeros) != 0)
		return qb_fail(e, QB_FORMAT, "ledger entry", NULL, "its filling is not zero");
	out->kind = (enum entry_kind)kind;
	out->body_len = (size_t)len;
	out->body = cursor_take(&c, out->body_len);
	cursor_copy(&c, out->signature, sizeof out->signature);
	return check_values(out, e);
}

enum qb_status entry_leaf_hash(const struct entry *entry, struct ledger_hash *out, struct qb_error *e)
{
	struct buf frame = {0};
	enum qb_status s = entry_encode(entry, &frame, e);
	if (s == QB_OK)
		hash_leaf(out, frame.data, frame.len);
	buf_free(&frame);
	return s;
}

static void body_digest(const void *body, size_t n, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/ledger/entry");
	transcript_field(&t, body, n);
	transcript_end(&t, out);
}

void entry_sign_body(const struct secret *seed, const void *body, size_t n, uint8_t signature[static SIGN_BYTES])
{
	uint8_t digest[64];
	body_digest(body, n, digest);
	sign_bytes(seed, digest, sizeof digest, signature);
}

bool entry_verify_body(const uint8_t pk[static SIGN_PUBLIC], const void *body, size_t n,
                       const uint8_t signature[static SIGN_BYTES])
{
	uint8_t digest[64];
	body_digest(body, n, digest);
	return sign_verify(pk, digest, sizeof digest, signature);
}

void entry_sign(struct entry *entry, const struct secret *seed)
{
	uint8_t pk[SIGN_PUBLIC];
	sign_public(seed, pk);
	sign_key_id(pk, entry->author);
	entry_sign_body(seed, entry->body, entry->body_len, entry->signature);
}

enum qb_status entry_verify(const struct entry *entry, const uint8_t pk[static SIGN_PUBLIC], struct qb_error *e)
{
	uint8_t id[KEY_ID_BYTES];
	enum qb_status s = check_values(entry, e);
	if (s != QB_OK)
		return s;
	sign_key_id(pk, id);
	if (memcmp(id, entry->author, sizeof id) != 0)
		return qb_fail(e, QB_CRYPTO, "ledger entry", NULL, "entry %llu names another author's key",
		               (unsigned long long)entry->seq);
	if (!entry_verify_body(pk, entry->body, entry->body_len, entry->signature))
		return qb_fail(e, QB_CRYPTO, "ledger entry", NULL, "the signature of entry %llu is false",
		               (unsigned long long)entry->seq);
	return QB_OK;
}

void entry_hide(const uint8_t nonce[static ENTRY_NONCE_BYTES], const void *bytes, size_t n,
                uint8_t commitment[static ENTRY_COMMITMENT_BYTES])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/ledger/hidden");
	transcript_field(&t, nonce, ENTRY_NONCE_BYTES);
	transcript_field(&t, bytes, n);
	transcript_end(&t, commitment);
}

static void promise_digest(const struct entry_promise *p, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/ledger/promise");
	transcript_field(&t, p->campaign, sizeof p->campaign);
	transcript_field(&t, p->commitment, sizeof p->commitment);
	transcript_u64(&t, (uint64_t)p->received_gps_ns);
	transcript_u64(&t, (uint64_t)p->batch_due_gps_ns);
	transcript_end(&t, out);
}

void entry_promise_sign(struct entry_promise *promise, const struct secret *seed)
{
	uint8_t digest[64];
	promise_digest(promise, digest);
	sign_bytes(seed, digest, sizeof digest, promise->signature);
}

enum qb_status entry_promise_verify(const struct entry_promise *promise, const uint8_t pk[static SIGN_PUBLIC],
                                    struct qb_error *e)
{
	uint8_t digest[64];
	if (promise->received_gps_ns < 0 || promise->batch_due_gps_ns < promise->received_gps_ns)
		return qb_fail(e, QB_FORMAT, "signed promise", NULL, "it is due before it was received");
	promise_digest(promise, digest);
	if (!sign_verify(pk, digest, sizeof digest, promise->signature))
		return qb_fail(e, QB_CRYPTO, "signed promise", NULL, "the service's signature is false");
	return QB_OK;
}
