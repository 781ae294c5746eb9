/* Sealed records, recipes, prekeys, slot keys and readiness. */
#include <string.h>

#include "server/store/internal.h"

enum qb_status store_record_put(struct store *s, const uint8_t campaign[static 16], const struct store_record *r,
                                struct qb_error *e)
{
	struct query q =
	    q_begin(s,
	            "INSERT INTO records (campaign, position, type, slot, station, author, record_id, r_point,"
	            " record) VALUES (?1, CASE WHEN ?2 >= 0 THEN ?2 ELSE (SELECT coalesce(max(position), -1) + 1"
	            " FROM records WHERE campaign = ?1) END, ?3, ?4, ?5, ?6, ?7, ?8, ?9)",
	            e);
	q_blob(&q, campaign, 16);
	q_int(&q, r->position);
	q_int(&q, r->type);
	q_int(&q, r->slot);
	q_text(&q, r->station);
	q_blob(&q, r->author, 16);
	q_blob(&q, r->record_id, 64);
	q_blob(&q, r->r_point, 32);
	q_blob(&q, r->record, r->record_n);
	return q_done(&q);
}

static enum qb_status each_record(struct query *q, store_record_fn *fn, void *state)
{
	while (q_row(q)) {
		struct store_record r = {
		    .position = q_col_int(q, 0), .type = (int)q_col_int(q, 1), .slot = q_col_int(q, 2)};
		r.station = q_col_text(q, 3);
		q_col_copy(q, 4, r.author, 16);
		q_col_copy(q, 5, r.record_id, 64);
		q_col_copy(q, 6, r.r_point, 32);
		r.record = q_col_blob(q, 7, &r.record_n);
		if (q->status == QB_OK)
			q->status = fn(state, &r, q->e);
	}
	return q_end(q);
}

#define RECORD_COLUMNS "position, type, slot, station, author, record_id, r_point, record"

enum qb_status store_records(struct store *s, const uint8_t campaign[static 16], int64_t from, int64_t limit,
                             store_record_fn *fn, void *state, struct qb_error *e)
{
	struct query q = q_begin(
	    s, "SELECT " RECORD_COLUMNS " FROM records WHERE campaign = ? AND position >= ? ORDER BY position LIMIT ?",
	    e);
	q_blob(&q, campaign, 16);
	q_int(&q, from);
	q_int(&q, limit);
	return each_record(&q, fn, state);
}

enum qb_status store_records_of_slot(struct store *s, const uint8_t campaign[static 16], int64_t slot, int type,
                                     store_record_fn *fn, void *state, struct qb_error *e)
{
	struct query q = q_begin(
	    s, "SELECT " RECORD_COLUMNS " FROM records WHERE campaign = ? AND slot = ? AND type = ? ORDER BY position",
	    e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_int(&q, type);
	return each_record(&q, fn, state);
}

enum qb_status store_recipe_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                                int place, const void *recipe, size_t n, struct qb_error *e)
{
	struct query q =
	    q_begin(s, "INSERT INTO recipes (campaign, slot, station, place, recipe) VALUES (?, ?, ?, ?, ?)", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_text(&q, station);
	q_int(&q, place);
	q_blob(&q, recipe, n);
	return q_done(&q);
}

/* One blob of the first row into *out, or QB_NOT_FOUND with these words. */
static enum qb_status one_blob(struct query *q, struct buf *out, const char *missing)
{
	buf_clear(out);
	bool found = q_row(q);
	if (found) {
		size_t n;
		const uint8_t *p = q_col_blob(q, 0, &n);
		buf_put(out, p, n);
	}
	struct qb_error *e = q->e;
	enum qb_status st = q_end(q);
	if (st == QB_OK && !found)
		st = qb_fail(e, QB_NOT_FOUND, NULL, NULL, "%s", missing);
	return st;
}

enum qb_status store_recipe_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                                int place, struct buf *out, struct qb_error *e)
{
	struct query q =
	    q_begin(s, "SELECT recipe FROM recipes WHERE campaign = ? AND slot = ? AND station = ? AND place = ?", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_text(&q, station);
	q_int(&q, place);
	return one_blob(&q, out, "there is no recipe for this slot and station");
}

enum qb_status store_prekeys_put(struct store *s, const uint8_t campaign[static 16], const char *station, int place,
                                 const void *points, size_t n, struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT INTO prekeys (campaign, station, place, points) VALUES (?, ?, ?, ?)", e);
	q_blob(&q, campaign, 16);
	q_text(&q, station);
	q_int(&q, place);
	q_blob(&q, points, n);
	return q_done(&q);
}

enum qb_status store_prekeys_get(struct store *s, const uint8_t campaign[static 16], const char *station, int place,
                                 struct buf *out, struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT points FROM prekeys WHERE campaign = ? AND station = ? AND place = ?", e);
	q_blob(&q, campaign, 16);
	q_text(&q, station);
	q_int(&q, place);
	return one_blob(&q, out, "the driver has left no one-time keys");
}

enum qb_status store_slot_key_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const void *boxed,
                                  size_t n, struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT INTO slot_keys (campaign, slot, boxed) VALUES (?, ?, ?)", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_blob(&q, boxed, n);
	return q_done(&q);
}

enum qb_status store_slot_key_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, struct buf *out,
                                  struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT boxed FROM slot_keys WHERE campaign = ? AND slot = ?", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	return one_blob(&q, out, "the slot's key is erased");
}

enum qb_status store_slot_keys_erase_below(struct store *s, const uint8_t campaign[static 16], int64_t slot,
                                           struct qb_error *e)
{
	/* secure_delete overwrites the pages; the overwrite before it also covers a copy still in the log file. */
	struct query q =
	    q_begin(s, "UPDATE slot_keys SET boxed = zeroblob(length(boxed)) WHERE campaign = ? AND slot < ?", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	enum qb_status st = q_done(&q);
	if (st != QB_OK)
		return st;
	q = q_begin(s, "DELETE FROM slot_keys WHERE campaign = ? AND slot < ?", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	return q_done(&q);
}

enum qb_status store_ready_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int place, struct qb_error *e)
{
	struct query q =
	    q_begin(s, "INSERT OR IGNORE INTO readiness (campaign, slot, station, place) VALUES (?, ?, ?, ?)", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_text(&q, station);
	q_int(&q, place);
	return q_done(&q);
}

enum qb_status store_ready_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int place, bool *ready, struct qb_error *e)
{
	struct query q =
	    q_begin(s, "SELECT 1 FROM readiness WHERE campaign = ? AND slot = ? AND station = ? AND place = ?", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_text(&q, station);
	q_int(&q, place);
	*ready = q_row(&q);
	return q_end(&q);
}

enum qb_status store_lease_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int place, struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT INTO leases (campaign, slot, station, place) VALUES (?, ?, ?, ?)", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_text(&q, station);
	q_int(&q, place);
	return q_done(&q);
}

enum qb_status store_lease_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int *place, struct qb_error *e)
{
	struct query q = q_begin(s, "SELECT place FROM leases WHERE campaign = ? AND slot = ? AND station = ?", e);
	q_blob(&q, campaign, 16);
	q_int(&q, slot);
	q_text(&q, station);
	*place = q_row(&q) ? (int)q_col_int(&q, 0) : -1;
	return q_end(&q);
}
