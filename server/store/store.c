/* Opening, schema, transactions and the statement wrapper. The only settings that weaken nothing: WAL with FULL sync.
 */
#include "server/store/internal.h"

#include <string.h>
#include <sys/stat.h>
#include <fcntl.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

#define SCHEMA_VERSION 1
#define APPLICATION_ID 0x51425354 /* QBST */

static enum qb_status db_fail(sqlite3 *db, struct qb_error *e)
{
	int code = sqlite3_extended_errcode(db);
	/* This goes to whoever sent it twice: no names of tables. */
	if (code == SQLITE_CONSTRAINT_UNIQUE || code == SQLITE_CONSTRAINT_PRIMARYKEY)
		return qb_fail(e, QB_CONFLICT, NULL, NULL, "the same was taken before");
	if ((code & 0xff) == SQLITE_CONSTRAINT)
		return qb_fail(e, QB_CONFLICT, "store", NULL, "%s", sqlite3_errmsg(db));
	return qb_fail(e, QB_IO, "store", "check the disk; the transaction was rolled back", "%s", sqlite3_errmsg(db));
}

enum qb_status store_exec(sqlite3 *db, const char *sql, struct qb_error *e)
{
	return sqlite3_exec(db, sql, NULL, NULL, NULL) == SQLITE_OK ? QB_OK : db_fail(db, e);
}

static int pragma_int(sqlite3 *db, const char *sql)
{
	sqlite3_stmt *st;
	int v = -1;
	if (sqlite3_prepare_v2(db, sql, -1, &st, NULL) == SQLITE_OK && sqlite3_step(st) == SQLITE_ROW)
		v = sqlite3_column_int(st, 0);
	sqlite3_finalize(st);
	return v;
}

static enum qb_status harden(sqlite3 *db, struct qb_error *e)
{
	sqlite3_db_config(db, SQLITE_DBCONFIG_DEFENSIVE, 1, NULL);
	sqlite3_db_config(db, SQLITE_DBCONFIG_DQS_DML, 0, NULL);
	sqlite3_db_config(db, SQLITE_DBCONFIG_DQS_DDL, 0, NULL);
	sqlite3_db_config(db, SQLITE_DBCONFIG_TRUSTED_SCHEMA, 0, NULL);
	sqlite3_db_config(db, SQLITE_DBCONFIG_ENABLE_LOAD_EXTENSION, 0, NULL);
	sqlite3_busy_timeout(db, 5000);
	return store_exec(db,
	                  "PRAGMA journal_mode=WAL; PRAGMA synchronous=FULL; PRAGMA foreign_keys=ON;"
	                  "PRAGMA secure_delete=ON; PRAGMA cell_size_check=ON; PRAGMA temp_store=MEMORY;",
	                  e);
}

static enum qb_status migrate(sqlite3 *db, bool create, struct qb_error *e)
{
	int version = pragma_int(db, "PRAGMA user_version");
	if (version == SCHEMA_VERSION && pragma_int(db, "PRAGMA application_id") == APPLICATION_ID)
		return QB_OK;
	if (!create || version != 0)
		return qb_fail(e, QB_FORMAT, "store", "use the version that wrote it, or restore a backup",
		               "the store has version %d, this program knows %d", version, SCHEMA_VERSION);
	enum qb_status st = store_exec(db, "BEGIN EXCLUSIVE", e);
	for (int i = 0; st == QB_OK && schema_files[i] != NULL; i++)
		st = store_exec(db, schema_files[i], e);
	if (st == QB_OK)
		st = store_exec(db, "PRAGMA application_id=1363301204; PRAGMA user_version=1; COMMIT", e);
	if (st != QB_OK)
		(void)sqlite3_exec(db, "ROLLBACK", NULL, NULL, NULL);
	return st;
}

