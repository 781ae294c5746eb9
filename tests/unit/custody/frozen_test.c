/*
 * The formats are frozen: everything that follows from fixed inputs is compared with values computed a second time, in
 * another language, from docs/reference-custody.md (tests/vectors/make_custody_frozen.py).
 */
#include "tests/unit/custody/scene.h"
#include "tests/vectors/custody_frozen.h"

#include "server/custody/aead.h"
#include "server/custody/seed.h"
#include "server/ledger/entry.h"

static uint8_t campaign[CAMPAIGN_ID_BYTES];
static struct keygen_context context;
static struct custody_group group;
static struct secret *seed;

static int enter(void **state)
{
	(void)state;
	struct party_public pub[3];
	uint8_t contribution[4][CONTRIBUTION_BYTES], scalar[SCALAR_BYTES], bytes[32];
	for (uint8_t i = 0; i < sizeof campaign; i++)
		campaign[i] = i;
	for (uint8_t j = 1; j <= 3; j++) {
		memset(bytes, j, sizeof bytes);
		group_scalar_from_u64(scalar, 1000U + j);
		struct party_key key;
		if (party_key_from(bytes, scalar, &key, NULL) != QB_OK)
			return -1;
		party_key_public(&key, &pub[j - 1]);
		party_key_free(&key);
	}
	if (keygen_context_init(&context, campaign, 5, 2, 3, 2, pub, NULL) != QB_OK)
		return -1;
	for (int j = 0; j < 4; j++)
		memset(contribution[j], 0x40 + j, CONTRIBUTION_BYTES);
	seed = seed_draw(context.ctx, 1, 0, (const uint8_t(*)[CONTRIBUTION_BYTES])contribution, 3);
	group = (struct custody_group){.epoch = 5, .seal_epoch = 5, .n = 3, .k = 2};
	memcpy(group.campaign, campaign, sizeof campaign);
	memcpy(group.ctx, context.ctx, sizeof group.ctx);
	memset(group.th, 0x5a, sizeof group.th);
	memset(group.seal_th, 0x5a, sizeof group.seal_th);
	group_scalar_from_u64(scalar, 424242);
	unhex(frozen_g2, group.g2, POINT_BYTES);
	return group_mul_base(group.s, scalar) ? 0 : -1;
}

static int leave(void **state)
{
	(void)state;
	secret_free(&seed);
	return 0;
}

static void context_and_draw(void **state)
{
	(void)state;
	uint8_t contribution[CONTRIBUTION_BYTES], out[64], bits[8];
	same_hex(context.ctx, frozen_ctx, 64);
	memset(contribution, 0x42, sizeof contribution);
	seed_commit(context.ctx, 1, 2, contribution, out);
	same_hex(out, frozen_commitment, 64);
	same_hex(secret_view(seed), frozen_seed, 64);
	seed_slot_truth(seed, 31, out);
	same_hex(out, frozen_truth, 32);
	unhex(frozen_uniform_bits, bits, 8);
	assert_true(seed_uniform(out, 7) == uniform_from_u64(le64_load(bits)));
	seed_slot_scalar(seed, 31, out);
	same_hex(out, frozen_r, 32);
	seed_slot_key(seed, 31, out);
	same_hex(out, frozen_slot_key, 32);
	seed_recipe_scalar(seed, &(struct recipe_address){31, 2, RECIPE_SPARE}, out);
	same_hex(out, frozen_recipe_scalar, 32);
	seed_campaign_truth(seed, out);
	same_hex(out, frozen_campaign_truth, 32);
	seed_record_scalar(seed, out);
	same_hex(out, frozen_seed_record_scalar, 32);
	le64_store(bits, seed_audit(seed));
	same_hex(bits, frozen_audit_seed, 8);
}

static void sealed_record(void **state)
{
	(void)state;
	static const char content[] = "{\"drill\":\"live\"}";
	struct record_header h = {.type = RECORD_SLOT,
	                          .epoch = 5,
	                          .index = 31,
	                          .start_gps_ns = INT64_C(1488789012000000000),
	                          .duration_ns = UINT64_C(3600000000000)};
	struct buf b = {0};
	struct record rec;
	uint8_t key[32], commitment[64], r[32], hash[64];
	memcpy(h.campaign, campaign, sizeof campaign);
	memset(h.author, 9, sizeof h.author);
	seed_slot_key(seed, 31, key);
	recipe_key_commitment(campaign, 31, key, commitment);
	same_hex(commitment, frozen_key_commitment, 64);
	memcpy(h.auxiliary, commitment, 32);
	seed_slot_scalar(seed, 31, r);
	same_hex(group.s, frozen_s, 32);
	assert_int_equal(record_seal_with(&group, &h, r, content, strlen(content), &b, NULL), QB_OK);
	same_hex(b.data, frozen_record_head, 256);
	blake2b_512(hash, b.data, b.len);
	same_hex(hash, frozen_record_hash, 64);
	assert_int_equal(record_check(&group, b.data, b.len, &rec, NULL), QB_OK);
	same_hex(rec.id, frozen_record_id, 64);
	buf_free(&b);
}

