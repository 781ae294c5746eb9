/*
 * Resharing, repair, paper copies and words are frozen too: messages that another program made from the reference page
 * (tests/vectors/make_custody_moves.py) must pass here and lead to the same shares, group and digests byte for byte. A
 * message of ours that this reader would not take shows as well: ours must be of the same form.
 */
#include "tests/unit/custody/scene.h"
#include "tests/vectors/custody_moves.h"

#include "server/custody/paper.h"
#include "server/custody/repair.h"
#include "server/custody/reshare.h"
#include "server/custody/words.h"

static struct custody_group group;
static struct party_key person[32];
static struct party_public pub[32];

static int enter(void **state)
{
	(void)state;
	uint8_t y[3 * POINT_BYTES], seed[32], scalar[SCALAR_BYTES];
	for (uint8_t j = 1; j < 32; j++) {
		memset(seed, j, sizeof seed);
		group_scalar_from_u64(scalar, 1000U + j);
		if (party_key_from(seed, scalar, &person[j], NULL) != QB_OK)
			return -1;
		party_key_public(&person[j], &pub[j]);
	}
	group = (struct custody_group){.epoch = 5, .seal_epoch = 5, .n = 3, .k = 2};
	for (uint8_t i = 0; i < CAMPAIGN_ID_BYTES; i++)
		group.campaign[i] = i;
	memset(group.th, 0x5a, sizeof group.th);
	memset(group.seal_th, 0x5a, sizeof group.seal_th);
	unhex(moves_s, group.s, POINT_BYTES);
	unhex(moves_y, y, sizeof y);
	memcpy(group.y, y, sizeof y);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	for (int j = 1; j < 32; j++)
		party_key_free(&person[j]);
	return 0;
}

static void reshare_context(struct reshare_context *c)
{
	static const uint32_t dealer[2] = {1, 3};
	const struct party_public from[2] = {pub[1], pub[3]};
	assert_int_equal(reshare_context_init(c, &group, 4, dealer, from, 4, 3, &pub[11], NULL), QB_OK);
}

static void a_resharing_made_elsewhere(void **state)
{
	(void)state;
	static const char *const message[2] = {moves_reshare_deal_1, moves_reshare_deal_3};
	struct reshare_context c;
	struct deal deals[2];
	struct custody_group g;
	struct secret *share;
	struct buf again = {0};
	uint8_t bytes[1024], hash[64];
	reshare_context(&c);
	same_hex(c.ctx, moves_reshare_ctx, 64);
	for (int p = 0; p < 2; p++) {
		size_t n = unhex_any(message[p], bytes, sizeof bytes);
		assert_int_equal(reshare_parse(&c, bytes, n, &deals[p], NULL), QB_OK);
		assert_int_equal(reshare_check(&c, &deals[p], NULL), QB_OK);
		buf_clear(&again);
		deal_encode(&deals[p], &again);
		assert_int_equal(again.len, n);
		assert_memory_equal(again.data, bytes, n);
		bytes[n - 100] ^= 1; /* within the last ciphertext */
		struct deal other;
		assert_int_equal(reshare_parse(&c, bytes, n, &other, NULL), QB_OK);
		assert_int_equal(reshare_check(&c, &other, NULL), QB_CRYPTO);
	}
	for (uint32_t j = 1; j <= 4; j++) {
		assert_int_equal(reshare_share(&c, deals, j, &person[10 + j], &g, &share, NULL), QB_OK);
		unhex(moves_reshare_shares, bytes, (size_t)4 * SCALAR_BYTES);
		assert_memory_equal(secret_view(share), bytes + (j - 1) * SCALAR_BYTES, SCALAR_BYTES);
		secret_free(&share);
	}
	same_hex(g.y, moves_reshare_y, (size_t)4 * POINT_BYTES);
	same_hex(g.th, moves_reshare_th, 64);
	same_hex(g.s, moves_s, POINT_BYTES);
	keygen_certificate_hash(&g, hash);
	same_hex(hash, moves_reshare_certificate, 64);
	buf_free(&again);
}

