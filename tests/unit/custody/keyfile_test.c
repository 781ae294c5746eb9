/* Key files: round trips, and the different refusals for a wrong passphrase, damage, tampering and loose permissions.
 */
#include "tests/unit/custody/scene.h"

#include <stdio.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/custody/keyfile.h"

static char dir[64], path[96];

static int enter(void **state)
{
	(void)state;
	snprintf(dir, sizeof dir, "/tmp/keyfile-test-XXXXXX");
	if (mkdtemp(dir) == NULL)
		return -1;
	snprintf(path, sizeof path, "%s/ines.key", dir);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	unlink(path);
	return rmdir(dir);
}

static void party_keys_come_back(void **state)
{
	(void)state;
	struct party_key key, back;
	struct party_public a, b;
	struct stat st;
	party_key_new(&key);
	assert_int_equal(keyfile_write_party(path, KEYFILE_INTERACTIVE, "correct horse", &key, NULL), QB_OK);
	assert_int_equal(stat(path, &st), 0);
	assert_int_equal(st.st_mode & 07777, 0600);
	assert_int_equal(keyfile_read_party(path, "correct horse", true, &back, NULL), QB_OK);
	party_key_public(&key, &a);
	party_key_public(&back, &b);
	assert_memory_equal(&a, &b, sizeof a);
	party_key_free(&back);
	party_key_free(&key);
}

static void shares_come_back_at_the_moderate_level(void **state)
{
	(void)state;
	struct keyfile_share share = {.epoch = 3, .index = 2, .share = secret_new(SCALAR_BYTES)}, back;
	memcpy(share.campaign, scene_campaign, sizeof share.campaign);
	memset(share.th, 0x5a, sizeof share.th);
	group_scalar_random(secret_bytes(share.share));
	assert_int_equal(keyfile_write_share(path, KEYFILE_MODERATE, "correct horse", &share, NULL), QB_OK);
	assert_int_equal(keyfile_read_share(path, "correct horse", false, &back, NULL), QB_OK);
	assert_memory_equal(back.campaign, share.campaign, sizeof back.campaign);
	assert_memory_equal(back.th, share.th, sizeof back.th);
	assert_int_equal(back.epoch, 3);
	assert_int_equal(back.index, 2);
	assert_memory_equal(secret_view(back.share), secret_view(share.share), SCALAR_BYTES);
	secret_free(&back.share);
	secret_free(&share.share);
}

static void rehearsal_protection_is_refused_elsewhere(void **state)
{
	(void)state;
	struct secret *payload = secret_from("a secret", 8), *back;
	struct keyfile_info info;
	struct qb_error e = {0};
	assert_int_equal(keyfile_write(path, KEYFILE_SERVICE, KEYFILE_INTERACTIVE, "p", payload, NULL), QB_OK);
	assert_int_equal(keyfile_read(path, KEYFILE_SERVICE, "p", false, &back, &info, &e), QB_REFUSED);
	assert_non_null(strstr(e.what, "rehearsal only"));
	assert_null(back);
	assert_int_equal(keyfile_read(path, KEYFILE_SERVICE, "p", true, &back, &info, NULL), QB_OK);
	assert_true(info.rehearsal_only);
	assert_int_equal(info.type, KEYFILE_SERVICE);
	assert_memory_equal(secret_view(back), "a secret", 8);
	secret_free(&back);
	assert_int_equal(keyfile_read(path, KEYFILE_PARTY, "p", true, &back, NULL, NULL), QB_FORMAT);
	secret_free(&payload);
}

/* The last 16 bytes: what an attacker can recompute, and bit rot can not. */
static void fix_check_sum(struct buf *f)
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/keyfile/check");
	transcript_field(&t, f->data, f->len - 16);
	transcript_end(&t, h);
	memcpy(f->data + f->len - 16, h, 16);
}