/* The second generator that key generation derives is the one of the page. */
static void second_generator(void **state)
{
	(void)state;
	struct scene s;
	struct transcript t;
	uint8_t wide[64], g2[POINT_BYTES];
	transcript_begin(&t, "quietbell/1/record/second-generator");
	transcript_field(&t, group.th, 64);
	transcript_end(&t, wide);
	assert_true(group_from_hash(g2, wide));
	same_hex(g2, frozen_g2, 32);
	scene_make(&s, 3, 2);
	transcript_begin(&t, "quietbell/1/record/second-generator");
	transcript_field(&t, s.g.th, 64);
	transcript_end(&t, wide);
	assert_true(group_from_hash(g2, wide));
	assert_memory_equal(g2, s.g.g2, 32);
	scene_free(&s);
}

static void wrapped_recipe(void **state)
{
	(void)state;
	const struct recipe_address at = {31, 2, RECIPE_SPARE};
	struct buf b = {0};
	uint8_t scalar[32], prekey[32], key[32], hash[64];
	group_scalar_from_u64(scalar, 777);
	assert_true(group_mul_base(prekey, scalar));
	seed_recipe_scalar(seed, &at, scalar);
	seed_slot_key(seed, 31, key);
	assert_int_equal(recipe_wrap(context.ctx, &at, prekey, scalar, key, "gain 0", 6, &b, NULL), QB_OK);
	recipe_hash(b.data, b.len, hash);
	same_hex(hash, frozen_recipe_hash, 64);
	buf_free(&b);
}

/*
 * One outer ciphertext that the cipher accepts under two slot keys (found by the same script). A server could use such
 * a pair to turn a null into a live drill after sealing; the commitment in the ledger is what refuses the second key.
 */
static void one_ciphertext_under_two_slot_keys(void **state)
{
	(void)state;
	const struct recipe_address at = {31, 2, RECIPE_SPARE};
	uint8_t key[2][32], ad[88], ct[RECIPE_BYTES - 24] = {0}, plain[2][RECIPE_BYTES], commitment[64], prekey[32];
	struct buf b = {0}, out = {0};
	struct qb_error e = {0};
	struct secret *prekey_secret = recipe_prekey_new(prekey);
	unhex(frozen_two_key_counter, ct, 4);
	unhex(frozen_two_key_block, ct + 160, 16);
	unhex(frozen_two_key_tag, ct + sizeof ct - 16, 16);
	seed_slot_key(seed, 31, key[0]);
	unhex(frozen_two_key_other, key[1], 32);
	memcpy(ad, context.ctx, 64);
	le64_store(ad + 64, at.slot);
	le64_store(ad + 72, at.station);
	le64_store(ad + 80, at.place);
	for (int k = 0; k < 2; k++) {
		struct transcript t;
		transcript_begin(&t, "quietbell/1/recipe/outer-key");
		transcript_field(&t, context.ctx, 64);
		transcript_u64(&t, at.slot);
		transcript_u64(&t, at.station);
		transcript_u64(&t, at.place);
		transcript_field(&t, key[k], 32);
		assert_true(aead_open(&t, ad, sizeof ad, ct, sizeof ct, plain[k])); /* the cipher takes both */
	}
	assert_memory_not_equal(plain[0], plain[1], sizeof ct - 16);
	buf_put(&b, "QBY1", 4);
	buf_u32(&b, at.place);
	buf_u64(&b, at.slot);
	buf_u64(&b, at.station);
	buf_put(&b, ct, sizeof ct);
	recipe_key_commitment(campaign, 31, key[0], commitment);
	assert_int_equal(
	    recipe_unwrap(context.ctx, campaign, &at, b.data, b.len, prekey_secret, key[1], commitment, &out, &e),
	    QB_CRYPTO);
	assert_string_equal(e.where, "slot key");
	secret_free(&prekey_secret);
	buf_free(&b);
}

static void certificate_entries_and_keys(void **state)
{
	(void)state;
	static const char body[] = "{\"what\":\"hold\"}";
	struct custody_group g = group;
	uint8_t scalar[32], out[64], nonce[32], digest[64], signature[64], pk[32], id[16];
	char want[40] = "", fingerprint[PARTY_FINGERPRINT_TEXT];
	for (uint64_t j = 1; j <= 3; j++) {
		group_scalar_from_u64(scalar, 50 + j);
		assert_true(group_mul_base(g.y[j - 1], scalar));
	}
	keygen_certificate_hash(&g, out);
	same_hex(out, frozen_certificate, 64);
	memset(nonce, 3, sizeof nonce);
	entry_hide(nonce, body, strlen(body), out);
	same_hex(out, frozen_hidden, 64);
	struct secret *key = secret_random(32);
	unhex(frozen_entry_digest_of_body, digest, 64);
	sign_public(key, pk);
	sign_bytes(key, digest, 64, signature);
	assert_true(entry_verify_body(pk, body, strlen(body), signature));
	secret_free(&key);
	sign_key_id(context.party[0].sign, id);
	same_hex(id, frozen_key_id, 16);
	party_fingerprint(&context.party[0], fingerprint);
	for (size_t i = 0; i < 8; i++) {
		memcpy(want + 5 * i, frozen_fingerprint + 4 * i, 4);
		want[5 * i + 4] = i < 7 ? '-' : '\0';
	}
	assert_string_equal(fingerprint, want);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(context_and_draw),
	    cmocka_unit_test(sealed_record),
	    cmocka_unit_test(second_generator),
	    cmocka_unit_test(wrapped_recipe),
	    cmocka_unit_test(one_ciphertext_under_two_slot_keys),
	    cmocka_unit_test(certificate_entries_and_keys),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
