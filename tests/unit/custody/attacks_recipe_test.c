/* A service that wants to turn a null into a live drill by swapping slot keys, and other games with wrapped recipes. */
#include "tests/unit/custody/scene.h"

#include "server/custody/recipe.h"

static const uint8_t ctx[64] = "a context";
static const struct recipe_address at = {31, 0, RECIPE_MAIN};
static uint8_t honest_key[SLOT_KEY_BYTES], other_key[SLOT_KEY_BYTES], commitment[64], prekey[POINT_BYTES];
static uint8_t scalar[SCALAR_BYTES];
static struct secret *prekey_secret;
static struct buf wrapped;

static int enter(void **state)
{
	(void)state;
	random_bytes(honest_key, sizeof honest_key);
	random_bytes(other_key, sizeof other_key);
	recipe_key_commitment(scene_campaign, 31, honest_key, commitment);
	prekey_secret = recipe_prekey_new(prekey);
	group_scalar_random(scalar);
	return recipe_wrap(ctx, &at, prekey, scalar, honest_key, "gain 0", 6, &wrapped, NULL) == QB_OK ? 0 : -1;
}

static int leave(void **state)
{
	(void)state;
	secret_free(&prekey_secret);
	buf_free(&wrapped);
	return 0;
}

static enum qb_status unwrap(const struct buf *b, const uint8_t *key, const uint8_t *committed, struct buf *out)
{
	return recipe_unwrap(ctx, scene_campaign, &at, b->data, b->len, prekey_secret, key, committed, out, NULL);
}

/* The service wraps a recipe of its own under another key, which opens well: only the commitment in the ledger stops
 * it. */
static void another_slot_key(void **state)
{
	(void)state;
	struct buf forged = {0}, out = {0};
	uint8_t forged_commitment[64];
	assert_int_equal(recipe_wrap(ctx, &at, prekey, scalar, other_key, "gain 1", 6, &forged, NULL), QB_OK);
	recipe_key_commitment(scene_campaign, 31, other_key, forged_commitment);
	assert_int_equal(unwrap(&forged, other_key, forged_commitment, &out), QB_OK); /* the attack would work ... */
	assert_memory_equal(out.data, "gain 1", 6);
	buf_clear(&out);
	assert_int_equal(unwrap(&forged, other_key, commitment, &out), QB_CRYPTO); /* ... but for the commitment */
	assert_int_equal(unwrap(&forged, honest_key, commitment, &out), QB_CRYPTO);
	assert_int_equal(unwrap(&wrapped, other_key, commitment, &out), QB_CRYPTO);
	assert_int_equal(unwrap(&wrapped, honest_key, commitment, &out), QB_OK);
	buf_free(&forged);
	buf_free(&out);
}

/* The commitment is bound to its slot and campaign, and all 64 bytes count. */
static void commitments_of_other_slots(void **state)
{
	(void)state;
	uint8_t wrong[64], campaign[CAMPAIGN_ID_BYTES] = "another";
	struct buf out = {0};
	recipe_key_commitment(scene_campaign, 32, honest_key, wrong);
	assert_int_equal(unwrap(&wrapped, honest_key, wrong, &out), QB_CRYPTO);
	recipe_key_commitment(campaign, 31, honest_key, wrong);
	assert_int_equal(unwrap(&wrapped, honest_key, wrong, &out), QB_CRYPTO);
	for (size_t i = 0; i < 64; i++) {
		memcpy(wrong, commitment, 64);
		wrong[i] ^= 1;
		assert_int_equal(recipe_key_check(scene_campaign, 31, honest_key, wrong, NULL), QB_CRYPTO);
	}
	assert_int_equal(out.len, 0);
}

static void altered_truncated_extended(void **state)
{
	(void)state;
	struct buf b = {0}, out = {0};
	uint8_t hash[64], changed[64];
	recipe_hash(wrapped.data, wrapped.len, hash);
	buf_put(&b, wrapped.data, wrapped.len);
	for (size_t i = 0; i < b.len; i += i < 100 ? 1 : 61) {
		b.data[i] ^= 1;
		assert_int_not_equal(unwrap(&b, honest_key, commitment, &out), QB_OK);
		recipe_hash(b.data, b.len, changed);
		assert_memory_not_equal(hash, changed, 64);
		b.data[i] ^= 1;
	}
	for (b.len = 0; b.len < wrapped.len; b.len += b.len < 100 ? 1 : 61)
		assert_int_equal(unwrap(&b, honest_key, commitment, &out), QB_FORMAT);
	b.len = wrapped.len;
	buf_u8(&b, 0);
	assert_int_equal(unwrap(&b, honest_key, commitment, &out), QB_FORMAT);
	assert_int_equal(out.len, 0);
	buf_free(&b);
}

/* A recipe of another key generation (superseded by a reseal) under the same slot number. */
static void another_context(void **state)
{
	(void)state;
	uint8_t other[64] = "another context";
	struct buf out = {0};
	assert_int_equal(recipe_unwrap(other, scene_campaign, &at, wrapped.data, wrapped.len, prekey_secret, honest_key,
	                               commitment, &out, NULL),
	                 QB_CRYPTO);
	assert_int_equal(out.len, 0);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(another_slot_key),
	    cmocka_unit_test(commitments_of_other_slots),
	    cmocka_unit_test(altered_truncated_extended),
	    cmocka_unit_test(another_context),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
