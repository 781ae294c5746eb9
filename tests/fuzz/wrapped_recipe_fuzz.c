/* Wrapped recipes and boxes from outside: only the valid one may open. */
#include "tests/fuzz/group_fixed.h"

#include "server/custody/box.h"
#include "server/custody/recipe.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct buf wrapped, box;
	static struct secret *prekey_secret;
	static uint8_t prekey[POINT_BYTES], commitment[SLOT_KEY_COMMITMENT_BYTES];
	const uint8_t ctx[64] = {1}, campaign[CAMPAIGN_ID_BYTES] = {2}, key[SLOT_KEY_BYTES] = {3};
	const struct recipe_address at = {31, 1, RECIPE_SPARE};
	struct buf b = {0}, out = {0};
	if (wrapped.len == 0) {
		uint8_t scalar[SCALAR_BYTES];
		CHECK(secret_setup(NULL) == QB_OK);
		group_scalar_from_u64(scalar, 99);
		prekey_secret = secret_from(scalar, sizeof scalar);
		CHECK(group_mul_base(prekey, scalar));
		group_scalar_from_u64(scalar, 77);
		recipe_key_commitment(campaign, 31, key, commitment);
		CHECK(recipe_wrap(ctx, &at, prekey, scalar, key, "gain 0", 6, &wrapped, NULL) == QB_OK);
		CHECK(box_seal(prekey, BOX_ANSWER, "ad", 2, "drill", 5, 32, &box, NULL) == QB_OK);
	}
	bool same = fixed_overlay(&wrapped, data, size, &b);
	enum qb_status s = recipe_unwrap(ctx, campaign, &at, b.data, b.len, prekey_secret, key, commitment, &out, NULL);
	CHECK((s == QB_OK) == same);
	buf_clear(&b);
	same = fixed_overlay(&box, data, size, &b);
	CHECK((box_open(prekey_secret, BOX_ANSWER, "ad", 2, b.data, b.len, &out, NULL) == QB_OK) == same);
	buf_free(&b);
	buf_free(&out);
	return 0;
}
