/* Writes the bundle: a fresh SQLite file with copies of everything that offline verification needs. */
#include <string.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ledger/bundle_schema.h"
#include "server/store/internal.h"

/* Copies with the campaign bound; the leaves go in whole, since every proof is about the one ledger. */
static const char *const copies[] = {
    "INSERT INTO bundle.hidden SELECT commitment, seq, received, due, promise, nonce, entry, signature, author FROM "
    "main.hidden"
    " WHERE campaign = ? AND seq IS NOT NULL ORDER BY seq",
    "INSERT INTO bundle.records SELECT position, type, slot, station, author, record_id, record FROM main.records"
    " WHERE campaign = ? ORDER BY position",
    "INSERT INTO bundle.recipes SELECT slot, station, place, recipe FROM main.recipes WHERE campaign = ?"
    " ORDER BY slot, station, place",
    "INSERT INTO bundle.prekeys SELECT station, place, points FROM main.prekeys WHERE campaign = ? ORDER BY station, "
    "place",
    "INSERT INTO bundle.shares SELECT opening, custodian, shares FROM main.shares WHERE campaign = ?"
    " ORDER BY opening, custodian",
    NULL};

static enum qb_status put_pair(struct store *s, const char *key, const char *value, struct qb_error *e)
{
	struct query q = q_begin(s, "INSERT INTO bundle.about (key, value) VALUES (?, ?)", e);
	q_text(&q, key);
	q_text(&q, value);
	return q_done(&q);
}

static enum qb_status fill(struct store *s, const uint8_t campaign[static 16], uint64_t ledger_size, const char *head,
                           const char *version, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (const struct bundle_table *t = bundle_tables; st == QB_OK && t->name != NULL; t++) {
		char *sql = text_printf("CREATE TABLE bundle.%s %s", t->name, t->columns);
		st = store_exec(s->db, sql, e);
		qb_free(sql);
	}
	char hex[33];
	for (int i = 0; i < 16; i++)
		sqlite3_snprintf(3, hex + 2 * i, "%02x", campaign[i]);
	if (st == QB_OK)
		st = put_pair(s, "campaign", hex, e);
	if (st == QB_OK)
		st = put_pair(s, "format", BUNDLE_FORMAT, e);
	if (st == QB_OK)
		st = put_pair(s, "written-by", version, e);
	if (st == QB_OK) {
		struct query q = q_begin(s, "INSERT INTO bundle.heads (text) VALUES (?)", e);
		q_text(&q, head);
		st = q_done(&q);
	}
	if (st == QB_OK) {
		struct query q = q_begin(
		    s, "INSERT INTO bundle.leaves SELECT seq, frame FROM main.leaves WHERE seq < ? ORDER BY seq", e);
		q_int(&q, (int64_t)ledger_size);
		st = q_done(&q);
	}
	for (int i = 0; st == QB_OK && copies[i] != NULL; i++) {
		struct query q = q_begin(s, copies[i], e);
		q_blob(&q, campaign, 16);
		st = q_done(&q);
	}
	return st;
}

enum qb_status store_bundle_write(struct store *s, const uint8_t campaign[static 16], uint64_t ledger_size,
                                  const char *head, const char *version, const char *path, struct qb_error *e)
{
	(void)unlink(path);
	/* the connection may not create files of its own: an empty one becomes the bundle */
	enum qb_status made = file_write(path, 0600, "", 0, e);
	if (made != QB_OK)
		return made;
	struct query q = q_begin(s, "ATTACH DATABASE ? AS bundle", e);
	q_text(&q, path);
	enum qb_status st = q_done(&q);
	if (st != QB_OK)
		return st;
	st = store_exec(s->db, "PRAGMA bundle.journal_mode=DELETE; PRAGMA bundle.application_id=1363299908", NULL);
	/* journal_mode answers with a row, which store_exec ignores */
	st = store_exec(s->db, "BEGIN IMMEDIATE", e);
	if (st == QB_OK)
		st = fill(s, campaign, ledger_size, head, version, e);
	if (st == QB_OK)
		st = store_exec(s->db, "COMMIT", e);
	if (st != QB_OK)
		(void)sqlite3_exec(s->db, "ROLLBACK", NULL, NULL, NULL);
	enum qb_status detached = store_exec(s->db, "DETACH DATABASE bundle", st == QB_OK ? e : NULL);
	if (st == QB_OK)
		st = detached;
	if (st != QB_OK)
		(void)unlink(path);
	return st;
}
