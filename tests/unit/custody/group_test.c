/* Algebra of the group functions, and what they refuse. */
#include "tests/unit/custody/scene.h"

#include "server/custody/group.h"

static void polynomial_agrees_with_its_commitments(void **state)
{
	(void)state;
	uint8_t coef[31][SCALAR_BYTES], c[31][POINT_BYTES], f[SCALAR_BYTES], want[POINT_BYTES], got[POINT_BYTES];
	for (size_t n = 1; n <= 31; n += 6) {
		for (size_t m = 0; m < n; m++) {
			group_scalar_random(coef[m]);
			assert_true(group_mul_base(c[m], coef[m]));
		}
		for (uint64_t x = 1; x <= 32; x += 31) {
			group_poly_eval(f, (const uint8_t(*)[SCALAR_BYTES])coef, n, x);
			assert_true(group_mul_base(want, f));
			assert_true(group_poly_point(got, (const uint8_t(*)[POINT_BYTES])c, n, x));
			assert_memory_equal(got, want, POINT_BYTES);
		}
	}
}

static void lagrange_recovers_the_constant(void **state)
{
	(void)state;
	static const uint32_t index[] = {32, 1, 7, 30, 2};
	uint8_t coef[5][SCALAR_BYTES], f[SCALAR_BYTES], lambda[SCALAR_BYTES], sum[SCALAR_BYTES] = {0};
	for (size_t m = 0; m < 5; m++)
		group_scalar_random(coef[m]);
	for (size_t i = 0; i < 5; i++) {
		group_poly_eval(f, (const uint8_t(*)[SCALAR_BYTES])coef, 5, index[i]);
		assert_true(group_lagrange(lambda, index, 5, i));
		group_scalar_mul(f, f, lambda);
		group_scalar_add(sum, sum, f);
	}
	assert_memory_equal(sum, coef[0], SCALAR_BYTES);
}

static void lagrange_refuses_impossible_indices(void **state)
{
	(void)state;
	uint8_t lambda[SCALAR_BYTES];
	assert_false(group_lagrange(lambda, (const uint32_t[]){0, 1}, 2, 1));
	assert_false(group_lagrange(lambda, (const uint32_t[]){1, 33}, 2, 0));
	assert_false(group_lagrange(lambda, (const uint32_t[]){5, 5}, 2, 0));
	assert_true(group_lagrange(lambda, (const uint32_t[]){5, 6}, 2, 0));
}

static void scalars_must_be_canonical_and_not_zero(void **state)
{
	(void)state;
	uint8_t s[SCALAR_BYTES] = {0}, p[POINT_BYTES];
	assert_true(group_scalar_canonical(s));
	assert_false(group_scalar_ok(s));
	assert_false(group_mul_base(p, s));
	scene_add_order(s); /* l itself */
	assert_false(group_scalar_canonical(s));
	assert_false(group_mul_base(p, s));
	s[0]--; /* l - 1 */
	assert_true(group_scalar_ok(s));
	assert_true(group_mul_base(p, s));
	group_scalar_from_u64(s, 1);
	scene_add_order(s);
	assert_false(group_scalar_ok(s));
	group_scalar_from_u64(s, 1);
	s[31] |= 0x80;
	assert_false(group_scalar_ok(s));
	assert_false(group_mul_base(p, s));
}

/* RFC 9496, 4.3.1: an encoding is below the field's prime, so that its highest bit is never set. */
static void points_have_one_encoding(void **state)
{
	(void)state;
	uint8_t s[SCALAR_BYTES], p[POINT_BYTES], out[POINT_BYTES], identity[POINT_BYTES] = {0};
	group_scalar_random(s);
	assert_true(group_mul_base(p, s));
	assert_true(group_point_ok(p));
	p[POINT_BYTES - 1] |= 0x80;
	identity[POINT_BYTES - 1] = 0x80;
	assert_false(group_point_ok(p));
	assert_false(group_point_ok(identity));
	assert_false(group_mul(out, s, p));
	assert_false(group_add(out, p, p));
}

