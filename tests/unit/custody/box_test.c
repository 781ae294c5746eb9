/* Boxes: what comes out, how large they are, and who can't open them. */
#include "tests/unit/custody/scene.h"

#include "server/custody/box.h"

static void opens_for_its_recipient_and_purpose_only(void **state)
{
	(void)state;
	struct party_key a, b;
	struct party_public pa;
	struct buf box = {0}, out = {0};
	party_key_new(&a);
	party_key_new(&b);
	party_key_public(&a, &pa);
	assert_int_equal(box_seal(pa.exchange, BOX_ANSWER, "request 7", 9, "not a drill", 11, 32, &box, NULL), QB_OK);
	assert_int_equal(box_open(a.exchange, BOX_ANSWER, "request 7", 9, box.data, box.len, &out, NULL), QB_OK);
	assert_int_equal(out.len, 11);
	assert_memory_equal(out.data, "not a drill", 11);
	buf_clear(&out);
	assert_int_equal(box_open(b.exchange, BOX_ANSWER, "request 7", 9, box.data, box.len, &out, NULL), QB_CRYPTO);
	assert_int_equal(box_open(a.exchange, BOX_SEALER, "request 7", 9, box.data, box.len, &out, NULL), QB_CRYPTO);
	assert_int_equal(box_open(a.exchange, BOX_ANSWER, "request 8", 9, box.data, box.len, &out, NULL), QB_CRYPTO);
	for (size_t at = 0; at < box.len; at += 7) {
		box.data[at] ^= 1;
		assert_int_not_equal(box_open(a.exchange, BOX_ANSWER, "request 7", 9, box.data, box.len, &out, NULL),
		                     QB_OK);
		box.data[at] ^= 1;
	}
	for (size_t n = 0; n < box.len; n++)
		assert_int_not_equal(box_open(a.exchange, BOX_ANSWER, "request 7", 9, box.data, n, &out, NULL), QB_OK);
	assert_int_equal(out.len, 0);
	buf_free(&box);
	buf_free(&out);
	party_key_free(&a);
	party_key_free(&b);
}

static void size_says_nothing_about_the_answer(void **state)
{
	(void)state;
	static const char *const answers[] = {"drill", "not a drill", "planned, not played", "cannot say", ""};
	struct party_key a;
	struct party_public pa;
	party_key_new(&a);
	party_key_public(&a, &pa);
	for (size_t i = 0; i < 5; i++) {
		struct buf box = {0};
		assert_int_equal(
		    box_seal(pa.exchange, BOX_ANSWER, NULL, 0, answers[i], strlen(answers[i]), 64, &box, NULL), QB_OK);
		assert_int_equal(box.len, 64 + BOX_OVERHEAD_BYTES);
		buf_free(&box);
	}
	struct buf box = {0};
	assert_int_equal(box_seal(pa.exchange, BOX_ANSWER, NULL, 0, "too long", 8, 7, &box, NULL), QB_RANGE);
	assert_int_equal(box_seal(pa.exchange, BOX_ANSWER, NULL, 0, "", 0, BOX_CONTENT_MAX + 1, &box, NULL), QB_RANGE);
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		uint8_t bad[POINT_BYTES];
		scene_bad_point(q, bad);
		assert_int_equal(box_seal(bad, BOX_ANSWER, NULL, 0, "x", 1, 7, &box, NULL), QB_CRYPTO);
	}
	assert_int_equal(box.len, 0);
	party_key_free(&a);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(opens_for_its_recipient_and_purpose_only),
    cmocka_unit_test(size_says_nothing_about_the_answer),
};
SCENE_MAIN(tests)
