/* ristretto255 through libsodium 1.0.18, which leaves the identity, zero and unreduced scalars to its callers. */
#include "server/custody/group.h"

#include <sodium.h>
#include <string.h>

#include "server/base/buf.h"
#include "server/base/check.h"

_Static_assert(crypto_core_ristretto255_BYTES == POINT_BYTES, "point size");
_Static_assert(crypto_core_ristretto255_SCALARBYTES == SCALAR_BYTES, "scalar size");

/* The library takes a point with the highest bit set for the one without it: a second encoding, of the identity, too.
 */
bool group_point_ok(const uint8_t p[static POINT_BYTES])
{
	bool canonical = (p[POINT_BYTES - 1] & 0x80) == 0;
	return canonical && !sodium_is_zero(p, POINT_BYTES) && crypto_core_ristretto255_is_valid_point(p) == 1;
}

bool group_scalar_canonical(const uint8_t s[static SCALAR_BYTES])
{
	uint8_t wide[64] = {0}, reduced[SCALAR_BYTES];
	memcpy(wide, s, SCALAR_BYTES);
	crypto_core_ristretto255_scalar_reduce(reduced, wide);
	bool same = sodium_memcmp(reduced, s, SCALAR_BYTES) == 0;
	wipe(wide, sizeof wide);
	wipe(reduced, sizeof reduced);
	return same;
}

bool group_scalar_ok(const uint8_t s[static SCALAR_BYTES])
{
	return !sodium_is_zero(s, SCALAR_BYTES) && group_scalar_canonical(s);
}

/* Copies a result out when it is a point we accept. */
static bool deliver(uint8_t out[static POINT_BYTES], bool done, uint8_t result[static POINT_BYTES])
{
	bool ok = done && !sodium_is_zero(result, POINT_BYTES);
	if (ok)
		memcpy(out, result, POINT_BYTES);
	else
		memset(out, 0, POINT_BYTES);
	wipe(result, POINT_BYTES);
	return ok;
}

bool group_mul(uint8_t out[static POINT_BYTES], const uint8_t s[static SCALAR_BYTES],
               const uint8_t p[static POINT_BYTES])
{
	uint8_t r[POINT_BYTES];
	bool ok = group_scalar_ok(s) && group_point_ok(p);
	return deliver(out, ok && crypto_scalarmult_ristretto255(r, s, p) == 0, r);
}

bool group_mul_base(uint8_t out[static POINT_BYTES], const uint8_t s[static SCALAR_BYTES])
{
	uint8_t r[POINT_BYTES];
	return deliver(out, group_scalar_ok(s) && crypto_scalarmult_ristretto255_base(r, s) == 0, r);
}

bool group_add(uint8_t out[static POINT_BYTES], const uint8_t a[static POINT_BYTES],
               const uint8_t b[static POINT_BYTES])
{
	uint8_t r[POINT_BYTES];
	bool ok = group_point_ok(a) && group_point_ok(b);
	return deliver(out, ok && crypto_core_ristretto255_add(r, a, b) == 0, r);
}

bool group_sub(uint8_t out[static POINT_BYTES], const uint8_t a[static POINT_BYTES],
               const uint8_t b[static POINT_BYTES])
{
	uint8_t r[POINT_BYTES];
	bool ok = group_point_ok(a) && group_point_ok(b);
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

bool group_lagrange(uint8_t out[static SCALAR_BYTES], const uint32_t *index, size_t n, size_t which)
{
	return group_lagrange_at(out, index, n, which, 0);
}

bool group_lagrange_at(uint8_t out[static SCALAR_BYTES], const uint32_t *index, size_t n, size_t which, uint32_t x)
{
	uint8_t num[SCALAR_BYTES], den[SCALAR_BYTES], at[SCALAR_BYTES], a[SCALAR_BYTES], b[SCALAR_BYTES];
	group_scalar_from_u64(at, x);
	CHECK(which < n);
	group_scalar_from_u64(num, 1);
	group_scalar_from_u64(den, 1);
	for (size_t j = 0; j < n; j++) {
		if (index[j] == 0 || index[j] > CUSTODY_MAX || (j != which && index[j] == index[which]))
			return false;
		if (j == which)
			continue;
		group_scalar_from_u64(a, index[j]);
		group_scalar_from_u64(b, index[which]);
		group_scalar_sub(b, a, b);
		group_scalar_sub(a, a, at);
		group_scalar_mul(num, num, a);
		group_scalar_mul(den, den, b);
	}
	if (crypto_core_ristretto255_scalar_invert(den, den) != 0)
		return false;
	group_scalar_mul(out, num, den);
	return true;
}

void group_challenge(struct transcript *t, uint8_t out[static SCALAR_BYTES])
{
	uint8_t wide[64];
	transcript_end(t, wide);
	group_scalar_wide(out, wide);
	wipe(wide, sizeof wide);
}
