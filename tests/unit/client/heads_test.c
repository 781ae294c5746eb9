/* Evidence of two histories: what it proves by itself, and what forged evidence does not. */
#include "client/link/heads.h"

#include "tests/unit/client/ledger_service.h"

static struct ledger_service s;
static struct party_key admin;
static struct follow f;

static int enter(void **state)
{
	(void)state;
	assert_int_equal(secret_setup(NULL), QB_OK);
	ledger_service_open(&s);
	party_key_new(&admin);
	history_begin(&s.here, &admin);
	history_copy(&s.there, &s.here, 2);
	for (int i = 0; i < 9; i++) {
		char name[20];
		(void)snprintf(name, sizeof name, "guest-%d", i);
		history_invite(&s.here, &admin, name);
		(void)snprintf(name, sizeof name, "other-%d", i);
		history_invite(&s.there, &admin, name);
	}
	assert_int_equal(follow_open(&f, &s.home, NULL), QB_OK);
	assert_int_equal(follow_update(&f, &s.link, NULL), QB_OK);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	follow_close(&f);
	party_key_free(&admin);
	ledger_service_close(&s);
	return 0;
}

/* Compares, reads the evidence that was written, judges it. */
static enum qb_status compare_and_judge(const struct head *theirs, char *why, json_t **doc)
{
	struct qb_error e = {0};
	struct buf b = {0};
	uint8_t key[32];
	char name[60];
	assert_int_equal(heads_compare(&f, &s.home, theirs, "okoro", &e), QB_CRYPTO);
	(void)snprintf(name, sizeof name, "evidence-%d-%d.json", (int)f.head.size, (int)theirs->size);
	assert_non_null(strstr(e.mend, name));
	char *path = home_path(&s.home, name);
	assert_int_equal(file_read(path, 1 << 20, &b, NULL), QB_OK);
	enum qb_status st = heads_evidence_check((const char *)b.data, b.len, key, why, NULL);
	assert_int_equal(json_read((const char *)b.data, b.len, "evidence", doc, NULL), QB_OK);
	if (st == QB_OK)
		assert_memory_equal(key, s.key, 32);
	buf_free(&b);
	qb_free(path);
	return st;
}

static enum qb_status judge(const json_t *doc)
{
	uint8_t key[32];
	char why[200], *text = json_pretty(doc);
	enum qb_status st = heads_evidence_check(text, strlen(text), key, why, NULL);
	qb_free(text);
	return st;
}

static void every_earlier_head_of_this_ledger_agrees(void **state)
{
	(void)state;
	for (uint64_t n = 1; n <= s.here.n; n++) {
		struct head h = history_head(&s.here, n);
		assert_int_equal(heads_compare(&f, &s.home, &h, "okoro", NULL), QB_OK);
	}
	assert_false(home_files("evidence*"));
}

static void every_head_of_another_history_is_evidence(void **state)
{
	char why[200];
	(void)state;
	for (uint64_t n = 3; n <= s.there.n; n++) {
		struct head h = history_head(&s.there, n);
		json_t *doc;
		assert_int_equal(compare_and_judge(&h, why, &doc), QB_OK);
		assert_string_equal(json_string_value(json_object_get(doc, "evidence")), HEADS_TWO_HISTORIES);
		json_decref(doc);
	}
}

static void forged_evidence_proves_nothing(void **state)
{
	static const char *const members[] = {"service_key", "ours", "theirs", "prefix_root", "consistency"};
	struct head h = history_head(&s.there, 6), mine = history_head(&s.here, 6);
	char why[200];
	json_t *doc, *spoilt;
	(void)state;
	assert_int_equal(compare_and_judge(&h, why, &doc), QB_OK);
	for (size_t i = 0; i < sizeof members / sizeof members[0]; i++) {
		spoilt = json_deep_copy(doc);
		json_object_del(spoilt, members[i]);
		assert_int_not_equal(judge(spoilt), QB_OK);
		json_decref(spoilt);
	}
	/* two heads of one history, with the proof that goes with them */
	spoilt = json_deep_copy(doc);
	json_object_set_new(spoilt, "theirs", head_json(&mine));
	assert_int_equal(judge(spoilt), QB_NO);
	/* a prefix that the larger head does not have */
	json_object_set(spoilt, "theirs", json_object_get(doc, "theirs"));
	json_object_set_new(spoilt, "prefix_root", json_hex_new(mine.service.signature, 32));
	assert_int_equal(judge(spoilt), QB_NO);
	json_object_set_new(spoilt, "ours", json_copy(json_object_get(doc, "theirs")));
	assert_int_equal(judge(spoilt), QB_NO);
	json_decref(spoilt);
	/* signed by somebody else, though it names the service */
	struct secret *seed = secret_random(32);
	head_sign(&h, seed);
	spoilt = json_deep_copy(doc);
	json_object_set_new(spoilt, "theirs", head_json(&h));
	assert_int_equal(judge(spoilt), QB_CRYPTO);
	secret_free(&seed);
	json_decref(spoilt);
	json_decref(doc);
}

static void a_larger_head_proves_something_only_when_it_is_the_older_one(void **state)
{
	char why[200];
	json_t *doc;
	(void)state;
	for (int i = 0; i < 3; i++)
		history_invite(&s.there, &admin, "more");
	struct head h = history_head(&s.there, s.there.n);
	assert_int_equal(compare_and_judge(&h, why, &doc), QB_NO);
	assert_string_equal(json_string_value(json_object_get(doc, "evidence")), HEADS_WITHHELD);
	json_decref(doc);
	s.there.time_ns -= INT64_C(3600) * 1000000000;
	h = history_head(&s.there, s.there.n);
	assert_int_equal(compare_and_judge(&h, why, &doc), QB_OK);
	assert_string_equal(json_string_value(json_object_get(doc, "evidence")), HEADS_ROLLED_BACK);
	assert_non_null(strstr(why, "signed later has fewer leaves"));
	json_decref(doc);
}

static void nonsense_is_refused(void **state)
{
	uint8_t key[32];
	char why[200];
	(void)state;
	for (const char *const *t = (const char *const[]){"", "{}", "[]", "{\"service_key\":1}", NULL}; *t != NULL; t++)
		assert_int_not_equal(heads_evidence_check(*t, strlen(*t), key, why, NULL), QB_OK);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup_teardown(every_earlier_head_of_this_ledger_agrees, enter, leave),
	    cmocka_unit_test_setup_teardown(every_head_of_another_history_is_evidence, enter, leave),
	    cmocka_unit_test_setup_teardown(forged_evidence_proves_nothing, enter, leave),
	    cmocka_unit_test_setup_teardown(a_larger_head_proves_something_only_when_it_is_the_older_one, enter, leave),
	    cmocka_unit_test(nonsense_is_refused),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
