/* Reading a bundle. */
#include "client/cli/bundle_file.h"

#include <sqlite3.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ledger/bundle_schema.h"

#define ROWS_MAX 8000000

struct reader {
	sqlite3 *db;
	struct bundle *b;
	struct qb_error *e;
};

static enum qb_status bad(struct reader *r, const char *what)
{
	return qb_fail(r->e, QB_NO, "bundle", "get it again from the service", "%s", what);
}

static bool copy_blob(sqlite3_stmt *s, int col, void *out, size_t n)
{
	if (sqlite3_column_type(s, col) != SQLITE_BLOB || (size_t)sqlite3_column_bytes(s, col) != n)
		return false;
	memcpy(out, sqlite3_column_blob(s, col), n);
	return true;
}

static bool take_blob(sqlite3_stmt *s, int col, struct buf *out)
{
	if (sqlite3_column_type(s, col) != SQLITE_BLOB)
		return false;
	buf_put(out, sqlite3_column_blob(s, col), (size_t)sqlite3_column_bytes(s, col));
	return true;
}

static bool take_name(sqlite3_stmt *s, int col, char out[64])
{
	const char *t = (const char *)sqlite3_column_text(s, col);
	if (t == NULL || strlen(t) > 63 || strlen(t) != (size_t)sqlite3_column_bytes(s, col))
		return false;
	(void)snprintf(out, 64, "%s", t);
	return true;
}

/* Room for one more element of a growing array. */
static void *grow(void *p, size_t n, size_t size)
{
	return (n & (n - 1)) == 0 ? qb_realloc(p, n > 0 ? 2 * n : 1, size) : p;
}

typedef bool row_fn(struct bundle *b, sqlite3_stmt *s);

static enum qb_status each_row(struct reader *r, const char *sql, row_fn *fn)
{
	sqlite3_stmt *s = NULL;
	int code = SQLITE_ERROR;
	bool good = sqlite3_prepare_v2(r->db, sql, -1, &s, NULL) == SQLITE_OK;
	for (long n = 0; good && n < ROWS_MAX && (code = sqlite3_step(s)) == SQLITE_ROW; n++)
		good = fn(r->b, s);
	sqlite3_finalize(s);
	return good && code == SQLITE_DONE ? QB_OK : bad(r, "a table is damaged or holds what does not belong there");
}

static bool row_about(struct bundle *b, sqlite3_stmt *s)
{
	const char *key = (const char *)sqlite3_column_text(s, 0), *value = (const char *)sqlite3_column_text(s, 1);
	if (key == NULL || value == NULL)
		return false;
	if (strcmp(key, "campaign") == 0)
		return strlen(value) == 32 && hex_decode(b->campaign, 16, value);
	if (strcmp(key, "format") == 0)
		return strcmp(value, BUNDLE_FORMAT) == 0;
	return strcmp(key, "written-by") == 0 && strcmp(value, "1.0") == 0;
}

static bool row_head(struct bundle *b, sqlite3_stmt *s)
{
	if (b->head.len > 0 || sqlite3_column_bytes(s, 0) > HEAD_TEXT_MAX)
		return false;
	buf_put(&b->head, sqlite3_column_text(s, 0), (size_t)sqlite3_column_bytes(s, 0));
	return true;
}

static bool row_leaf(struct bundle *b, sqlite3_stmt *s)
{
	if (sqlite3_column_int64(s, 0) != (int64_t)b->n_frames)
		return false;
	b->frame = grow(b->frame, b->n_frames, sizeof *b->frame);
	b->frame[b->n_frames] = (struct buf){0};
	return take_blob(s, 1, &b->frame[b->n_frames++]);
}

static bool row_hidden(struct bundle *b, sqlite3_stmt *s)
{
	b->hidden = grow(b->hidden, b->n_hidden, sizeof *b->hidden);
	struct bundle_hidden *h = &b->hidden[b->n_hidden++];
	*h = (struct bundle_hidden){.seq = sqlite3_column_int64(s, 1),
	                            .received_gps_ns = sqlite3_column_int64(s, 2),
	                            .due_gps_ns = sqlite3_column_int64(s, 3)};
	return copy_blob(s, 0, h->commitment, 64) && copy_blob(s, 4, h->promise, 64) && copy_blob(s, 5, h->nonce, 32) &&
	       take_blob(s, 6, &h->entry) && copy_blob(s, 7, h->signature, 64) && copy_blob(s, 8, h->author, 16);
}

