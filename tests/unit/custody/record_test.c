/* Sealing and opening of every type, by the sealer's and the clients' form. */
#include "tests/unit/custody/scene.h"

static void every_type_has_one_size(void **state)
{
	(void)state;
	struct scene s;
	struct buf a = {0}, b = {0};
	static const char full[RECORD_CLAIM_BYTES] = "drill";
	scene_make(&s, 3, 2);
	for (enum record_type t = RECORD_SEED; t < RECORD_ANSWER; t++) {
		struct record_header h = scene_header(&s, t, 5);
		struct record rec;
		size_t capacity = custody_fixed_size(t);
		buf_clear(&a);
		buf_clear(&b);
		assert_int_equal(record_seal(&s.g, &h, "", 0, &a, NULL), QB_OK);
		assert_int_equal(record_seal(&s.g, &h, full, capacity, &b, NULL), QB_OK);
		assert_int_equal(a.len, b.len);
		assert_int_equal(a.len, record_size(t));
		assert_int_equal(a.len, 128 + 128 + 4 + capacity + 16);
		assert_int_equal(record_check(&s.g, b.data, b.len, &rec, NULL), QB_OK);
		assert_int_equal(record_expect(&rec, t, 5, NULL), QB_OK);
		assert_int_equal(record_expect(&rec, t, 6, NULL), QB_CRYPTO);
		assert_int_equal(record_seal(&s.g, &h, full, capacity + 1, &b, NULL), QB_RANGE);
	}
	assert_int_equal(record_size(RECORD_ANSWER), 0);
	struct record_header h = scene_header(&s, RECORD_ANSWER, 0);
	assert_int_equal(record_seal(&s.g, &h, "", 0, &a, NULL), QB_RANGE);
	assert_int_equal(custody_fixed_size((enum record_type)200), 0);
	buf_free(&a);
	buf_free(&b);
	scene_free(&s);
}

static void sealed_again_with_r_gives_the_same_bytes(void **state)
{
	(void)state;
	struct scene s;
	struct buf a = {0}, b = {0}, c = {0}, plain = {0};
	struct record rec;
	uint8_t r[SCALAR_BYTES], z[POINT_BYTES];
	scene_make(&s, 3, 2);
	struct record_header h = scene_header(&s, RECORD_SLOT, 31);
	group_scalar_random(r);
	assert_int_equal(record_seal_with(&s.g, &h, r, "live", 4, &a, NULL), QB_OK);
	assert_int_equal(record_seal_with(&s.g, &h, r, "live", 4, &b, NULL), QB_OK);
	assert_int_equal(a.len, b.len);
	assert_memory_equal(a.data, b.data, a.len);
	assert_int_equal(record_seal_with(&s.g, &h, r, "null", 4, &c, NULL), QB_OK);
	assert_memory_not_equal(a.data, c.data, a.len);
	assert_int_equal(record_check(&s.g, a.data, a.len, &rec, NULL), QB_OK);
	assert_true(group_mul(z, r, s.g.s));
	assert_int_equal(record_open(&s.g, &rec, z, &plain, NULL), QB_OK);
	assert_int_equal(plain.len, 4);
	assert_memory_equal(plain.data, "live", 4);
	/* The clients' form never repeats itself. */
	buf_clear(&a);
	buf_clear(&b);
	assert_int_equal(record_seal(&s.g, &h, "live", 4, &a, NULL), QB_OK);
	assert_int_equal(record_seal(&s.g, &h, "live", 4, &b, NULL), QB_OK);
	assert_memory_not_equal(a.data + 128, b.data + 128, 32);
	buf_free(&a);
	buf_free(&b);
	buf_free(&c);
	buf_free(&plain);
	scene_free(&s);
}

static void header_keeps_all_fields(void **state)
{
	(void)state;
	uint8_t bytes[RECORD_HEADER_BYTES];
	struct record_header h = {.type = RECORD_CLAIM,
	                          .epoch = 0xfffffffe,
	                          .index = UINT64_MAX - 1,
	                          .start_gps_ns = -3,
	                          .duration_ns = 77},
	                     back;
	memset(h.campaign, 1, sizeof h.campaign);
	memset(h.author, 2, sizeof h.author);
	memset(h.auxiliary, 3, sizeof h.auxiliary);
	record_header_encode(&h, bytes);
	assert_memory_equal(bytes, "QBR1\x01\x00\x02\x00", 8);
	assert_int_equal(record_header_decode(bytes, &back, NULL), QB_OK);
	assert_int_equal(back.type, h.type);
	assert_int_equal(back.epoch, h.epoch);
	assert_true(back.index == h.index && back.start_gps_ns == -3 && back.duration_ns == 77);
	assert_memory_equal(back.campaign, h.campaign, 16);
	assert_memory_equal(back.author, h.author, 16);
	assert_memory_equal(back.auxiliary, h.auxiliary, 32);
	bytes[7] = 1; /* flags */
	assert_int_equal(record_header_decode(bytes, &back, NULL), QB_FORMAT);
	bytes[7] = 0;
	bytes[28] = 1; /* the reserved u32 */
	assert_int_equal(record_header_decode(bytes, &back, NULL), QB_FORMAT);
	bytes[28] = 0;
	bytes[127] = 1; /* zeros at the end */
	assert_int_equal(record_header_decode(bytes, &back, NULL), QB_FORMAT);
	bytes[127] = 0;
	bytes[6] = 9; /* reserved type */
	assert_int_equal(record_header_decode(bytes, &back, NULL), QB_FORMAT);
}

static void header_must_be_the_groups(void **state)
{
	(void)state;
	struct scene s;
	struct buf a = {0};
	scene_make(&s, 3, 2);
	struct record_header h = scene_header(&s, RECORD_GUESS, 0);
	h.epoch++;
	assert_int_equal(record_seal(&s.g, &h, "", 0, &a, NULL), QB_RANGE);
	h.epoch--;
	h.campaign[3] ^= 1;
	assert_int_equal(record_seal(&s.g, &h, "", 0, &a, NULL), QB_RANGE);
	assert_int_equal(a.len, 0);
	scene_free(&s);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(every_type_has_one_size),
    cmocka_unit_test(sealed_again_with_r_gives_the_same_bytes),
    cmocka_unit_test(header_keeps_all_fields),
    cmocka_unit_test(header_must_be_the_groups),
};
SCENE_MAIN(tests)