/* Any of the numbers 1..32, at 0 and at every number that is left out. */
static void lagrange_interpolates_at_any_number(void **state)
{
	(void)state;
	uint8_t coef[8][SCALAR_BYTES], f[SCALAR_BYTES], lambda[SCALAR_BYTES], sum[SCALAR_BYTES];
	for (size_t m = 0; m < 8; m++)
		group_scalar_random(coef[m]);
	for (uint32_t step = 1; step <= 4; step++)
		for (uint32_t x = 0; x <= CUSTODY_MAX; x++) {
			uint32_t index[8];
			for (uint32_t i = 0; i < 8; i++)
				index[i] = CUSTODY_MAX - step * (i * 5 % 8);
			memset(sum, 0, sizeof sum);
			for (size_t i = 0; i < 8; i++) {
				group_poly_eval(f, (const uint8_t(*)[SCALAR_BYTES])coef, 8, index[i]);
				assert_true(group_lagrange_at(lambda, index, 8, i, x));
				assert_true(group_scalar_canonical(lambda));
				group_scalar_mul(f, f, lambda);
				group_scalar_add(sum, sum, f);
			}
			group_poly_eval(f, (const uint8_t(*)[SCALAR_BYTES])coef, 8, x);
			assert_memory_equal(sum, f, SCALAR_BYTES);
		}
	uint32_t all[CUSTODY_MAX]; /* every difference from 1 to 31 */
	for (uint32_t i = 0; i < CUSTODY_MAX; i++)
		all[i] = i + 1;
	memset(sum, 0, sizeof sum);
	for (size_t i = 0; i < CUSTODY_MAX; i++) {
		assert_true(group_lagrange(lambda, all, CUSTODY_MAX, i));
		group_poly_eval(f, (const uint8_t(*)[SCALAR_BYTES])coef, 8, all[i]);
		group_scalar_mul(f, f, lambda);
		group_scalar_add(sum, sum, f);
	}
	assert_memory_equal(sum, coef[0], SCALAR_BYTES);
}

static void bad_points_are_refused_everywhere(void **state)
{
	(void)state;
	uint8_t s[SCALAR_BYTES], good[POINT_BYTES], bad[POINT_BYTES], out[POINT_BYTES], zeros[POINT_BYTES] = {0};
	group_scalar_from_u64(s, 5);
	assert_true(group_mul_base(good, s));
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		scene_bad_point(q, bad);
		assert_false(group_point_ok(bad));
		memset(out, 7, sizeof out);
		assert_false(group_mul(out, s, bad));
		assert_memory_equal(out, zeros, POINT_BYTES);
		assert_false(group_add(out, good, bad));
		assert_false(group_add(out, bad, good));
		assert_false(group_sub(out, good, bad));
		assert_false(group_sub(out, bad, good));
		assert_memory_equal(out, zeros, POINT_BYTES);
	}
}

static void sums_that_vanish_are_refused(void **state)
{
	(void)state;
	uint8_t one[SCALAR_BYTES], minus[SCALAR_BYTES] = {0}, p[POINT_BYTES], q[POINT_BYTES], out[POINT_BYTES];
	group_scalar_from_u64(one, 1);
	scene_add_order(minus);
	minus[0]--;
	assert_true(group_mul_base(p, one));
	assert_true(group_mul_base(q, minus));
	assert_false(group_add(out, p, q));
	assert_false(group_sub(out, p, p));
	assert_true(group_sub(out, p, q));
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(polynomial_agrees_with_its_commitments),
    cmocka_unit_test(lagrange_recovers_the_constant),
    cmocka_unit_test(lagrange_refuses_impossible_indices),
    cmocka_unit_test(scalars_must_be_canonical_and_not_zero),
    cmocka_unit_test(points_have_one_encoding),
    cmocka_unit_test(sums_that_vanish_are_refused),
    cmocka_unit_test(lagrange_interpolates_at_any_number),
    cmocka_unit_test(bad_points_are_refused_everywhere),
};
SCENE_MAIN(tests)