static bool row_record(struct bundle *b, sqlite3_stmt *s)
{
	size_t n = b->records.n;
	b->records.item = grow(b->records.item, n, sizeof *b->records.item);
	b->record_id = grow(b->record_id, n, 64);
	b->author = grow(b->author, n, 16);
	struct sealed_item *x = &b->records.item[b->records.n++];
	*x = (struct sealed_item){.position = sqlite3_column_int64(s, 0),
	                          .type = sqlite3_column_int(s, 1),
	                          .slot = sqlite3_column_int64(s, 2)};
	return x->position == (int64_t)n && take_name(s, 3, x->station) && copy_blob(s, 4, b->author[n], 16) &&
	       copy_blob(s, 5, b->record_id[n], 64) && take_blob(s, 6, &x->bytes);
}

static bool row_recipe(struct bundle *b, sqlite3_stmt *s)
{
	b->recipe = grow(b->recipe, b->n_recipes, sizeof *b->recipe);
	struct bundle_blob *x = &b->recipe[b->n_recipes++];
	*x = (struct bundle_blob){.slot = sqlite3_column_int64(s, 0), .place = sqlite3_column_int(s, 2)};
	return take_name(s, 1, x->name) && take_blob(s, 3, &x->bytes);
}

static bool row_prekeys(struct bundle *b, sqlite3_stmt *s)
{
	b->prekey = grow(b->prekey, b->n_prekeys, sizeof *b->prekey);
	struct bundle_blob *x = &b->prekey[b->n_prekeys++];
	*x = (struct bundle_blob){.place = sqlite3_column_int(s, 1)};
	return take_name(s, 0, x->name) && take_blob(s, 2, &x->bytes);
}

static bool row_shares(struct bundle *b, sqlite3_stmt *s)
{
	b->share = grow(b->share, b->n_shares, sizeof *b->share);
	struct bundle_blob *x = &b->share[b->n_shares++];
	*x = (struct bundle_blob){0};
	return copy_blob(s, 0, x->opening, 16) && take_name(s, 1, x->name) && take_blob(s, 2, &x->bytes);
}

/* Exactly the tables of the format, word for word; no view, trigger, index or further table. */
static enum qb_status check_schema(struct reader *r)
{
	sqlite3_stmt *s = NULL;
	int found = 0, known = 0, code = SQLITE_ERROR;
	bool good = sqlite3_prepare_v2(
	                r->db, "SELECT type, name, sql FROM sqlite_schema WHERE name NOT LIKE 'sqlite_autoindex_%'", -1,
	                &s, NULL) == SQLITE_OK;
	while (good && (code = sqlite3_step(s)) == SQLITE_ROW) {
		const char *type = (const char *)sqlite3_column_text(s, 0),
		           *name = (const char *)sqlite3_column_text(s, 1);
		const char *sql = (const char *)sqlite3_column_text(s, 2);
		bool match = false;
		for (const struct bundle_table *t = bundle_tables; t->name != NULL && name != NULL && sql != NULL;
		     t++) {
			char *want = text_printf("CREATE TABLE %s %s", t->name, t->columns);
			match = match ||
			        (strcmp(type, "table") == 0 && strcmp(name, t->name) == 0 && strcmp(sql, want) == 0);
			qb_free(want);
		}
		good = match;
		found++;
	}
	sqlite3_finalize(s);
	for (const struct bundle_table *t = bundle_tables; t->name != NULL; t++)
		known++;
	r->b->n_tables = known;
	return good && code == SQLITE_DONE && found == known
	           ? QB_OK
	           : bad(r, "is no bundle: its tables are not those of the format");
}

static int64_t pragma(struct reader *r, const char *sql)
{
	sqlite3_stmt *s = NULL;
	int64_t v = -1;
	if (sqlite3_prepare_v2(r->db, sql, -1, &s, NULL) == SQLITE_OK && sqlite3_step(s) == SQLITE_ROW)
		v = sqlite3_column_int64(s, 0);
	sqlite3_finalize(s);
	return v;
}

/* Every page is used once, every row and index entry in its place; a file made in one go has no page to spare. */
static bool whole(struct reader *r)
{
	sqlite3_stmt *s = NULL;
	bool good = sqlite3_prepare_v2(r->db, "PRAGMA integrity_check(1)", -1, &s, NULL) == SQLITE_OK &&
	            sqlite3_step(s) == SQLITE_ROW && strcmp((const char *)sqlite3_column_text(s, 0), "ok") == 0;
	sqlite3_finalize(s);
	return good && pragma(r, "PRAGMA freelist_count") == 0;
}

