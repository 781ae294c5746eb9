/*
 * The symmetric primitives under custody, as this build links them: BLAKE2b (RFC 7693), XChaCha20-Poly1305 and
 * HChaCha20 (draft-irtf-cfrg-xchacha-03), Argon2id; and our transcript hash, rebuilt by hand from plain BLAKE2b.
 */
#include "tests/hex.h"
#include "tests/vectors/symmetric.h"

#include <sodium.h>

#include "server/base/buf.h"
#include "server/base/secret.h"

#define COUNT(a) (sizeof(a) / sizeof *(a))

static void blake2b_known_answers(void **state)
{
	(void)state;
	uint8_t out[64], in[256], key[64];
	blake2b_512(out, "abc", 3);
	same_hex(out, blake2b_abc, 64);
	for (size_t i = 0; i < sizeof in; i++)
		in[i] = (uint8_t)i;
	memcpy(key, in, sizeof key);
	for (size_t i = 0; i < COUNT(blake2b_keyed); i++) {
		assert_int_equal(crypto_generichash_blake2b(out, 64, in, blake2b_keyed[i].n, key, sizeof key), 0);
		same_hex(out, blake2b_keyed[i].hash, 64);
	}
}

/* RFC 7693 appendix E's deterministic sequence. */
static void sequence(uint8_t *out, size_t n, uint32_t seed)
{
	uint32_t a = 0xDEAD4BADU * seed, b = 1;
	for (size_t i = 0; i < n; i++) {
		uint32_t t = a + b;
		a = b;
		b = t;
		out[i] = (uint8_t)(t >> 24);
	}
}

static void blake2b_self_test(void **state)
{
	(void)state;
	static const size_t md_len[] = {20, 32, 48, 64}, in_len[] = {0, 3, 128, 129, 255, 1024};
	uint8_t in[1024], md[64], key[64], grand[32];
	struct buf all = {0};
	for (size_t i = 0; i < COUNT(md_len); i++)
		for (size_t j = 0; j < COUNT(in_len); j++) {
			sequence(in, in_len[j], (uint32_t)in_len[j]);
			assert_int_equal(crypto_generichash_blake2b(md, md_len[i], in, in_len[j], NULL, 0), 0);
			buf_put(&all, md, md_len[i]);
			sequence(key, md_len[i], (uint32_t)md_len[i]);
			assert_int_equal(crypto_generichash_blake2b(md, md_len[i], in, in_len[j], key, md_len[i]), 0);
			buf_put(&all, md, md_len[i]);
		}
	assert_int_equal(crypto_generichash_blake2b(grand, sizeof grand, all.data, all.len, NULL, 0), 0);
	same_hex(grand, blake2b_grand, 32);
	buf_free(&all);
}

static void transcript_is_length_prefixed_blake2b(void **state)
{
	(void)state;
	struct transcript t;
	struct buf b = {0};
	uint8_t got[64], want[64];
	transcript_begin(&t, "quietbell/1/test/label");
	transcript_field(&t, "ab", 2);
	transcript_field(&t, "", 0);
	transcript_u64(&t, 258);
	transcript_end(&t, got);
	buf_u64(&b, 22);
	buf_text(&b, "quietbell/1/test/label");
	buf_u64(&b, 2);
	buf_text(&b, "ab");
	buf_u64(&b, 0);
	buf_u64(&b, 8);
	buf_u64(&b, 258);
	blake2b_512(want, b.data, b.len);
	assert_memory_equal(got, want, 64);
	buf_free(&b);
}

static void xchacha20_poly1305(void **state)
{
	(void)state;
	uint8_t key[32], nonce[24], ad[64], plain[256], want[256], got[256], back[256], sub[32];
	unsigned long long len;
	unhex(hchacha_key, key, 32);
	unhex(hchacha_nonce, nonce, 16);
	assert_int_equal(crypto_core_hchacha20(sub, nonce, key, NULL), 0);
	same_hex(sub, hchacha_subkey, 32);
	unhex(xchacha_key, key, 32);
	unhex(xchacha_nonce, nonce, 24);
	size_t ad_n = unhex_any(xchacha_aad, ad, sizeof ad), n = unhex_any(xchacha_plaintext, plain, sizeof plain);
	assert_int_equal(unhex_any(xchacha_ciphertext, want, sizeof want), n);
	unhex(xchacha_tag, want + n, 16);
	assert_int_equal(crypto_aead_xchacha20poly1305_ietf_encrypt(got, &len, plain, n, ad, ad_n, NULL, nonce, key),
	                 0);
	assert_int_equal(len, n + 16);
	assert_memory_equal(got, want, n + 16);
	assert_int_equal(
	    crypto_aead_xchacha20poly1305_ietf_decrypt(back, NULL, NULL, want, n + 16, ad, ad_n, nonce, key), 0);
	assert_memory_equal(back, plain, n);
	want[n] ^= 1;
	assert_int_not_equal(
	    crypto_aead_xchacha20poly1305_ietf_decrypt(back, NULL, NULL, want, n + 16, ad, ad_n, nonce, key), 0);
}

static void argon2id(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(argon2id_cases); i++) {
		uint8_t password[32], out[32];
		size_t n = unhex_any(argon2id_cases[i].password, password, sizeof password);
		assert_int_equal(crypto_pwhash_argon2id(out, 32, (const char *)password, n,
		                                        (const uint8_t *)"ABCDEFGHIJKLMNOP", 5, (size_t)1024 << 10,
		                                        crypto_pwhash_ALG_ARGON2ID13),
		                 0);
		same_hex(out, argon2id_cases[i].hash, 32);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(blake2b_known_answers),
	    cmocka_unit_test(blake2b_self_test),
	    cmocka_unit_test(transcript_is_length_prefixed_blake2b),
	    cmocka_unit_test(xchacha20_poly1305),
	    cmocka_unit_test(argon2id),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
