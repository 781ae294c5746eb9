/* The home: private or refused, a service pinned once, keys that are never overwritten and replaced whole. */
#include "client/link/home.h"

#include "tests/hex.h"

#include <stdio.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"

static char dir[64];
static const uint8_t key_a[32] = {1}, key_b[32] = {2};

static int enter(void **state)
{
	(void)state;
	(void)snprintf(dir, sizeof dir, "/tmp/qb-home-XXXXXX");
	return secret_setup(NULL) == QB_OK && mkdtemp(dir) != NULL ? 0 : -1;
}

static int leave(void **state)
{
	(void)state;
	char *command = text_printf("rm -rf %s", dir);
	int bad = system(command);
	qb_free(command);
	return bad;
}

static struct home opened(void)
{
	struct home h;
	assert_int_equal(home_open(dir, false, &h, NULL), QB_OK);
	return h;
}

static void a_home_that_others_can_read_is_refused(void **state)
{
	struct home h;
	struct qb_error e = {0};
	(void)state;
	assert_int_equal(chmod(dir, 0750), 0);
	assert_int_equal(home_open(dir, false, &h, &e), QB_REFUSED);
	assert_int_equal(chmod(dir, 0700), 0);
	h = opened();
	home_close(&h);
}

static void a_service_is_pinned_once(void **state)
{
	struct qb_error e = {0};
	(void)state;
	struct home h = opened();
	assert_int_equal(home_pin(&h, "http://127.0.0.1:20001", key_a, NULL), QB_OK);
	/* its address may change, its key may not */
	assert_int_equal(home_pin(&h, "http://127.0.0.1:20002", key_a, NULL), QB_OK);
	assert_int_equal(home_pin(&h, "http://127.0.0.1:20002", key_b, &e), QB_CRYPTO);
	home_close(&h);
	h = opened();
	assert_string_equal(h.url, "http://127.0.0.1:20002");
	assert_memory_equal(h.service_key, key_a, 32);
	assert_int_equal(home_pin(&h, "http://127.0.0.1:20002", key_b, &e), QB_CRYPTO);
	home_close(&h);
}

static void keys_are_never_overwritten_and_are_replaced_whole(void **state)
{
	struct party_key first, second, staged;
	uint8_t id[16];
	struct qb_error e = {0};
	(void)state;
	party_key_new(&first);
	party_key_new(&second);
	struct home h = opened();
	h.passphrase = qb_strdup("rehearsal only");
	assert_int_equal(home_key_new(&h, "ines", &first, KEYFILE_INTERACTIVE, NULL), QB_OK);
	assert_int_equal(home_key_new(&h, "ines", &second, KEYFILE_INTERACTIVE, &e), QB_REFUSED);
	memcpy(id, h.key_id, 16);
	assert_int_equal(home_keys_staged(&h, true, &staged, NULL), QB_OK);
	assert_null(staged.seed);
	assert_int_equal(home_keys_stage(&h, &second, NULL), QB_OK);
	home_close(&h);

	/* a crash here leaves the old keys in force and the new ones staged */
	h = opened();
	assert_memory_equal(h.key_id, id, 16);
	h.passphrase = qb_strdup("rehearsal only");
	assert_int_equal(home_unlock(&h, NULL, true, NULL), QB_OK);
	assert_int_equal(home_keys_staged(&h, true, &staged, NULL), QB_OK);
	assert_non_null(staged.seed);
	party_key_free(&staged);
	assert_int_equal(home_keys_swap(&h, NULL), QB_OK);
	home_close(&h);

	h = opened();
	assert_memory_not_equal(h.key_id, id, 16);
	assert_string_equal(h.name, "ines");
	h.passphrase = qb_strdup("wrong");
	assert_int_equal(home_unlock(&h, NULL, true, &e), QB_CRYPTO);
	home_close(&h);
	h = opened();
	h.passphrase = qb_strdup("rehearsal only");
	assert_int_equal(home_unlock(&h, NULL, true, NULL), QB_OK);
	/* a key file of the quick level is for rehearsals */
	home_close(&h);
	h = opened();
	h.passphrase = qb_strdup("rehearsal only");
	assert_int_equal(home_unlock(&h, NULL, false, &(struct qb_error){0}), QB_REFUSED);
	home_close(&h);
	party_key_free(&first);
	party_key_free(&second);
}

static void a_passphrase_file_is_private_and_not_empty(void **state)
{
	struct qb_error e = {0};
	(void)state;
	struct home h = opened();
	char *path = home_path(&h, "words");
	assert_int_equal(file_write(path, 0640, "secret\n", 7, NULL), QB_OK);
	assert_int_equal(home_passphrase(&h, path, false, &e), QB_REFUSED);
	assert_int_equal(file_write(path, 0600, "\n", 1, NULL), QB_OK);
	e = (struct qb_error){0};
	assert_int_equal(home_passphrase(&h, path, false, &e), QB_FORMAT);
	assert_int_equal(file_write(path, 0600, "secret\nmore\n", 12, NULL), QB_OK);
	assert_int_equal(home_passphrase(&h, path, false, NULL), QB_OK);
	assert_string_equal(h.passphrase, "secret");
	qb_free(path);
	home_close(&h);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup_teardown(a_home_that_others_can_read_is_refused, enter, leave),
	    cmocka_unit_test_setup_teardown(a_service_is_pinned_once, enter, leave),
	    cmocka_unit_test_setup_teardown(keys_are_never_overwritten_and_are_replaced_whole, enter, leave),
	    cmocka_unit_test_setup_teardown(a_passphrase_file_is_private_and_not_empty, enter, leave),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