/*
 * SQLite forgives a last page that is cut; a bundle has every byte of every page, and none behind them. The mark of the
 * format stands in the header.
 */
static enum qb_status check_size(struct reader *r, const char *path)
{
	struct stat f;
	int64_t pages = pragma(r, "PRAGMA page_count"), size = pragma(r, "PRAGMA page_size");
	if (stat(path, &f) != 0 || pages <= 0 || size <= 0 || f.st_size != pages * size)
		return bad(r, "is truncated, or something was put behind it");
	r->b->bytes = f.st_size;
	if (!whole(r))
		return bad(r, "is damaged");
	if (pragma(r, "PRAGMA application_id") != BUNDLE_APPLICATION_ID)
		return bad(r, "is no bundle: it does not carry the mark of one");
	return QB_OK;
}

static enum qb_status read_all(struct reader *r)
{
	static const struct {
		const char *sql;
		row_fn *fn;
	} tables[] = {
	    {"SELECT key, value FROM about", row_about},
	    {"SELECT text FROM heads", row_head},
	    {"SELECT seq, frame FROM leaves ORDER BY seq", row_leaf},
	    {"SELECT commitment, seq, received, due, promise, nonce, entry, signature, author FROM hidden ORDER BY "
	     "received, seq",
	     row_hidden},
	    {"SELECT position, type, slot, station, author, record_id, record FROM records ORDER BY position",
	     row_record},
	    {"SELECT slot, station, place, recipe FROM recipes ORDER BY slot, station, place", row_recipe},
	    {"SELECT station, place, points FROM prekeys ORDER BY station, place", row_prekeys},
	    {"SELECT opening, custodian, shares FROM shares ORDER BY opening, custodian", row_shares},
	};
	enum qb_status st = check_schema(r);
	for (size_t i = 0; st == QB_OK && i < sizeof tables / sizeof tables[0]; i++)
		st = each_row(r, tables[i].sql, tables[i].fn);
	if (st == QB_OK && (r->b->head.len == 0 || r->b->n_frames == 0))
		st = bad(r, "has no head or no ledger");
	return st;
}

enum qb_status bundle_read(const char *path, struct bundle **out, struct qb_error *e)
{
	struct reader r = {.b = QB_NEW(struct bundle), .e = e};
	enum qb_status st = QB_OK;
	if (access(path, R_OK) != 0)
		st = qb_fail(e, QB_IO, path, "check the path", "can't be read");
	if (st == QB_OK && sqlite3_open_v2(path, &r.db, SQLITE_OPEN_READONLY | SQLITE_OPEN_NOFOLLOW, NULL) != SQLITE_OK)
		st = bad(&r, "can't be opened as a bundle");
	if (st == QB_OK) {
		sqlite3_db_config(r.db, SQLITE_DBCONFIG_DEFENSIVE, 1, NULL);
		sqlite3_db_config(r.db, SQLITE_DBCONFIG_TRUSTED_SCHEMA, 0, NULL);
		sqlite3_exec(r.db, "PRAGMA cell_size_check=ON", NULL, NULL, NULL);
		st = check_size(&r, path);
		if (st == QB_OK)
			st = read_all(&r);
	}
	sqlite3_close(r.db);
	if (st != QB_OK)
		bundle_free(&r.b);
	*out = r.b;
	return st;
}

static void free_blobs(struct bundle_blob *x, size_t n)
{
	for (size_t i = 0; i < n; i++)
		buf_free(&x[i].bytes);
	qb_free(x);
}

void bundle_free(struct bundle **bp)
{
	struct bundle *b = *bp;
	if (b == NULL)
		return;
	for (uint64_t i = 0; i < b->n_frames; i++)
		buf_free(&b->frame[i]);
	for (size_t i = 0; i < b->n_hidden; i++)
		buf_free(&b->hidden[i].entry);
	qb_free(b->frame);
	qb_free(b->hidden);
	qb_free(b->record_id);
	qb_free(b->author);
	items_free(&b->records);
	free_blobs(b->recipe, b->n_recipes);
	free_blobs(b->prekey, b->n_prekeys);
	free_blobs(b->share, b->n_shares);
	buf_free(&b->head);
	qb_free(b);
	*bp = NULL;
}
