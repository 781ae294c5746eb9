/* Shares and boxes of openings, settings, and request nonces. */
#include "server/store/internal.h"

enum qb_status store_shares_put(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                                const char *custodian, const void *shares, size_t n, struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT INTO shares (campaign, opening, custodian, shares) VALUES (?, ?, ?, ?)", e);
	q_blob(&q, campaign, 16);
	q_blob(&q, opening, 16);
	q_text(&q, custodian);
	q_blob(&q, shares, n);
	return q_done(&q);
}

static enum qb_status each_named_blob(struct query *q, store_shares_fn *fn, void *state)
{
	while (q_row(q)) {
		size_t n;
		const uint8_t *p = q_col_blob(q, 1, &n);
		q->status = fn(state, q_col_text(q, 0), p, n, q->e);
	}
	return q_end(q);
}

enum qb_status store_shares(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                            store_shares_fn *fn, void *state, struct qb_error *e)
{
	struct query q =
	    q_begin(s, "SELECT custodian, shares FROM shares WHERE campaign = ? AND opening = ? ORDER BY rowid", e);
	q_blob(&q, campaign, 16);
	q_blob(&q, opening, 16);
	return each_named_blob(&q, fn, state);
}

enum qb_status store_box_put(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                             const char *sender, const char *receiver, const void *box, size_t n, struct qb_error *e)
{
	struct query q =
	    q_begin(s, "INSERT INTO boxes (campaign, opening, sender, receiver, box) VALUES (?, ?, ?, ?, ?)", e);
	q_blob(&q, campaign, 16);
	q_blob(&q, opening, 16);
	q_text(&q, sender);
	q_text(&q, receiver);
	q_blob(&q, box, n);
	return q_done(&q);
}

enum qb_status store_boxes(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                           const char *receiver, store_shares_fn *fn, void *state, struct qb_error *e)
{
	struct query q = q_begin(
	    s, "SELECT sender, box FROM boxes WHERE campaign = ? AND opening = ? AND receiver = ? ORDER BY rowid", e);
	q_blob(&q, campaign, 16);
	q_blob(&q, opening, 16);
	q_text(&q, receiver);
	return each_named_blob(&q, fn, state);
}

enum qb_status store_setting_put(struct store *s, const char *key, const char *value, struct qb_error *e)
{
	struct query q = q_begin(
	    s, "INSERT INTO settings (key, value) VALUES (?, ?) ON CONFLICT DO UPDATE SET value = excluded.value", e);
	q_text(&q, key);
	q_text(&q, value);
	return q_done(&q);
}

enum qb_status store_setting_get(struct store *s, const char *key, struct buf *out, struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT value FROM settings WHERE key = ?", e);
	q_text(&q, key);
	buf_clear(out);
	bool found = q_row(&q);
	if (found)
		buf_text(out, q_col_text(&q, 0));
	enum qb_status st = q_end(&q);
	if (st == QB_OK && !found)
		st = qb_fail(e, QB_NOT_FOUND, "store", NULL, "the setting '%s' is missing", key);
	return st;
}

enum qb_status store_nonce_put(struct store *s, const uint8_t key_id[static 16], const uint8_t nonce[static 16],
                               int64_t expires_unix_s, int64_t now_unix_s, struct qb_error *e)
{
	struct query q = q_begin(s, "DELETE FROM nonces WHERE expires < ?", e);
	q_int(&q, now_unix_s);
	enum qb_status st = q_done(&q);
	if (st != QB_OK)
		return st;
	q = q_begin(s, "INSERT INTO nonces (key_id, nonce, expires) VALUES (?, ?, ?)", e);
	q_blob(&q, key_id, 16);
	q_blob(&q, nonce, 16);
	q_int(&q, expires_unix_s);
	return q_done(&q);
}