static void a_repair_made_elsewhere(void **state)
{
	(void)state;
	static const uint32_t helper[2] = {1, 3};
	static const char *const first[2] = {moves_repair_split_1, moves_repair_split_3}, *const second[2] = {
	                                                                                      moves_repair_sum_1,
	                                                                                      moves_repair_sum_3};
	const struct party_public who[2] = {pub[1], pub[3]};
	struct repair_context c;
	struct repair_split splits[2];
	struct repair_sum sums[2], ours[2];
	struct secret *share;
	struct buf b = {0};
	uint8_t bytes[1024];
	assert_int_equal(repair_context_init(&c, &group, 6, 2, &pub[22], helper, who, NULL), QB_OK);
	same_hex(c.ctx, moves_repair_ctx, 64);
	for (int p = 0; p < 2; p++) {
		size_t n = unhex_any(first[p], bytes, sizeof bytes);
		assert_int_equal(repair_split_parse(&c, bytes, n, &splits[p], NULL), QB_OK);
		assert_int_equal(repair_split_check(&c, &splits[p], NULL), QB_OK);
	}
	for (int p = 0; p < 2; p++) {
		size_t n = unhex_any(second[p], bytes, sizeof bytes);
		assert_int_equal(n, REPAIR_SUM_BYTES);
		assert_int_equal(repair_sum_parse(&c, bytes, n, &sums[p], NULL), QB_OK);
		assert_int_equal(repair_sum_check(&c, splits, &sums[p], NULL), QB_OK);
		buf_clear(&b);
		assert_int_equal(repair_sum_make(&c, splits, helper[p], &person[helper[p]], &b, NULL), QB_OK);
		assert_int_equal(repair_sum_parse(&c, b.data, b.len, &ours[p], NULL), QB_OK);
	}
	assert_int_equal(repair_share(&c, splits, sums, &person[22], &share, NULL), QB_OK);
	same_hex(secret_view(share), moves_share_2, SCALAR_BYTES);
	secret_free(&share);
	sums[1] = ours[1]; /* one helper with either program */
	assert_int_equal(repair_share(&c, splits, sums, &person[22], &share, NULL), QB_OK);
	same_hex(secret_view(share), moves_share_2, SCALAR_BYTES);
	secret_free(&share);
	buf_free(&b);
}

static void a_paper_copy(void **state)
{
	(void)state;
	uint8_t copied[1190];
	struct buf text = {0}, back = {0};
	for (size_t i = 0; i < sizeof copied; i++)
		copied[i] = (uint8_t)(i * 37 + 11);
	paper_encode(copied, sizeof copied, "a copy", &text);
	assert_int_equal(text.len, strlen(moves_paper));
	assert_memory_equal(text.data, moves_paper, text.len);
	assert_int_equal(paper_decode(moves_paper, strlen(moves_paper), &back, NULL), QB_OK);
	assert_int_equal(back.len, sizeof copied);
	assert_memory_equal(back.data, copied, back.len);
	buf_free(&text);
	buf_free(&back);
}

static void words(void **state)
{
	(void)state;
	uint8_t all[WORDS_COUNT], fingerprint[PARTY_FINGERPRINT_BYTES];
	struct buf text = {0};
	for (size_t i = 0; i < sizeof all; i++)
		all[i] = (uint8_t)i;
	words_put(all, sizeof all, &text);
	assert_int_equal(text.len, strlen(moves_all_words));
	assert_memory_equal(text.data, moves_all_words, text.len);
	buf_clear(&text);
	party_fingerprint_bytes(&pub[22], fingerprint);
	words_put(fingerprint, sizeof fingerprint, &text);
	assert_int_equal(text.len, strlen(moves_fingerprint_words));
	assert_memory_equal(text.data, moves_fingerprint_words, text.len);
	buf_free(&text);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(a_resharing_made_elsewhere),
	    cmocka_unit_test(a_repair_made_elsewhere),
	    cmocka_unit_test(a_paper_copy),
	    cmocka_unit_test(words),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