static void wrong_passphrase_damage_and_tampering_differ(void **state)
{
	(void)state;
	struct secret *payload = secret_from("a secret", 8), *back;
	struct buf f = {0};
	struct qb_error e = {0};
	assert_int_equal(keyfile_encrypt(KEYFILE_OTHER, KEYFILE_INTERACTIVE, "right", payload, &f, NULL), QB_OK);
	assert_int_equal(keyfile_decrypt(f.data, f.len, KEYFILE_OTHER, "wrong", true, &back, &e), QB_CRYPTO);
	assert_string_equal(e.what, "wrong passphrase");
	for (size_t at = 0; at < f.len; at += 5) { /* damage anywhere: seen before any work is spent */
		f.data[at] ^= 0x10;
		assert_int_equal(keyfile_decrypt(f.data, f.len, KEYFILE_OTHER, "right", true, &back, NULL), QB_FORMAT);
		f.data[at] ^= 0x10;
	}
	for (size_t n = 0; n < f.len; n++)
		assert_int_equal(keyfile_decrypt(f.data, n, KEYFILE_OTHER, "right", true, &back, NULL), QB_FORMAT);
	f.data[KEYFILE_HEADER_BYTES] ^= 1; /* tampered ciphertext with a fresh check sum */
	fix_check_sum(&f);
	e = (struct qb_error){0};
	assert_int_equal(keyfile_decrypt(f.data, f.len, KEYFILE_OTHER, "right", true, &back, &e), QB_CRYPTO);
	assert_non_null(strstr(e.what, "altered"));
	f.data[KEYFILE_HEADER_BYTES] ^= 1;
	f.data[6] = KEYFILE_PARTY; /* passed off as another type: the header is bound */
	fix_check_sum(&f);
	assert_int_equal(keyfile_decrypt(f.data, f.len, KEYFILE_PARTY, "right", true, &back, NULL), QB_CRYPTO);
	f.data[6] = KEYFILE_OTHER;
	f.data[7] = KEYFILE_MODERATE; /* the rehearsal mark taken off */
	fix_check_sum(&f);
	assert_int_equal(keyfile_decrypt(f.data, f.len, KEYFILE_OTHER, "right", false, &back, NULL), QB_CRYPTO);
	f.data[7] = 9;
	fix_check_sum(&f);
	assert_int_equal(keyfile_decrypt(f.data, f.len, KEYFILE_OTHER, "right", true, &back, NULL), QB_FORMAT);
	buf_free(&f);
	secret_free(&payload);
}

static void loose_permissions_are_refused(void **state)
{
	(void)state;
	static const mode_t loose[] = {0640, 0604, 0620, 0602, 0610, 0601, 0777};
	struct secret *payload = secret_from("a secret", 8), *back;
	assert_int_equal(keyfile_write(path, KEYFILE_OTHER, KEYFILE_INTERACTIVE, "p", payload, NULL), QB_OK);
	for (size_t i = 0; i < sizeof loose / sizeof *loose; i++) {
		assert_int_equal(chmod(path, loose[i]), 0);
		assert_int_equal(keyfile_read(path, KEYFILE_OTHER, "p", true, &back, NULL, NULL), QB_REFUSED);
		assert_null(back);
	}
	assert_int_equal(chmod(path, 0400), 0);
	assert_int_equal(keyfile_read(path, KEYFILE_OTHER, "p", true, &back, NULL, NULL), QB_OK);
	secret_free(&back);
	char link[96];
	snprintf(link, sizeof link, "%s/link", dir);
	assert_int_equal(symlink(path, link), 0);
	assert_int_equal(keyfile_read(link, KEYFILE_OTHER, "p", true, &back, NULL, NULL), QB_REFUSED);
	assert_int_equal(unlink(link), 0);
	assert_int_equal(keyfile_read(dir, KEYFILE_OTHER, "p", true, &back, NULL, NULL), QB_REFUSED);
	assert_int_equal(keyfile_read(link, KEYFILE_OTHER, "p", true, &back, NULL, NULL), QB_IO);
	secret_free(&payload);
}

static void impossible_contents_are_refused(void **state)
{
	(void)state;
	uint8_t zeros[64] = {0};
	struct party_key key;
	struct keyfile_share share;
	struct secret *payload = secret_from(zeros, 64), *none = secret_new(0);
	struct buf f = {0};
	assert_int_equal(keyfile_write(path, KEYFILE_PARTY, KEYFILE_INTERACTIVE, "p", payload, NULL), QB_OK);
	assert_int_equal(keyfile_read_party(path, "p", true, &key, NULL), QB_CRYPTO); /* exchange scalar 0 */
	assert_int_equal(keyfile_write(path, KEYFILE_SHARE, KEYFILE_INTERACTIVE, "p", payload, NULL), QB_OK);
	assert_int_equal(keyfile_read_share(path, "p", true, &share, NULL), QB_FORMAT);
	assert_int_equal(keyfile_encrypt(KEYFILE_OTHER, KEYFILE_INTERACTIVE, "", payload, &f, NULL), QB_RANGE);
	assert_int_equal(keyfile_encrypt(KEYFILE_OTHER, KEYFILE_INTERACTIVE, "p", none, &f, NULL), QB_RANGE);
	assert_int_equal(keyfile_encrypt(KEYFILE_OTHER, (enum keyfile_level)0, "p", payload, &f, NULL), QB_RANGE);
	secret_free(&payload);
	secret_free(&none);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(party_keys_come_back),
	    cmocka_unit_test(shares_come_back_at_the_moderate_level),
	    cmocka_unit_test(rehearsal_protection_is_refused_elsewhere),
	    cmocka_unit_test(wrong_passphrase_damage_and_tampering_differ),
	    cmocka_unit_test(loose_permissions_are_refused),
	    cmocka_unit_test(impossible_contents_are_refused),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
