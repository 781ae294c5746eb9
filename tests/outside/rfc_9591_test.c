/*
 * Secret sharing against RFC 9591 appendix E.3 and the published vectors of an open specification for distributed key
 * generation over the same group: shares, Lagrange coefficients in scalars and in the exponent, commitments.
 */
#include "tests/hex.h"
#include "tests/vectors/rfc9591.h"

#include "server/custody/group.h"

static void shares_of_the_polynomial(void **state)
{
	(void)state;
	uint8_t coef[2][32], share[32], c[2][32], y[32], want[32];
	unhex(rfc9591_secret, coef[0], 32);
	unhex(rfc9591_coefficient, coef[1], 32);
	assert_true(group_mul_base(c[0], coef[0]));
	assert_true(group_mul_base(c[1], coef[1]));
	same_hex(c[0], rfc9591_public, 32);
	for (uint64_t i = 1; i <= 3; i++) {
		group_poly_eval(share, (const uint8_t(*)[32])coef, 2, i);
		same_hex(share, rfc9591_shares[i - 1], 32);
		assert_true(group_mul_base(want, share));
		assert_true(group_poly_point(y, (const uint8_t(*)[32])c, 2, i));
		assert_memory_equal(y, want, 32);
	}
}

static void lagrange_gives_the_secret(void **state)
{
	(void)state;
	static const uint32_t sets[][3] = {{1, 2}, {1, 3}, {2, 3}, {3, 1}, {1, 2, 3}};
	for (size_t k = 0; k < sizeof sets / sizeof *sets; k++) {
		size_t n = sets[k][2] ? 3 : 2;
		uint8_t sum[32] = {0}, point[32], lambda[32], share[32], term[32];
		for (size_t i = 0; i < n; i++) {
			assert_true(group_lagrange(lambda, sets[k], n, i));
			unhex(rfc9591_shares[sets[k][i] - 1], share, 32);
			group_scalar_mul(term, lambda, share);
			group_scalar_add(sum, sum, term);
			assert_true(group_mul_base(share, share));
			assert_true(group_mul(term, lambda, share));
			if (i == 0)
				memcpy(point, term, 32);
			else
				assert_true(group_add(point, point, term));
		}
		same_hex(sum, rfc9591_secret, 32);
		same_hex(point, rfc9591_public, 32);
	}
}

/* One run of distributed generation: group key, public shares, secret shares, from the published commitments. */
static void check_run(const char *group, const char *const *commitments, const char *const *share,
                      const char *const *point, uint32_t n, uint32_t k)
{
	uint8_t sum[8][32], c[32], y[32], s[32], lambda[32], total[32] = {0};
	uint32_t index[8];
	for (uint32_t m = 0; m < k; m++)
		for (uint32_t i = 0; i < n; i++) {
			unhex(commitments[i * k + m], c, 32);
			if (i == 0)
				memcpy(sum[m], c, 32);
			else
				assert_true(group_add(sum[m], sum[m], c));
		}
	same_hex(sum[0], group, 32);
	for (uint32_t j = 0; j < n; j++) {
		assert_true(group_poly_point(y, (const uint8_t(*)[32])sum, k, j + 1));
		same_hex(y, point[j], 32);
		unhex(share[j], s, 32);
		assert_true(group_mul_base(y, s));
		same_hex(y, point[j], 32);
		index[j] = j + 1;
	}
	for (uint32_t j = 0; j < k; j++) { /* the last k custodians */
		assert_true(group_lagrange(lambda, index + n - k, k, j));
		unhex(share[n - k + j], s, 32);
		group_scalar_mul(s, s, lambda);
		group_scalar_add(total, total, s);
	}
	assert_true(group_mul_base(y, total));
	same_hex(y, group, 32);
}

static void distributed_generation(void **state)
{
	(void)state;
	const char *share[8], *point[8];
	for (int j = 0; j < 3; j++) {
		share[j] = dkg0_out[j].share;
		point[j] = dkg0_out[j].point;
	}
	check_run(dkg0_group, &dkg0_commitments[0][0], share, point, 3, 2);
	for (int j = 0; j < 5; j++) {
		share[j] = dkg1_out[j].share;
		point[j] = dkg1_out[j].point;
	}
	check_run(dkg1_group, &dkg1_commitments[0][0], share, point, 5, 3);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(shares_of_the_polynomial),
	    cmocka_unit_test(lagrange_gives_the_secret),
	    cmocka_unit_test(distributed_generation),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
