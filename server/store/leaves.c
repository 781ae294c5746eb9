/* The ledger's rows: leaves, heads, cosignatures and the hidden entries that wait for their batch. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/store/internal.h"

/* What was written must read back, or no head may be signed over it. */
static enum qb_status read_back(struct store *s, uint64_t seq, const void *frame, size_t n,
                                const uint8_t hash[static 32], struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT frame, leaf_hash FROM leaves WHERE seq = ?", e);
	q_int(&q, (int64_t)seq);
	bool same = false;
	if (q_row(&q)) {
		size_t have, hash_n;
		const uint8_t *p = q_col_blob(&q, 0, &have);
		same = have == n && memcmp(p, frame, n) == 0;
		p = q_col_blob(&q, 1, &hash_n);
		same = same && hash_n == 32 && memcmp(p, hash, 32) == 0;
	}
	enum qb_status st = q_end(&q);
	if (st == QB_OK && !same)
		st = qb_fail(e, QB_FAULT, "store", "check the disk", "leaf %llu does not read back as written",
		             (unsigned long long)seq);
	return st;
}

enum qb_status store_leaf_append(struct store *s, uint64_t seq, const void *frame, size_t n,
                                 const uint8_t leaf_hash[static 32], struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT INTO leaves (seq, frame, leaf_hash) VALUES (?, ?, ?)", e);
	q_int(&q, (int64_t)seq);
	q_blob(&q, frame, n);
	q_blob(&q, leaf_hash, 32);
	enum qb_status st = q_done(&q);
	return st == QB_OK ? read_back(s, seq, frame, n, leaf_hash, e) : st;
}

enum qb_status store_leaves(struct store *s, uint64_t from, uint64_t limit, store_leaf_fn *fn, void *state,
                            struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT seq, frame, leaf_hash FROM leaves WHERE seq >= ? ORDER BY seq LIMIT ?", e);
	q_int(&q, (int64_t)from);
	q_int(&q, limit > INT64_MAX ? INT64_MAX : (int64_t)limit);
	while (q_row(&q)) {
		size_t n;
		uint8_t hash[32];
		const uint8_t *frame = q_col_blob(&q, 1, &n);
		q_col_copy(&q, 2, hash, 32);
		if (q.status == QB_OK)
			q.status = fn(state, (uint64_t)q_col_int(&q, 0), frame, n, hash, e);
	}
	return q_end(&q);
}

enum qb_status store_head_put(struct store *s, uint64_t size, const char *text, struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT INTO heads (size, text) VALUES (?, ?)", e);
	q_int(&q, (int64_t)size);
	q_text(&q, text);
	return q_done(&q);
}

enum qb_status store_head_get(struct store *s, uint64_t size, struct buf *out, struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT text FROM heads WHERE size = ?", e);
	q_int(&q, (int64_t)size);
	buf_clear(out);
	bool found = q_row(&q);
	if (found)
		buf_text(out, q_col_text(&q, 0));
	enum qb_status st = q_end(&q);
	if (st == QB_OK && !found)
		st = qb_fail(e, QB_NOT_FOUND, "ledger", NULL, "no head of size %llu was signed",
		             (unsigned long long)size);
	return st;
}

enum qb_status store_cosignature_put(struct store *s, uint64_t size, const uint8_t key_id[static 16],
                                     const uint8_t signature[static 64], struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT OR IGNORE INTO cosignatures (size, key_id, signature) VALUES (?, ?, ?)", e);
	q_int(&q, (int64_t)size);
	q_blob(&q, key_id, 16);
	q_blob(&q, signature, 64);
	return q_done(&q);
}

enum qb_status store_cosignatures(struct store *s, uint64_t size, store_cosignature_fn *fn, void *state,
                                  struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT key_id, signature FROM cosignatures WHERE size = ? ORDER BY key_id", e);
	q_int(&q, (int64_t)size);
	while (q_row(&q)) {
		uint8_t key_id[16], signature[64];
		q_col_copy(&q, 0, key_id, 16);
		q_col_copy(&q, 1, signature, 64);
		if (q.status == QB_OK)
			q.status = fn(state, key_id, signature, e);
	}
	return q_end(&q);
}

