/* Both messages of a repair: only what their helper signed may pass. */
#include "tests/fuzz/parties_fixed.h"

#include "server/custody/repair.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

static struct secret *share_of(uint64_t i)
{
	uint8_t scalar[SCALAR_BYTES];
	group_scalar_from_u64(scalar, 7 + 11 * i);
	return secret_from(scalar, sizeof scalar);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
	static struct repair_context c;
	static struct repair_split splits[2], split;
	static struct buf first[2], second;
	static const uint32_t helpers[2] = {1, 3};
	struct repair_sum sum;
	struct buf b = {0};
	fixed_parties();
	if (second.len == 0) {
		struct party_public who[2] = {fixed_pub[0], fixed_pub[2]};
		CHECK(repair_context_init(&c, &fixed, 1, 2, &fixed_pub[1], helpers, who, NULL) == QB_OK);
		for (size_t p = 0; p < 2; p++) {
			struct secret *share = share_of(helpers[p]);
			CHECK(repair_split_make(&c, helpers[p], &fixed_key[helpers[p] - 1], share, &first[p], NULL) ==
			      QB_OK);
			CHECK(repair_split_parse(&c, first[p].data, first[p].len, &splits[p], NULL) == QB_OK);
			secret_free(&share);
		}
		CHECK(repair_sum_make(&c, splits, 1, &fixed_key[0], &second, NULL) == QB_OK);
	}
	bool same = fixed_overlay(&first[0], data, size, &b);
	bool good = repair_split_parse(&c, b.data, b.len, &split, NULL) == QB_OK &&
	            repair_split_check(&c, &split, NULL) == QB_OK;
	CHECK(good == same);
	buf_clear(&b);
	same = fixed_overlay(&second, data, size, &b);
	good = repair_sum_parse(&c, b.data, b.len, &sum, NULL) == QB_OK &&
	       repair_sum_check(&c, splits, &sum, NULL) == QB_OK;
	CHECK(good == same);
	buf_free(&b);
	return 0;
}
