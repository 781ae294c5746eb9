/* The draw: contributions, the seed, and that every secret of every slot is its own. */
#include "tests/near.h"
#include "tests/unit/custody/scene.h"

#include "server/custody/seed.h"

static const uint8_t ctx[64] = "a context";

static void commitments_bind_everything(void **state)
{
	(void)state;
	uint8_t contribution[CONTRIBUTION_BYTES] = {1, 2, 3}, a[64], other[64] = "another context";
	seed_commit(ctx, 1, 2, contribution, a);
	assert_true(seed_commit_matches(ctx, 1, 2, contribution, a));
	assert_false(seed_commit_matches(other, 1, 2, contribution, a));
	assert_false(seed_commit_matches(ctx, 2, 2, contribution, a));
	assert_false(seed_commit_matches(ctx, 1, 3, contribution, a));
	contribution[31] ^= 1;
	assert_false(seed_commit_matches(ctx, 1, 2, contribution, a));
}

static void every_contribution_changes_the_seed(void **state)
{
	(void)state;
	uint8_t contribution[4][CONTRIBUTION_BYTES] = {{1}, {2}, {3}, {4}};
	const uint8_t(*c)[CONTRIBUTION_BYTES] = (const uint8_t(*)[CONTRIBUTION_BYTES])contribution;
	struct secret *first = seed_draw(ctx, 1, 0, c, 3), *again = seed_draw(ctx, 1, 0, c, 3);
	assert_memory_equal(secret_view(first), secret_view(again), SEED_BYTES);
	secret_free(&again);
	for (int j = 0; j < 4; j++) {
		contribution[j][31] ^= 0x80;
		again = seed_draw(ctx, 1, 0, c, 3);
		assert_memory_not_equal(secret_view(first), secret_view(again), SEED_BYTES);
		contribution[j][31] ^= 0x80;
		secret_free(&again);
	}
	again = seed_draw(ctx, 2, 0, c, 3); /* another attempt */
	assert_memory_not_equal(secret_view(first), secret_view(again), SEED_BYTES);
	secret_free(&again);
	again = seed_draw(ctx, 1, 31, c, 3); /* a reseal from slot 31 */
	assert_memory_not_equal(secret_view(first), secret_view(again), SEED_BYTES);
	secret_free(&again);
	secret_free(&first);
}

/* All secrets of several slots, pairwise different. */
static void secrets_never_repeat(void **state)
{
	(void)state;
	struct secret *seed = secret_random(SEED_BYTES);
	uint8_t all[4 * 7 + 2][32];
	size_t n = 0;
	for (uint64_t slot = 0; slot < 4; slot++) {
		seed_slot_truth(seed, slot, all[n++]);
		seed_slot_scalar(seed, slot, all[n++]);
		seed_slot_key(seed, slot, all[n++]);
		for (uint64_t station = 0; station < 2; station++)
			for (int place = 0; place < 2; place++) {
				struct recipe_address at = {slot, station, (enum recipe_place)place};
				seed_recipe_scalar(seed, &at, all[n]);
				assert_true(group_scalar_ok(all[n++]));
			}
		assert_true(group_scalar_ok(all[slot * 7 + 1]));
	}
	seed_campaign_truth(seed, all[n++]);
	seed_record_scalar(seed, all[n++]);
	for (size_t i = 0; i < n; i++)
		for (size_t j = 0; j < i; j++)
			assert_memory_not_equal(all[i], all[j], 32);
	secret_free(&seed);
}

/* Mean 1/2, variance 1/12 and lag-1 covariance 0 of a uniform variate, five standard errors. */
static void variates_are_uniform(void **state)
{
	(void)state;
	uint8_t truth[TRUTH_SEED_BYTES] = {9};
	const uint64_t n = 20000;
	double sum = 0, squares = 0, lag = 0, last = 0.5;
	for (uint64_t m = 0; m < n; m++) {
		double u = seed_uniform(truth, m), d = u - 0.5;
		assert_true(u > 0 && u < 1);
		sum += d;
		squares += d * d;
		lag += d * (last - 0.5);
		last = u;
	}
	near_abs(sum / (double)n, 0, 5 * sqrt(1.0 / 12 / (double)n));
	near_abs(squares / (double)n, 1.0 / 12, 5 * sqrt(1.0 / 180 / (double)n));
	near_abs(lag / (double)n, 0, 5 * (1.0 / 12) / sqrt((double)n));
	assert_true(seed_uniform(truth, 3) == seed_uniform(truth, 3));
}

static void audit_seed_fits_a_json_integer(void **state)
{
	(void)state;
	for (int i = 0; i < 64; i++) {
		struct secret *seed = secret_random(SEED_BYTES);
		assert_true(seed_audit(seed) <= INT64_MAX);
		secret_free(&seed);
	}
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(commitments_bind_everything),    cmocka_unit_test(every_contribution_changes_the_seed),
    cmocka_unit_test(secrets_never_repeat),           cmocka_unit_test(variates_are_uniform),
    cmocka_unit_test(audit_seed_fits_a_json_integer),
};
SCENE_MAIN(tests)
