/* ristretto255 through libsodium 1.0.18, which leaves the identity, zero and unreduced scalars to its callers. */
#include "server/custody/group.h"

#include <sodium.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/buf.h"
#include "server/base/check.h"

_Static_assert(crypto_core_ristretto255_BYTES == POINT_BYTES, "point size");
_Static_assert(crypto_core_ristretto255_SCALARBYTES == SCALAR_BYTES, "scalar size");

/*
 * What the library's decoding lets pass: the identity, and a point with the highest bit set, which it takes for the one
 * without it, a second encoding.
 */
static bool encoding_ok(const uint8_t p[static POINT_BYTES])
{
	bool low = (p[POINT_BYTES - 1] & 0x80) == 0, some = sodium_is_zero(p, POINT_BYTES) == 0;
	return secret_verdict(low & some);
}

bool group_point_ok(const uint8_t p[static POINT_BYTES])
{
	return encoding_ok(p) && secret_verdict(crypto_core_ristretto255_is_valid_point(p) == 1);
}

bool group_scalar_canonical(const uint8_t s[static SCALAR_BYTES])
{
	uint8_t wide[64] = {0}, reduced[SCALAR_BYTES];
	memcpy(wide, s, SCALAR_BYTES);
	crypto_core_ristretto255_scalar_reduce(reduced, wide);
	bool same = sodium_memcmp(reduced, s, SCALAR_BYTES) == 0;
	wipe(wide, sizeof wide);
	wipe(reduced, sizeof reduced);
	return secret_verdict(same);
}

bool group_scalar_ok(const uint8_t s[static SCALAR_BYTES])
{
	return secret_verdict(sodium_is_zero(s, SCALAR_BYTES) == 0) && group_scalar_canonical(s);
}

/* Copies a result out when it is a point we accept. */
static bool deliver(uint8_t out[static POINT_BYTES], bool done, uint8_t result[static POINT_BYTES])
{
	bool ok = secret_verdict(done) && secret_verdict(sodium_is_zero(result, POINT_BYTES) == 0);
	if (ok)
		memcpy(out, result, POINT_BYTES);
	else
		memset(out, 0, POINT_BYTES);
	wipe(result, POINT_BYTES);
	return ok;
}

/* The library's operations decode what they are given, so that encoding_ok is all that is left to check before them. */
bool group_mul(uint8_t out[static POINT_BYTES], const uint8_t s[static SCALAR_BYTES],
               const uint8_t p[static POINT_BYTES])
{
	uint8_t r[POINT_BYTES];
	bool ok = group_scalar_ok(s) && encoding_ok(p);
	return deliver(out, ok && crypto_scalarmult_ristretto255(r, s, p) == 0, r);
}

bool group_mul_base(uint8_t out[static POINT_BYTES], const uint8_t s[static SCALAR_BYTES])
{
	uint8_t r[POINT_BYTES];
	bool ok = deliver(out, group_scalar_ok(s) && crypto_scalarmult_ristretto255_base(r, s) == 0, r);
	secret_publish(out, POINT_BYTES); /* public keys, commitments: all that is made here is meant to be seen */
	return ok;
}

bool group_add(uint8_t out[static POINT_BYTES], const uint8_t a[static POINT_BYTES],
               const uint8_t b[static POINT_BYTES])
{
	uint8_t r[POINT_BYTES];
	bool ok = encoding_ok(a) && encoding_ok(b);
	return deliver(out, ok && crypto_core_ristretto255_add(r, a, b) == 0, r);
}

bool group_sub(uint8_t out[static POINT_BYTES], const uint8_t a[static POINT_BYTES],
               const uint8_t b[static POINT_BYTES])
{
	uint8_t r[POINT_BYTES];
	bool ok = encoding_ok(a) && encoding_ok(b);
	return deliver(out, ok && crypto_core_ristretto255_sub(r, a, b) == 0, r);
}

bool group_from_hash(uint8_t out[static POINT_BYTES], const uint8_t hash[static 64])
{
	uint8_t r[POINT_BYTES];
	return deliver(out, crypto_core_ristretto255_from_hash(r, hash) == 0, r);
}

void group_scalar_wide(uint8_t out[static SCALAR_BYTES], const uint8_t wide[static 64])
{
	crypto_core_ristretto255_scalar_reduce(out, wide);
}

void group_scalar_random(uint8_t out[static SCALAR_BYTES])
{
	do
		crypto_core_ristretto255_scalar_random(out);
	while (!group_scalar_ok(out));
}

void group_scalar_from_u64(uint8_t out[static SCALAR_BYTES], uint64_t v)
{
	memset(out, 0, SCALAR_BYTES);
	le64_store(out, v);
}

void group_scalar_add(uint8_t out[static SCALAR_BYTES], const uint8_t a[static SCALAR_BYTES],
                      const uint8_t b[static SCALAR_BYTES])
{
	crypto_core_ristretto255_scalar_add(out, a, b);
}