enum qb_status store_open(const char *path, bool create, struct store **out, struct qb_error *e)
{
	*out = NULL;
	int fd = open(path, O_RDWR | O_CLOEXEC | (create ? O_CREAT | O_EXCL : 0), 0600);
	if (fd < 0)
		return qb_fail(e, create ? QB_CONFLICT : QB_IO, path,
		               create ? "choose an empty directory" : "run quietbelld init first",
		               create ? "exists already or can't be created" : "can't be opened");
	close(fd);
	struct store *s = QB_NEW(struct store);
	enum qb_status st = QB_OK;
	if (sqlite3_open_v2(path, &s->db, SQLITE_OPEN_READWRITE | SQLITE_OPEN_FULLMUTEX | SQLITE_OPEN_NOFOLLOW, NULL) !=
	    SQLITE_OK)
		st = db_fail(s->db, e);
	if (st == QB_OK)
		st = harden(s->db, e);
	if (st == QB_OK)
		st = migrate(s->db, create, e);
	if (st != QB_OK)
		store_close(&s);
	*out = s;
	return st;
}

void store_close(struct store **s)
{
	if (*s == NULL)
		return;
	sqlite3_close_v2((*s)->db);
	qb_free(*s);
	*s = NULL;
}

enum qb_status store_begin(struct store *s, const char *use_case, struct qb_error *e)
{
	CHECK(s->in_use_case == NULL);
	enum qb_status st = store_exec(s->db, "BEGIN IMMEDIATE", e);
	if (st == QB_OK)
		s->in_use_case = use_case;
	return st;
}

enum qb_status store_commit(struct store *s, struct qb_error *e)
{
	CHECK(s->in_use_case != NULL);
	enum qb_status st = store_exec(s->db, "COMMIT", e);
	if (st == QB_OK)
		s->in_use_case = NULL;
	return st;
}

void store_rollback(struct store *s)
{
	if (s->in_use_case == NULL)
		return;
	(void)sqlite3_exec(s->db, "ROLLBACK", NULL, NULL, NULL);
	s->in_use_case = NULL;
}

struct query q_begin(struct store *s, const char *sql, struct qb_error *e)
{
	struct query q = {.s = s, .next = 1, .e = e};
	if (sqlite3_prepare_v2(s->db, sql, -1, &q.stmt, NULL) != SQLITE_OK)
		q.status = db_fail(s->db, e);
	return q;
}

static void bound(struct query *q, int code)
{
	if (q->status == QB_OK && code != SQLITE_OK)
		q->status = db_fail(q->s->db, q->e);
	q->next++;
}

void q_blob(struct query *q, const void *p, size_t n)
{
	/* A NULL pointer would bind SQL NULL; an empty blob is meant. */
	bound(q, sqlite3_bind_blob64(q->stmt, q->next, n > 0 ? p : "", n, SQLITE_STATIC));
}

void q_int(struct query *q, int64_t v)
{
	bound(q, sqlite3_bind_int64(q->stmt, q->next, v));
}

void q_text(struct query *q, const char *v)
{
	bound(q, sqlite3_bind_text(q->stmt, q->next, v, -1, SQLITE_STATIC));
}

bool q_row(struct query *q)
{
	if (q->status != QB_OK)
		return false;
	int code = sqlite3_step(q->stmt);
	if (code != SQLITE_ROW && code != SQLITE_DONE)
		q->status = db_fail(q->s->db, q->e);
	return code == SQLITE_ROW;
}

enum qb_status q_done(struct query *q)
{
	bool row = q_row(q);
	CHECK(!row);
	return q_end(q);
}

enum qb_status q_end(struct query *q)
{
	sqlite3_finalize(q->stmt);
	q->stmt = NULL;
	return q->status;
}

int64_t q_col_int(struct query *q, int col)
{
	return sqlite3_column_int64(q->stmt, col);
}

const char *q_col_text(struct query *q, int col)
{
	const char *t = (const char *)sqlite3_column_text(q->stmt, col);
	return t != NULL ? t : "";
}

const uint8_t *q_col_blob(struct query *q, int col, size_t *n)
{
	const uint8_t *p = sqlite3_column_blob(q->stmt, col);
	*n = (size_t)sqlite3_column_bytes(q->stmt, col);
	return p != NULL ? p : (const uint8_t *)"";
}

void q_col_copy(struct query *q, int col, void *out, size_t n)
{
	size_t have;
	const uint8_t *p = q_col_blob(q, col, &have);
	if (have == n)
		memcpy(out, p, n);
	else
		q->status = qb_fail(q->e, QB_FAULT, "store", "restore a backup",
		                    "a stored value has %zu bytes, not %zu", have, n);
}
