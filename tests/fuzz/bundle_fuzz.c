/*
 * A bundle from anybody: a file whose bytes were changed anywhere, or tables of the format that hold any rows. What is
 * taken has all its parts; the rest is refused with words.
 */
#include <sqlite3.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/bundle_file.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/base/alloc.h"
#include "server/ledger/bundle_schema.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static char path[] = "/tmp/qb-fuzz-bundle-XXXXXX";
static struct buf valid; /* a file with one row in every table */

static void forget(void)
{
	unlink(path);
}

static sqlite3 *open_file(void)
{
	sqlite3 *db;
	char *sql;
	CHECK(truncate(path, 0) == 0 && sqlite3_open(path, &db) == SQLITE_OK);
	CHECK(sqlite3_exec(db, "PRAGMA journal_mode=OFF; PRAGMA synchronous=OFF; PRAGMA page_size=512; BEGIN", NULL,
	                   NULL, NULL) == SQLITE_OK);
	sql = text_printf("PRAGMA application_id=%d", BUNDLE_APPLICATION_ID);
	CHECK(sqlite3_exec(db, sql, NULL, NULL, NULL) == SQLITE_OK);
	qb_free(sql);
	for (const struct bundle_table *t = bundle_tables; t->name != NULL; t++) {
		sql = text_printf("CREATE TABLE %s %s", t->name, t->columns);
		CHECK(sqlite3_exec(db, sql, NULL, NULL, NULL) == SQLITE_OK);
		qb_free(sql);
	}
	return db;
}

static void setup(void)
{
	int fd = mkstemp(path);
	CHECK(fd >= 0 && close(fd) == 0 && atexit(forget) == 0);
	sqlite3 *db = open_file();
	CHECK(sqlite3_exec(
	          db,
	          "INSERT INTO about VALUES('format','" BUNDLE_FORMAT "'),('written-by','1.0'),"
	          "('campaign','000102030405060708090a0b0c0d0e0f');"
	          "INSERT INTO heads VALUES('quietbell/1/head'); INSERT INTO leaves VALUES(0,x'51424c31'),(1,x'00');"
	          "INSERT INTO hidden VALUES(zeroblob(64),0,1,2,zeroblob(64),zeroblob(32),x'7b7d',zeroblob(64),"
	          "zeroblob(16)); INSERT INTO records VALUES(0,1,0,'tarn',zeroblob(16),zeroblob(64),x'51425231');"
	          "INSERT INTO recipes VALUES(0,'tarn',0,x'51425931'); INSERT INTO prekeys VALUES('tarn',0,x'00');"
	          "INSERT INTO shares VALUES(zeroblob(16),'ines',x'00'); COMMIT",
	          NULL, NULL, NULL) == SQLITE_OK);
	sqlite3_close(db);
	CHECK(file_read(path, 1 << 20, &valid, NULL) == QB_OK);
}

/* Bytes of the valid file changed in the places that the input names. */
static void altered(const uint8_t *p, size_t n)
{
	FILE *f = fopen(path, "wb");
	struct buf b = {0};
	CHECK(f != NULL);
	buf_put(&b, valid.data, valid.len);
	for (size_t i = 0; i + 2 < n; i += 3)
		b.data[((size_t)p[i] << 8 | p[i + 1]) % b.len] ^= p[i + 2];
	CHECK(fwrite(b.data, 1, b.len, f) == b.len && fclose(f) == 0);
	buf_free(&b);
}

static uint8_t take(const uint8_t **p, const uint8_t *end)
{
	return *p < end ? *(*p)++ : 0;
}

static void bind(sqlite3_stmt *s, int column, const uint8_t **p, const uint8_t *end)
{
	static const int usual[8] = {0, 1, 16, 32, 64, 63, 64, 236};
	uint8_t kind = take(p, end), b = take(p, end);
	size_t left = (size_t)(end - *p), n = b < left ? b : left;
	if (kind % 4 == 0)
		sqlite3_bind_int64(s, column, b < 240 ? b % 8 - 1 : b % 2 == 0 ? INT64_MAX - b : INT64_MIN + b);
	else if (kind % 4 == 1)
		sqlite3_bind_text(s, column, (const char *)*p, (int)n, SQLITE_TRANSIENT);
	else if (kind % 4 == 2)
		sqlite3_bind_zeroblob(s, column, usual[b % 8]);
	else
		sqlite3_bind_blob(s, column, n > 0 ? (const void *)*p : "", (int)n, SQLITE_TRANSIENT);
	if (kind % 4 == 1 || kind % 4 == 3)
		*p += n;
}

/* The format's tables with rows of the input's. */
static void filled(const uint8_t *p, size_t n)
{
	static const char *const insert[8] = {"INSERT OR IGNORE INTO about VALUES(?,?)",
	                                      "INSERT OR IGNORE INTO heads VALUES(?)",
	                                      "INSERT OR IGNORE INTO leaves VALUES(?,?)",
	                                      "INSERT OR IGNORE INTO hidden VALUES(?,?,?,?,?,?,?,?,?)",
	                                      "INSERT OR IGNORE INTO records VALUES(?,?,?,?,?,?,?)",
	                                      "INSERT OR IGNORE INTO recipes VALUES(?,?,?,?)",
	                                      "INSERT OR IGNORE INTO prekeys VALUES(?,?,?)",
	                                      "INSERT OR IGNORE INTO shares VALUES(?,?,?)"};
	sqlite3 *db = open_file();
	const uint8_t *end = p + n;
	(void)sqlite3_exec(
	    db,
	    "INSERT INTO about VALUES('format','" BUNDLE_FORMAT "'),('written-by','1.0'),"
	    "('campaign','000102030405060708090a0b0c0d0e0f'); INSERT INTO heads VALUES('quietbell/1/head');"
	    "INSERT INTO leaves VALUES(0,x'51424c31')",
	    NULL, NULL, NULL);
	for (int rows = 0; p < end && rows < 20; rows++) {
		sqlite3_stmt *s = NULL;
		CHECK(sqlite3_prepare_v2(db, insert[take(&p, end) % 8], -1, &s, NULL) == SQLITE_OK);
		for (int c = 1; c <= sqlite3_bind_parameter_count(s); c++)
			bind(s, c, &p, end);
		(void)sqlite3_step(s);
		sqlite3_finalize(s);
	}
	(void)sqlite3_exec(db, "COMMIT", NULL, NULL, NULL);
	sqlite3_close(db);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	struct bundle *b = NULL;
	struct qb_error e = {0};
	if (valid.len == 0)
		setup();
	if (size == 0 || data[0] % 2 == 0)
		altered(data + (size > 0), size - (size > 0));
	else
		filled(data + 1, size - 1);
	if (bundle_read(path, &b, &e) == QB_OK) {
		CHECK(b != NULL && b->n_frames > 0 && b->head.len > 0);
		for (size_t i = 0; i < b->records.n; i++)
			CHECK(strlen(b->records.item[i].station) < 64 && b->records.item[i].position == (int64_t)i);
		bundle_free(&b);
	} else {
		CHECK(b == NULL && e.what[0] != '\0');
	}
	return 0;
}
