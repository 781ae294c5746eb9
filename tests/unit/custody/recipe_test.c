/* Wrapped recipes: both layers are needed, and every part of the address is bound. */
#include "tests/unit/custody/scene.h"

#include "server/custody/recipe.h"

static const uint8_t ctx[64] = "a context", slot_key[SLOT_KEY_BYTES] = "the key of slot thirty-one";

struct wrapped {
	struct recipe_address at;
	struct secret *prekey_secret;
	uint8_t prekey[POINT_BYTES], scalar[SCALAR_BYTES], commitment[SLOT_KEY_COMMITMENT_BYTES];
	struct buf bytes;
};

static void wrap(struct wrapped *w, const char *content)
{
	memset(w, 0, sizeof *w);
	w->at = (struct recipe_address){31, 2, RECIPE_SPARE};
	w->prekey_secret = recipe_prekey_new(w->prekey);
	group_scalar_random(w->scalar);
	recipe_key_commitment(scene_campaign, 31, slot_key, w->commitment);
	assert_int_equal(
	    recipe_wrap(ctx, &w->at, w->prekey, w->scalar, slot_key, content, strlen(content), &w->bytes, NULL), QB_OK);
	assert_int_equal(w->bytes.len, RECIPE_BYTES);
}

static void unwrap_free(struct wrapped *w)
{
	secret_free(&w->prekey_secret);
	buf_free(&w->bytes);
}

static enum qb_status unwrap(const struct wrapped *w, const struct recipe_address *at, const uint8_t *key,
                             struct buf *out)
{
	return recipe_unwrap(ctx, scene_campaign, at, w->bytes.data, w->bytes.len, w->prekey_secret, key, w->commitment,
	                     out, NULL);
}

static void comes_out_as_it_went_in(void **state)
{
	(void)state;
	struct wrapped w;
	struct buf out = {0}, again = {0};
	uint8_t a[64], b[64];
	wrap(&w, "gain 0");
	assert_int_equal(unwrap(&w, &w.at, slot_key, &out), QB_OK);
	assert_int_equal(out.len, 6);
	assert_memory_equal(out.data, "gain 0", 6);
	/* Deterministic in the scalar, so that the truth can name its hash and a verifier can make it again. */
	assert_int_equal(recipe_wrap(ctx, &w.at, w.prekey, w.scalar, slot_key, "gain 0", 6, &again, NULL), QB_OK);
	recipe_hash(w.bytes.data, w.bytes.len, a);
	recipe_hash(again.data, again.len, b);
	assert_memory_equal(a, b, 64);
	buf_free(&out);
	buf_free(&again);
	unwrap_free(&w);
}

static void only_at_its_own_address(void **state)
{
	(void)state;
	struct wrapped w;
	struct buf out = {0};
	wrap(&w, "gain 1");
	const struct recipe_address wrong[] = {{30, 2, RECIPE_SPARE}, {31, 1, RECIPE_SPARE}, {31, 2, RECIPE_MAIN}};
	for (size_t i = 0; i < 3; i++) {
		assert_int_equal(unwrap(&w, &wrong[i], slot_key, &out), QB_CRYPTO);
		/* A service that rewrites the address in front gets no further: it is in both keys. */
		struct wrapped moved = w;
		moved.bytes = (struct buf){0};
		buf_put(&moved.bytes, "QBY1", 4);
		buf_u32(&moved.bytes, (uint32_t)wrong[i].place);
		buf_u64(&moved.bytes, wrong[i].slot);
		buf_u64(&moved.bytes, wrong[i].station);
		buf_put(&moved.bytes, w.bytes.data + 24, w.bytes.len - 24);
		recipe_key_commitment(scene_campaign, wrong[i].slot, slot_key, moved.commitment);
		assert_int_equal(unwrap(&moved, &wrong[i], slot_key, &out), QB_CRYPTO);
		buf_free(&moved.bytes);
	}
	assert_int_equal(out.len, 0);
	unwrap_free(&w);
}

static void needs_both_layers(void **state)
{
	(void)state;
	struct wrapped w;
	struct buf out = {0};
	uint8_t other[SLOT_KEY_BYTES] = "another slot key", point[POINT_BYTES];
	wrap(&w, "gain 1");
	assert_int_equal(unwrap(&w, &w.at, other, &out), QB_CRYPTO);
	secret_free(&w.prekey_secret); /* a thief with the service's key file but not this prekey */
	w.prekey_secret = recipe_prekey_new(point);
	assert_int_equal(unwrap(&w, &w.at, slot_key, &out), QB_CRYPTO);
	assert_int_equal(out.len, 0);
	unwrap_free(&w);
}

/*
 * The cipher alone commits to no key: a ciphertext can be made that opens under two, once as a null and once as live.
 * So it is not enough that a key opens it; only the key that the ledger committed to may.
 */
static void a_key_that_opens_it_must_be_the_committed_one(void **state)
{
	(void)state;
	struct wrapped w;
	struct buf out = {0};
	uint8_t committed[SLOT_KEY_BYTES] = "the other key of the ciphertext";
	wrap(&w, "gain 1");
	assert_int_equal(unwrap(&w, &w.at, slot_key, &out), QB_OK);
	buf_clear(&out);
	recipe_key_commitment(scene_campaign, 31, committed, w.commitment);
	assert_int_equal(unwrap(&w, &w.at, slot_key, &out), QB_CRYPTO);
	assert_int_equal(out.len, 0);
	buf_free(&out);
	unwrap_free(&w);
}

static void refuses_what_it_can_not_wrap(void **state)
{
	(void)state;
	static const char large[RECIPE_CONTENT_BYTES + 1];
	struct wrapped w;
	struct buf out = {0};
	uint8_t bad[POINT_BYTES];
	wrap(&w, "");
	assert_int_equal(recipe_wrap(ctx, &w.at, w.prekey, w.scalar, slot_key, large, sizeof large, &out, NULL),
	                 QB_RANGE);
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		scene_bad_point(q, bad);
		assert_int_equal(recipe_wrap(ctx, &w.at, bad, w.scalar, slot_key, "", 0, &out, NULL), QB_CRYPTO);
	}
	struct recipe_address at = {0, 0, (enum recipe_place)2};
	assert_int_equal(recipe_wrap(ctx, &at, w.prekey, w.scalar, slot_key, "", 0, &out, NULL), QB_RANGE);
	assert_int_equal(out.len, 0);
	unwrap_free(&w);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(comes_out_as_it_went_in),
    cmocka_unit_test(only_at_its_own_address),
    cmocka_unit_test(needs_both_layers),
    cmocka_unit_test(a_key_that_opens_it_must_be_the_committed_one),
    cmocka_unit_test(refuses_what_it_can_not_wrap),
};
SCENE_MAIN(tests)
