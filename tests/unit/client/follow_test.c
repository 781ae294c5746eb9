/* Following a ledger: a service that goes on honestly, one that is set back, forks, withholds, or is found out by
 * others. */
#include "client/link/follow.h"

#include "tests/unit/client/ledger_service.h"

static struct ledger_service s;
static struct party_key admin, ines, noor;

static int enter(void **state)
{
	(void)state;
	assert_int_equal(secret_setup(NULL), QB_OK);
	ledger_service_open(&s);
	party_key_new(&admin);
	party_key_new(&ines);
	party_key_new(&noor);
	history_begin(&s.here, &admin);
	history_enrol(&s.here, "custodian", "ines", &ines);
	history_enrol(&s.here, "analyst", "noor", &noor);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	party_key_free(&admin);
	party_key_free(&ines);
	party_key_free(&noor);
	ledger_service_close(&s);
	return 0;
}

static void update(enum qb_status want, const char *words)
{
	struct follow f;
	struct qb_error e = {0};
	enum qb_status st = follow_open(&f, &s.home, &e);
	if (st == QB_OK)
		st = follow_update(&f, &s.link, &e);
	if (st != want || (words != NULL && strstr(e.what, words) == NULL))
		print_error("%s\n", e.what);
	assert_int_equal(st, want);
	if (words != NULL)
		assert_non_null(strstr(e.what, words));
	follow_close(&f);
}

static size_t copy_size(void)
{
	struct stat st;
	char *path = home_path(&s.home, "ledger.bin");
	size_t n = stat(path, &st) == 0 ? (size_t)st.st_size : 0;
	qb_free(path);
	return n;
}

static void what_is_new_is_appended_and_read_again(void **state)
{
	struct follow f;
	(void)state;
	update(QB_OK, NULL);
	size_t first = copy_size();
	history_invite(&s.here, &admin, "guest-a");
	history_invite(&s.here, &admin, "guest-b");
	update(QB_OK, NULL);
	assert_true(copy_size() > first);
	assert_int_equal(follow_open(&f, &s.home, NULL), QB_OK);
	assert_int_equal(f.n, 6);
	assert_int_equal(f.head.size, 6);
	assert_int_equal(f.view.n_parties, 3);
	follow_close(&f);
	assert_false(home_files("evidence*"));
}

static void a_leaf_that_a_crash_cut_is_fetched_again(void **state)
{
	(void)state;
	update(QB_OK, NULL);
	char *path = home_path(&s.home, "ledger.bin");
	size_t whole = copy_size();
	assert_int_equal(truncate(path, (off_t)whole - 7), 0);
	/* the head remembers that there was more */
	s.show = 3;
	update(QB_CRYPTO, "rolled back");
	s.show = 0;
	update(QB_OK, NULL);
	assert_int_equal(copy_size(), whole);
	qb_free(path);
}

static void an_altered_copy_is_refused(void **state)
{
	struct follow f;
	struct buf b = {0};
	(void)state;
	update(QB_OK, NULL);
	char *path = home_path(&s.home, "ledger.bin");
	assert_int_equal(file_read(path, 1 << 20, &b, NULL), QB_OK);
	b.data[4 + 60] ^= 1; /* in the body of the first leaf */
	assert_int_equal(file_write(path, 0600, b.data, b.len, NULL), QB_OK);
	assert_int_not_equal(follow_open(&f, &s.home, NULL), QB_OK);
	b.data[4 + 60] ^= 1;
	assert_int_equal(file_write(path, 0600, b.data, b.len, NULL), QB_OK);
	assert_int_equal(follow_open(&f, &s.home, NULL), QB_OK);
	follow_close(&f);
	buf_free(&b);
	qb_free(path);
}

static void a_ledger_of_another_head_is_refused(void **state)
{
	struct follow f;
	struct qb_error e = {0};
	(void)state;
	update(QB_OK, NULL);
	history_copy(&s.there, &s.here, 3);
	history_invite(&s.there, &admin, "guest-x");
	struct head h = history_head(&s.there, 4);
	assert_int_equal(heads_keep(&s.home, &h, NULL), QB_OK);
	assert_int_equal(follow_open(&f, &s.home, &e), QB_CRYPTO);
	assert_non_null(strstr(e.what, "head.txt does not belong"));
}

static void a_service_set_back_is_refused(void **state)
{
	(void)state;
	history_invite(&s.here, &admin, "guest-a");
	update(QB_OK, NULL);
	s.show = 4;
	update(QB_CRYPTO, "rolled back");
	assert_true(home_files("evidence-5-4.json"));
	char *path = home_path(&s.home, "ledger.bin");
	assert_int_equal(unlink(path), 0);
	qb_free(path);
	update(QB_CRYPTO, "rolled back");
}

/* The forked leaves are signed by everybody who should: only the root tells. */
static void another_history_is_refused_and_not_kept(void **state)
{
	(void)state;
	history_copy(&s.there, &s.here, 4);
	history_invite(&s.here, &admin, "guest-a");
	update(QB_OK, NULL);
	size_t before = copy_size();
	for (const char *const *name = (const char *const[]){"guest-x", "guest-y", "guest-z", NULL}; *name != NULL;
	     name++) {
		history_invite(&s.there, &admin, *name);
		s.shown = &s.there;
		update(QB_CRYPTO, "two histories");
		assert_int_equal(copy_size(), before);
	}
	assert_true(home_files("evidence-5-5.json"));
	assert_true(home_files("evidence-5-7.json"));
	s.shown = &s.here;
	update(QB_OK, NULL);
}

