/* Many records at once: the same results for every number of threads, and the first bad one named. */
#include "tests/unit/custody/scene.h"

#include <stdio.h>

#include "server/base/alloc.h"
#include "server/custody/batch.h"

#define N 37

struct many {
	struct scene s;
	struct buf bytes[N];
	struct record rec[N];
	const struct record *list[N];
	struct batch b;
	uint8_t *part[3];
	struct batch_set set[3];
};

static const enum record_type types[] = {RECORD_SLOT, RECORD_PLAY_NOTE, RECORD_CLAIM};

static void content_of(int r, char out[static 40])
{
	(void)snprintf(out, 40, "content of record %d", r);
}

static struct many *many_make(void)
{
	struct many *m = QB_NEW(struct many);
	scene_make(&m->s, 5, 3);
	for (int r = 0; r < N; r++) {
		char text[40];
		content_of(r, text);
		scene_seal(&m->s, types[r % 3], (uint64_t)r, text, &m->bytes[r], &m->rec[r]);
		m->list[r] = &m->rec[r];
	}
	m->b = (struct batch){.group = &m->s.g, .record = m->list, .n = N, .threads = 1};
	memset(m->b.leaf, 9, sizeof m->b.leaf);
	for (uint32_t i = 0; i < 3; i++) {
		m->part[i] = qb_alloc(N, PARTIAL_BYTES);
		assert_int_equal(batch_make(&m->b, 2 * i + 1, m->s.share[2 * i], m->part[i], NULL, NULL), QB_OK);
		m->set[i] = (struct batch_set){2 * i + 1, m->part[i]};
	}
	return m;
}

static void many_free(struct many *m)
{
	for (int r = 0; r < N; r++)
		buf_free(&m->bytes[r]);
	for (int i = 0; i < 3; i++)
		qb_free(m->part[i]);
	scene_free(&m->s);
	qb_free(m);
}

static void every_number_of_threads_opens_the_same(void **state)
{
	struct many *m = many_make();
	(void)state;
	for (int threads = 0; threads <= 5; threads++) {
		struct buf content[N] = {{0}};
		bool opens[N] = {false};
		m->b.threads = threads;
		assert_int_equal(batch_open(&m->b, m->set, 3, content, opens, NULL, NULL), QB_OK);
		for (int r = 0; r < N; r++) {
			char text[40];
			content_of(r, text);
			assert_true(opens[r]);
			assert_int_equal(content[r].len, strlen(text));
			assert_memory_equal(content[r].data, text, strlen(text));
			buf_wipe(&content[r]);
		}
		for (int i = 0; i < 3; i++)
			assert_int_equal(batch_check(&m->b, &m->set[i], NULL, NULL), QB_OK);
	}
	many_free(m);
}

static void made_in_threads_every_opening_is_right(void **state)
{
	struct many *m = many_make();
	uint8_t *out = qb_alloc(N, PARTIAL_BYTES);
	struct batch_set set = {2, out};
	(void)state;
	m->b.threads = 4;
	assert_int_equal(batch_make(&m->b, 2, m->s.share[1], out, NULL, NULL), QB_OK);
	assert_int_equal(batch_check(&m->b, &set, NULL, NULL), QB_OK);
	/* another's share is no share of number 2 */
	assert_int_equal(batch_make(&m->b, 2, m->s.share[0], out, NULL, NULL), QB_CRYPTO);
	qb_free(out);
	many_free(m);
}

static void the_first_bad_one_is_named(void **state)
{
	struct many *m = many_make();
	(void)state;
	for (int threads = 1; threads <= 3; threads++) {
		struct buf content[N] = {{0}};
		bool opens[N];
		struct qb_error e = {0};
		size_t bad = 99;
		m->b.threads = threads;
		m->part[1][11 * PARTIAL_BYTES + 150] ^= 1;
		m->part[1][30 * PARTIAL_BYTES + 150] ^= 1;
		assert_int_equal(batch_open(&m->b, m->set, 3, content, opens, &bad, &e), QB_CRYPTO);
		assert_int_equal(bad, 11);
		assert_non_null(strstr(e.where, "3"));
		for (int r = 0; r < N; r++)
			buf_wipe(&content[r]);
		bad = 99;
		assert_int_equal(batch_check(&m->b, &m->set[1], &bad, &e), QB_CRYPTO);
		assert_int_equal(bad, 11);
		assert_int_equal(batch_check(&m->b, &m->set[0], &bad, &e), QB_OK);
		m->part[1][11 * PARTIAL_BYTES + 150] ^= 1;
		m->part[1][30 * PARTIAL_BYTES + 150] ^= 1;
	}
	many_free(m);
}

static void sets_of_others_and_too_few_are_refused(void **state)
{
	struct many *m = many_make();
	struct buf content[N] = {{0}};
	bool opens[N];
	(void)state;
	m->b.threads = 2;
	m->set[2].i = 4;
	assert_int_equal(batch_check(&m->b, &m->set[2], NULL, NULL), QB_CRYPTO);
	m->set[2].i = 5;
	assert_int_equal(batch_open(&m->b, m->set, 2, content, opens, NULL, NULL), QB_CRYPTO);
	m->set[1] = m->set[0]; /* one custodian twice */
	assert_int_equal(batch_open(&m->b, m->set, 3, content, opens, NULL, NULL), QB_CRYPTO);
	m->b.leaf[0] ^= 1; /* another request */
	assert_int_equal(batch_check(&m->b, &m->set[2], NULL, NULL), QB_CRYPTO);
	m->b.n = 0;
	assert_int_equal(batch_check(&m->b, &m->set[2], NULL, NULL), QB_OK);
	many_free(m);
}

static void records_are_checked_in_threads(void **state)
{
	struct many *m = many_make();
	const struct buf *bytes[N];
	struct record rec[N];
	(void)state;
	for (int r = 0; r < N; r++)
		bytes[r] = &m->bytes[r];
	for (int threads = 0; threads <= 3; threads++) {
		size_t bad = 99;
		memset(rec, 0, sizeof rec);
		assert_int_equal(batch_records(&m->s.g, bytes, N, threads, rec, &bad, NULL), QB_OK);
		for (int r = 0; r < N; r++) {
			assert_memory_equal(rec[r].id, m->rec[r].id, RECORD_ID_BYTES);
			assert_ptr_equal(rec[r].bytes, bytes[r]->data);
		}
		assert_int_equal(bad, 99);
		m->bytes[20].data[200] ^= 1;
		m->bytes[9].data[300] ^= 1;
		assert_int_equal(batch_records(&m->s.g, bytes, N, threads, rec, &bad, NULL), QB_CRYPTO);
		assert_int_equal(bad, 9);
		m->bytes[20].data[200] ^= 1;
		m->bytes[9].data[300] ^= 1;
	}
	assert_int_equal(batch_records(&m->s.g, bytes, 0, 2, rec, NULL, NULL), QB_OK);
	many_free(m);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(records_are_checked_in_threads),         cmocka_unit_test(every_number_of_threads_opens_the_same),
    cmocka_unit_test(made_in_threads_every_opening_is_right), cmocka_unit_test(the_first_bad_one_is_named),
    cmocka_unit_test(sets_of_others_and_too_few_are_refused),
};
SCENE_MAIN(tests)
