/* A fixed group for the fuzz targets: custodians' polynomial 7 + 11 x, so that every run sees the same keys. */
#ifndef QB_FUZZ_GROUP_FIXED_H
#define QB_FUZZ_GROUP_FIXED_H

#include <string.h>

#include "server/base/check.h"
#include "server/custody/partial.h"

static struct custody_group fixed;
static struct secret *fixed_share;    /* custodian 1's */
static struct buf fixed_record_bytes; /* a slot record sealed to it */
static struct record fixed_record;

static inline void fixed_setup(void)
{
	uint8_t scalar[SCALAR_BYTES], wide[64] = "second generator";
	struct record_header h = {.type = RECORD_GUESS, .epoch = 1, .index = 3};
	if (fixed.n != 0)
		return;
	CHECK(secret_setup(NULL) == QB_OK);
	fixed.epoch = fixed.seal_epoch = 1;
	fixed.n = 3;
	fixed.k = 2;
	memset(fixed.th, 0x55, sizeof fixed.th);
	memset(fixed.seal_th, 0x55, sizeof fixed.seal_th);
	group_scalar_from_u64(scalar, 7);
	CHECK(group_mul_base(fixed.s, scalar) && group_from_hash(fixed.g2, wide));
	for (uint64_t j = 1; j <= 3; j++) {
		group_scalar_from_u64(scalar, 7 + 11 * j);
		CHECK(group_mul_base(fixed.y[j - 1], scalar));
	}
	group_scalar_from_u64(scalar, 18);
	fixed_share = secret_from(scalar, sizeof scalar);
	group_scalar_from_u64(scalar, 1234567);
	CHECK(record_seal_with(&fixed, &h, scalar, "live", 4, &fixed_record_bytes, NULL) == QB_OK);
	CHECK(record_check(&fixed, fixed_record_bytes.data, fixed_record_bytes.len, &fixed_record, NULL) == QB_OK);
}

/* Half of the inputs are taken as they are; the others are laid over a valid message. True when the result is that one.
 */
static inline bool fixed_overlay(const struct buf *valid, const uint8_t *data, size_t size, struct buf *out)
{
	if (size > 0 && data[0] % 2 == 1) {
		buf_put(out, valid->data, valid->len);
		for (size_t i = 1; i < size && i <= valid->len; i++)
			out->data[i - 1] ^= data[i];
	} else {
		buf_put(out, data, size);
	}
	return out->len == valid->len && memcmp(out->data, valid->data, valid->len) == 0;
}

#endif