static void withheld_leaves_are_refused(void **state)
{
	(void)state;
	s.withhold = true;
	update(QB_CRYPTO, "withholds leaf 0");
}

static void cosigned_by(const struct history *x, uint64_t n, const struct party_key *key)
{
	struct head h = history_head(x, n);
	struct head_signature by;
	head_cosign(&h, key->seed, &by);
	assert_int_equal(head_add(&h, &by, NULL), QB_OK);
	json_array_append_new(s.cosigned, head_json(&h));
}

static void heads_of_others_are_of_this_ledger(void **state)
{
	struct follow f;
	(void)state;
	history_invite(&s.here, &admin, "guest-a");
	cosigned_by(&s.here, 4, &ines);
	cosigned_by(&s.here, 3, &noor);
	assert_int_equal(follow_open(&f, &s.home, NULL), QB_OK);
	assert_int_equal(follow_update(&f, &s.link, NULL), QB_OK);
	assert_int_equal(f.n_others, 2);
	assert_int_equal(f.other[0].size, 3);
	assert_int_equal(f.other[1].size, 4);
	follow_close(&f);
}

static void a_head_of_others_from_another_history_is_found(void **state)
{
	(void)state;
	history_copy(&s.there, &s.here, 3);
	history_enrol(&s.there, "custodian", "okoro", &noor);
	history_invite(&s.here, &admin, "guest-a");
	update(QB_OK, NULL);
	cosigned_by(&s.there, 4, &ines);
	update(QB_CRYPTO, "two histories");
	assert_true(home_files("evidence-5-4.json"));
	/* the next command says it again, and does not go on from there */
	history_invite(&s.here, &admin, "guest-b");
	update(QB_CRYPTO, "two histories");
}

static void a_head_of_others_beyond_what_is_shown_is_found(void **state)
{
	(void)state;
	history_invite(&s.here, &admin, "guest-a");
	cosigned_by(&s.here, 5, &ines);
	s.show = 4;
	update(QB_CRYPTO, "withholds the rest");
}

static void false_cosignatures_and_missing_lists_are_refused(void **state)
{
	struct head_signature by;
	(void)state;
	update(QB_OK, NULL);
	struct head h = history_head(&s.here, 3);
	head_cosign(&h, ines.seed, &by);
	by.signature[0] ^= 1;
	assert_int_equal(head_add(&h, &by, NULL), QB_OK);
	json_array_append_new(s.cosigned, head_json(&h));
	update(QB_CRYPTO, "is false");
	json_array_clear(s.cosigned);
	h = history_head(&s.here, 3);
	h.root.b[0] ^= 1; /* not what the service signed */
	json_array_append_new(s.cosigned, head_json(&h));
	update(QB_CRYPTO, NULL);
	json_array_clear(s.cosigned);
	json_array_append_new(s.cosigned, json_string("nonsense"));
	update(QB_FORMAT, NULL);
	json_decref(s.cosigned);
	s.cosigned = NULL;
	update(QB_FORMAT, "which heads others cosigned");
	s.cosigned = json_array();
	update(QB_OK, NULL);
}

static void one_cosigns_the_newest_and_where_another_stopped(void **state)
{
	struct follow f;
	(void)state;
	history_invite(&s.here, &admin, "guest-a");
	cosigned_by(&s.here, 3, &noor);
	cosigned_by(&s.here, 4, &noor);
	assert_int_equal(follow_open(&f, &s.home, NULL), QB_OK);
	assert_int_equal(follow_update(&f, &s.link, NULL), QB_OK);
	struct party_public pub;
	party_key_public(&ines, &pub);
	s.home.key = ines;
	sign_key_id(pub.sign, s.home.key_id);
	assert_int_equal(follow_cosign(&f, &s.link, NULL), QB_OK);
	assert_int_equal(s.posted, 2);
	assert_int_equal(s.posted_size[0], 5);
	assert_int_equal(s.posted_size[1], 4);
	assert_int_equal(follow_cosign(&f, &s.link, NULL), QB_OK);
	assert_int_equal(s.posted, 2); /* once each */
	follow_close(&f);
	s.home.key = (struct party_key){0};
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup_teardown(what_is_new_is_appended_and_read_again, enter, leave),
	    cmocka_unit_test_setup_teardown(a_leaf_that_a_crash_cut_is_fetched_again, enter, leave),
	    cmocka_unit_test_setup_teardown(an_altered_copy_is_refused, enter, leave),
	    cmocka_unit_test_setup_teardown(a_ledger_of_another_head_is_refused, enter, leave),
	    cmocka_unit_test_setup_teardown(a_service_set_back_is_refused, enter, leave),
	    cmocka_unit_test_setup_teardown(another_history_is_refused_and_not_kept, enter, leave),
	    cmocka_unit_test_setup_teardown(withheld_leaves_are_refused, enter, leave),
	    cmocka_unit_test_setup_teardown(heads_of_others_are_of_this_ledger, enter, leave),
	    cmocka_unit_test_setup_teardown(a_head_of_others_from_another_history_is_found, enter, leave),
	    cmocka_unit_test_setup_teardown(a_head_of_others_beyond_what_is_shown_is_found, enter, leave),
	    cmocka_unit_test_setup_teardown(false_cosignatures_and_missing_lists_are_refused, enter, leave),
	    cmocka_unit_test_setup_teardown(one_cosigns_the_newest_and_where_another_stopped, enter, leave),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