void group_scalar_sub(uint8_t out[static SCALAR_BYTES], const uint8_t a[static SCALAR_BYTES],
                      const uint8_t b[static SCALAR_BYTES])
{
	crypto_core_ristretto255_scalar_sub(out, a, b);
}

void group_scalar_mul(uint8_t out[static SCALAR_BYTES], const uint8_t a[static SCALAR_BYTES],
                      const uint8_t b[static SCALAR_BYTES])
{
	crypto_core_ristretto255_scalar_mul(out, a, b);
}

void group_poly_eval(uint8_t out[static SCALAR_BYTES], const uint8_t (*coef)[SCALAR_BYTES], size_t n, uint64_t x)
{
	uint8_t at[SCALAR_BYTES], sum[SCALAR_BYTES] = {0};
	group_scalar_from_u64(at, x);
	for (size_t m = n; m-- > 0;) {
		group_scalar_mul(sum, sum, at);
		group_scalar_add(sum, sum, coef[m]);
	}
	memcpy(out, sum, SCALAR_BYTES);
	wipe(sum, sizeof sum);
}

bool group_poly_point(uint8_t out[static POINT_BYTES], const uint8_t (*commitment)[POINT_BYTES], size_t n, uint64_t x)
{
	uint8_t at[SCALAR_BYTES], sum[POINT_BYTES];
	CHECK(n > 0 && x > 0);
	group_scalar_from_u64(at, x);
	memcpy(sum, commitment[n - 1], POINT_BYTES);
	bool ok = group_point_ok(sum);
	for (size_t m = n - 1; ok && m-- > 0;)
		ok = group_mul(sum, at, sum) && group_add(sum, sum, commitment[m]);
	return deliver(out, ok, sum);
}

/*
 * 1/v mod l for a small v: (1 + m l) / v with the m that makes it whole. The library's inversion takes as long as half
 * a scalar multiplication. Variable time: v comes from public numbers.
 */
static void small_inverse(uint8_t out[static SCALAR_BYTES], unsigned v)
{
	static const uint8_t order[SCALAR_BYTES] = {0xed, 0xd3, 0xf5, 0x5c, 0x1a, 0x63, 0x12, 0x58, 0xd6, 0x9c, 0xf7,
	                                            0xa2, 0xde, 0xf9, 0xde, 0x14, 0,    0,    0,    0,    0,    0,
	                                            0,    0,    0,    0,    0,    0,    0,    0,    0,    0x10};
	uint8_t multiple[SCALAR_BYTES + 1];
	unsigned rest = 0, m = 0, carry = 1;
	CHECK(v >= 1 && v <= CUSTODY_MAX);
	for (size_t i = SCALAR_BYTES; i-- > 0;)
		rest = (rest * 256 + order[i]) % v;
	while ((1 + m * rest) % v != 0)
		m++;
	for (size_t i = 0; i < SCALAR_BYTES; i++, carry >>= 8) {
		carry += m * order[i];
		multiple[i] = (uint8_t)carry;
	}
	multiple[SCALAR_BYTES] = (uint8_t)carry;
	rest = carry % v;
	for (size_t i = SCALAR_BYTES; i-- > 0; rest %= v) {
		rest = rest * 256 + multiple[i];
		out[i] = (uint8_t)(rest / v);
	}
}

bool group_lagrange(uint8_t out[static SCALAR_BYTES], const uint32_t *index, size_t n, size_t which)
{
	return group_lagrange_at(out, index, n, which, 0);
}

bool group_lagrange_at(uint8_t out[static SCALAR_BYTES], const uint32_t *index, size_t n, size_t which, uint32_t x)
{
	uint8_t product[SCALAR_BYTES], factor[SCALAR_BYTES], zero[SCALAR_BYTES] = {0};
	bool minus = false;
	CHECK(which < n && x <= CUSTODY_MAX);
	group_scalar_from_u64(product, 1);
	for (size_t j = 0; j < n; j++) {
		if (index[j] == 0 || index[j] > CUSTODY_MAX || (j != which && index[j] == index[which]))
			return false;
		if (j == which)
			continue;
		int above = (int)index[j] - (int)x, below = (int)index[j] - (int)index[which];
		group_scalar_from_u64(factor, (uint64_t)abs(above));
		group_scalar_mul(product, product, factor);
		small_inverse(factor, (unsigned)abs(below));
		group_scalar_mul(product, product, factor);
		minus ^= (above < 0) != (below < 0);
	}
	if (minus)
		group_scalar_sub(product, zero, product);
	memcpy(out, product, SCALAR_BYTES);
	return true;
}

void group_challenge(struct transcript *t, uint8_t out[static SCALAR_BYTES])
{
	uint8_t wide[64];
	transcript_end(t, wide);
	group_scalar_wide(out, wide);
	wipe(wide, sizeof wide);
}