enum qb_status store_cosigned_newest(struct store *s, const uint8_t key_id[static 16], uint64_t *out,
                                     struct qb_error *e)
{
	*out = 0;
	struct query q = q_begin(s, "SELECT coalesce(max(size), 0) FROM cosignatures WHERE key_id = ?", e);
	q_blob(&q, key_id, 16);
	if (q_row(&q))
		*out = (uint64_t)q_col_int(&q, 0);
	return q_end(&q);
}

enum qb_status store_cosigned_size(struct store *s, const uint8_t (*key_ids)[16], int n_keys, int needed, uint64_t *out,
                                   struct qb_error *e)
{
	*out = 0;
	int64_t current = -1;
	int count = 0;
	struct query q = q_begin(s, "SELECT size, key_id FROM cosignatures ORDER BY size DESC", e);
	while (*out == 0 && q_row(&q)) {
		uint8_t key_id[16];
		q_col_copy(&q, 1, key_id, 16);
		if (q_col_int(&q, 0) != current) {
			current = q_col_int(&q, 0);
			count = 0;
		}
		for (int i = 0; i < n_keys; i++)
			count += memcmp(key_ids[i], key_id, 16) == 0;
		if (count >= needed)
			*out = (uint64_t)current;
	}
	return q_end(&q);
}

enum qb_status store_hidden_put(struct store *s, const struct store_hidden *h, struct qb_error *e)
{
	struct query q =
	    q_begin(s,
	            "INSERT INTO hidden (commitment, campaign, received, due, nonce, entry, signature, author,"
	            " promise) VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
	            e);
	q_blob(&q, h->commitment, 64);
	q_blob(&q, h->campaign, 16);
	q_int(&q, h->received_gps_ns);
	q_int(&q, h->due_gps_ns);
	q_blob(&q, h->nonce, 32);
	q_blob(&q, h->entry, h->entry_n);
	q_blob(&q, h->signature, 64);
	q_blob(&q, h->author, 16);
	q_blob(&q, h->promise, 64);
	return q_done(&q);
}

enum qb_status store_hidden_entered(struct store *s, const uint8_t commitment[static 64], uint64_t seq,
                                    struct qb_error *e)
{
	struct query q = q_begin(s, "UPDATE hidden SET seq = ? WHERE commitment = ?", e);
	q_int(&q, (int64_t)seq);
	q_blob(&q, commitment, 64);
	return q_done(&q);
}

enum qb_status store_hidden_all(struct store *s, const uint8_t campaign[static 16], store_hidden_fn *fn, void *state,
                                struct qb_error *e)
{
	struct query q = q_begin(s,
	                         "SELECT commitment, received, due, nonce, entry, signature, author, promise,"
	                         " coalesce(seq, -1) FROM hidden WHERE campaign = ? ORDER BY received, rowid",
	                         e);
	q_blob(&q, campaign, 16);
	while (q_row(&q)) {
		struct store_hidden h;
		memcpy(h.campaign, campaign, 16);
		q_col_copy(&q, 0, h.commitment, 64);
		h.received_gps_ns = q_col_int(&q, 1);
		h.due_gps_ns = q_col_int(&q, 2);
		q_col_copy(&q, 3, h.nonce, 32);
		h.entry = q_col_blob(&q, 4, &h.entry_n);
		q_col_copy(&q, 5, h.signature, 64);
		q_col_copy(&q, 6, h.author, 16);
		q_col_copy(&q, 7, h.promise, 64);
		h.seq = q_col_int(&q, 8);
		if (q.status == QB_OK)
			q.status = fn(state, &h, e);
	}
	return q_end(&q);
}
