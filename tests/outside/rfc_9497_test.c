/*
 * Our core for proofs of equal discrete logarithms, with RFC 9497's own statement plugged in, against its mode 1
 * vectors: each published proof verifies, and comes out bit for bit from the published nonce. The RFC answers a
 * challenge with s = r - c k where ours is z = w + c x: its c is our -c.
 */
#include "tests/hex.h"
#include "tests/vectors/rfc9497.h"

#include <sodium.h>

#include "server/base/buf.h"
#include "server/custody/proof.h"

#define CONTEXT "OPRFV1-\x01-ristretto255-SHA512"

/* RFC 9380 5.3.1 with SHA-512 and 64 bytes of output, then mod l: RFC 9497's HashToScalar. */
static void hash_to_scalar(const struct buf *msg, uint8_t out[32])
{
	static const char dst[] = "HashToScalar-" CONTEXT;
	uint8_t zeros[128] = {0}, b0[64], b1[64], tail[3] = {0, 64, 0}, one = 1, dst_len = sizeof dst - 1;
	crypto_hash_sha512_state h;
	crypto_hash_sha512_init(&h);
	crypto_hash_sha512_update(&h, zeros, sizeof zeros);
	crypto_hash_sha512_update(&h, msg->data, msg->len);
	crypto_hash_sha512_update(&h, tail, 3);
	crypto_hash_sha512_update(&h, (const uint8_t *)dst, dst_len);
	crypto_hash_sha512_update(&h, &dst_len, 1);
	crypto_hash_sha512_final(&h, b0);
	crypto_hash_sha512_init(&h);
	crypto_hash_sha512_update(&h, b0, sizeof b0);
	crypto_hash_sha512_update(&h, &one, 1);
	crypto_hash_sha512_update(&h, (const uint8_t *)dst, dst_len);
	crypto_hash_sha512_update(&h, &dst_len, 1);
	crypto_hash_sha512_final(&h, b1);
	group_scalar_wide(out, b1);
}

static void put16(struct buf *b, const void *p, size_t n)
{
	buf_u8(b, (uint8_t)(n >> 8));
	buf_u8(b, (uint8_t)n);
	buf_put(b, p, n);
}

struct composites {
	uint8_t pk[32], m[32], z[32];
};

static void challenge(const void *state, const uint8_t a1[static 32], const uint8_t a2[static 32], uint8_t c[static 32])
{
	const struct composites *s = state;
	struct buf b = {0};
	uint8_t rfc[32];
	put16(&b, s->pk, 32);
	put16(&b, s->m, 32);
	put16(&b, s->z, 32);
	put16(&b, a1, 32);
	put16(&b, a2, 32);
	buf_text(&b, "Challenge");
	hash_to_scalar(&b, rfc);
	crypto_core_ristretto255_scalar_negate(c, rfc);
	buf_free(&b);
}

/* RFC 9497 2.2.1, ComputeComposites. */
static void compose(size_t which, struct composites *out)
{
	static const char seed_dst[] = "Seed-" CONTEXT;
	struct buf b = {0};
	uint8_t seed[64], d[32], c[32], e[32], term[32];
	unhex(rfc9497_pk, out->pk, 32);
	put16(&b, out->pk, 32);
	put16(&b, seed_dst, sizeof seed_dst - 1);
	crypto_hash_sha512(seed, b.data, b.len);
	for (int i = 0; i < rfc9497_proofs[which].n; i++) {
		unhex(rfc9497_proofs[which].blinded[i], c, 32);
		unhex(rfc9497_proofs[which].evaluated[i], e, 32);
		buf_clear(&b);
		put16(&b, seed, sizeof seed);
		buf_u8(&b, 0);
		buf_u8(&b, (uint8_t)i);
		put16(&b, c, 32);
		put16(&b, e, 32);
		buf_text(&b, "Composite");
		hash_to_scalar(&b, d);
		assert_true(group_mul(term, d, c));
		assert_true(i == 0 ? (memcpy(out->m, term, 32), true) : group_add(out->m, out->m, term));
		assert_true(group_mul(term, d, e));
		assert_true(i == 0 ? (memcpy(out->z, term, 32), true) : group_add(out->z, out->z, term));
	}
	buf_free(&b);
}

static void published_proofs(void **state)
{
	(void)state;
	uint8_t sk[32], r[32], published[64], rfc_c[32];
	unhex(rfc9497_sk, sk, 32);
	for (size_t i = 0; i < sizeof rfc9497_proofs / sizeof *rfc9497_proofs; i++) {
		struct composites s;
		struct proof proof, made;
		compose(i, &s);
		unhex(rfc9497_proofs[i].proof, published, 64);
		unhex(rfc9497_proofs[i].r, r, 32);
		crypto_core_ristretto255_scalar_negate(proof.c, published);
		memcpy(proof.z, published + 32, 32);
		struct proof_points points = {NULL, s.pk, s.m, s.z};
		struct proof_statement statement = {challenge, &s};
		assert_true(proof_equal_check(&points, &statement, &proof));
		assert_true(proof_equal_make(&points, &statement, sk, r, &made));
		crypto_core_ristretto255_scalar_negate(rfc_c, made.c);
		assert_memory_equal(rfc_c, published, 32);
		assert_memory_equal(made.z, published + 32, 32);
		for (int bit = 0; bit < 256; bit += 37) { /* an altered proof, and one for other points */
			struct proof bad = proof;
			bad.z[bit / 8] ^= (uint8_t)(1 << bit % 8);
			assert_false(proof_equal_check(&points, &statement, &bad));
			bad = proof;
			bad.c[bit / 8] ^= (uint8_t)(1 << bit % 8);
			assert_false(proof_equal_check(&points, &statement, &bad));
		}
		struct proof_points swapped = {NULL, s.pk, s.z, s.m};
		assert_false(proof_equal_check(&swapped, &statement, &proof));
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(published_proofs),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
