/* An honest key generation, seen by custodians and by an outsider with the certificate. */
#include "tests/unit/custody/scene.h"

static void certify(const struct scene *s, struct buf *out)
{
	uint8_t sig[SCENE_MAX][SIGN_BYTES];
	for (uint32_t j = 0; j < s->n; j++) {
		keygen_certificate_sign(&s->g, s->key[j].seed, sig[j]);
		assert_true(keygen_certificate_signed_by(&s->g, s->pub[j].sign, sig[j]));
	}
	keygen_certificate_encode(&s->g, (const uint8_t(*)[SIGN_BYTES])sig, out);
}

static void shares_fit_the_group_key(void **state)
{
	(void)state;
	static const uint32_t sizes[][2] = {{3, 2}, {5, 3}, {6, 5}};
	for (size_t q = 0; q < 3; q++) {
		struct scene s;
		uint8_t sum[SCALAR_BYTES] = {0}, lambda[SCALAR_BYTES], term[SCALAR_BYTES], p[POINT_BYTES];
		uint32_t index[SCENE_MAX];
		scene_make(&s, sizes[q][0], sizes[q][1]);
		for (uint32_t i = 0; i < s.k; i++)
			index[i] = s.n - i;
		for (uint32_t i = 0; i < s.k; i++) {
			assert_true(group_lagrange(lambda, index, s.k, i));
			group_scalar_mul(term, lambda, secret_view(s.share[index[i] - 1]));
			group_scalar_add(sum, sum, term);
		}
		assert_true(group_mul_base(p, sum));
		assert_memory_equal(p, s.g.s, POINT_BYTES);
		scene_free(&s);
	}
}

static void all_see_the_same_group(void **state)
{
	(void)state;
	struct scene s;
	struct custody_group g;
	struct buf cert = {0};
	scene_make(&s, 4, 3);
	assert_int_equal(keygen_group(&s.c, s.deal, &g, NULL), QB_OK);
	assert_memory_equal(&g, &s.g, sizeof g);
	certify(&s, &cert);
	memset(&g, 0, sizeof g);
	assert_int_equal(keygen_certificate_verify(&s.c, s.deal, cert.data, cert.len, &g, NULL), QB_OK);
	assert_memory_equal(&g, &s.g, sizeof g);
	buf_free(&cert);
	scene_free(&s);
}

static void altered_certificates_are_refused(void **state)
{
	(void)state;
	struct scene s;
	struct custody_group g;
	struct buf cert = {0};
	scene_make(&s, 3, 2);
	certify(&s, &cert);
	for (size_t at = 0; at < cert.len; at += 13) {
		cert.data[at] ^= 0x40;
		assert_int_not_equal(keygen_certificate_verify(&s.c, s.deal, cert.data, cert.len, &g, NULL), QB_OK);
		cert.data[at] ^= 0x40;
	}
	assert_int_equal(keygen_certificate_verify(&s.c, s.deal, cert.data, cert.len - 1, &g, NULL), QB_FORMAT);
	buf_u8(&cert, 0);
	assert_int_equal(keygen_certificate_verify(&s.c, s.deal, cert.data, cert.len, &g, NULL), QB_FORMAT);
	buf_free(&cert);
	scene_free(&s);
}

static void contexts_have_limits(void **state)
{
	(void)state;
	struct scene s;
	struct keygen_context c, d;
	struct party_public twice[3];
	scene_parties(&s, 4, 2);
	assert_int_equal(keygen_context_init(&c, scene_campaign, 1, 1, 3, 3, s.pub, NULL), QB_RANGE);
	assert_int_equal(keygen_context_init(&c, scene_campaign, 1, 1, 3, 1, s.pub, NULL), QB_RANGE);
	assert_int_equal(keygen_context_init(&c, scene_campaign, 1, 1, 33, 2, s.pub, NULL), QB_RANGE);
	assert_int_equal(keygen_context_init(&c, scene_campaign, UINT64_C(1) << 32, 1, 3, 2, s.pub, NULL), QB_RANGE);
	memcpy(twice, s.pub, sizeof twice);
	memcpy(twice[2].exchange, twice[0].exchange, POINT_BYTES);
	assert_int_equal(keygen_context_init(&c, scene_campaign, 1, 1, 3, 2, twice, NULL), QB_CRYPTO);
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		memcpy(twice, s.pub, sizeof twice);
		scene_bad_point(q, twice[1].exchange);
		assert_int_equal(keygen_context_init(&c, scene_campaign, 1, 1, 3, 2, twice, NULL), QB_CRYPTO);
	}
	memcpy(twice, s.pub, sizeof twice);
	memset(twice[1].sign, 0, SIGN_PUBLIC); /* a point of small order */
	assert_int_equal(keygen_context_init(&c, scene_campaign, 1, 1, 3, 2, twice, NULL), QB_CRYPTO);
	/* Every field of the context changes ctx. */
	assert_int_equal(keygen_context_init(&c, scene_campaign, 1, 1, 4, 3, s.pub, NULL), QB_OK);
	assert_int_equal(keygen_context_init(&d, scene_campaign, 2, 1, 4, 3, s.pub, NULL), QB_OK);
	assert_memory_not_equal(c.ctx, d.ctx, 64);
	assert_int_equal(keygen_context_init(&d, scene_campaign, 1, 2, 4, 3, s.pub, NULL), QB_OK);
	assert_memory_not_equal(c.ctx, d.ctx, 64);
	assert_memory_not_equal(c.ctx, s.c.ctx, 64);
	scene_free(&s);
}

static void fingerprints_tell_keys_apart(void **state)
{
	(void)state;
	struct scene s;
	char a[PARTY_FINGERPRINT_TEXT], b[PARTY_FINGERPRINT_TEXT];
	scene_parties(&s, 3, 2);
	party_fingerprint(&s.pub[0], a);
	party_fingerprint(&s.pub[1], b);
	assert_int_equal(strlen(a), 39);
	assert_string_not_equal(a, b);
	struct party_public mixed = s.pub[0];
	memcpy(mixed.exchange, s.pub[1].exchange, POINT_BYTES);
	party_fingerprint(&mixed, b);
	assert_string_not_equal(a, b);
	scene_free(&s);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(shares_fit_the_group_key),         cmocka_unit_test(all_see_the_same_group),
    cmocka_unit_test(altered_certificates_are_refused), cmocka_unit_test(contexts_have_limits),
    cmocka_unit_test(fingerprints_tell_keys_apart),
};
SCENE_MAIN(tests)
