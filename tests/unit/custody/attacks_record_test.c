/* Records that were copied, shifted, swapped, altered or sealed to another key: none passes the check before opening.
 */
#include "tests/unit/custody/scene.h"

#include "server/custody/aead.h"

#define AT_R (RECORD_HEADER_BYTES)
#define AT_W (AT_R + 32)
#define AT_C (AT_W + 32)
#define AT_Z (AT_C + 32)

static struct scene s;
static struct buf slot;
static struct record rec;

static int enter(void **state)
{
	(void)state;
	scene_make(&s, 3, 2);
	scene_seal(&s, RECORD_SLOT, 31, "live", &slot, &rec);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	buf_free(&slot);
	scene_free(&s);
	return 0;
}

static enum qb_status check(const struct buf *b)
{
	struct record out;
	return record_check(&s.g, b->data, b->len, &out, NULL);
}

/* R' = R + tG, W' = W + tG2, z' = z + ct: would hold if the challenge did not cover R, W and the header. Opened as a
 * harmless canary, D' would give away D = D' - t Y, and with it the slot. */
static void shifted_copy_as_a_canary(void **state)
{
	(void)state;
	uint8_t t[SCALAR_BYTES], tg[POINT_BYTES], tg2[POINT_BYTES], ct[SCALAR_BYTES];
	group_scalar_random(t);
	assert_true(group_mul_base(tg, t) && group_mul(tg2, t, s.g.g2));
	for (int as_canary = 0; as_canary < 2; as_canary++) {
		struct buf b = {0};
		struct record_header h = scene_header(&s, as_canary ? RECORD_CANARY : RECORD_SLOT, 31);
		uint8_t header[RECORD_HEADER_BYTES];
		record_header_encode(&h, header);
		buf_put(&b, header, sizeof header);
		buf_put(&b, slot.data + AT_R, record_size(h.type) - RECORD_HEADER_BYTES);
		assert_true(group_add(b.data + AT_R, b.data + AT_R, tg));
		assert_true(group_add(b.data + AT_W, b.data + AT_W, tg2));
		group_scalar_mul(ct, b.data + AT_C, t);
		group_scalar_add(b.data + AT_Z, b.data + AT_Z, ct);
		assert_int_equal(check(&b), QB_CRYPTO);
		buf_free(&b);
	}
}

/* An honest canary whose R is replaced by the slot's: nobody without r can prove it. */
static void foreign_r_in_an_own_record(void **state)
{
	(void)state;
	struct buf b = {0};
	struct record canary;
	scene_seal(&s, RECORD_CANARY, 1, "canary", &b, &canary);
	memcpy(b.data + AT_R, slot.data + AT_R, 32);
	assert_int_equal(check(&b), QB_CRYPTO);
	memcpy(b.data + AT_W, slot.data + AT_W, 32);
	assert_int_equal(check(&b), QB_CRYPTO);
	memcpy(b.data + AT_C, slot.data + AT_C, 64);
	assert_int_equal(check(&b), QB_CRYPTO);
	buf_free(&b);
}

static void invalid_points_and_scalars(void **state)
{
	(void)state;
	struct buf b = {0};
	buf_put(&b, slot.data, slot.len);
	for (size_t at = AT_R; at <= AT_W; at += 32)
		for (int q = 0; q < SCENE_BAD_POINTS; q++) {
			scene_bad_point(q, b.data + at);
			assert_int_equal(check(&b), QB_CRYPTO);
			memcpy(b.data, slot.data, slot.len);
		}
	for (size_t at = AT_C; at <= AT_Z; at += 32) {
		scene_add_order(b.data + at); /* the same value mod l */
		assert_int_equal(check(&b), QB_CRYPTO);
		memcpy(b.data, slot.data, slot.len);
		b.data[at + 31] |= 0x80;
		assert_int_equal(check(&b), QB_CRYPTO);
		memcpy(b.data, slot.data, slot.len);
		memset(b.data + at, 0, 32);
		assert_int_equal(check(&b), QB_CRYPTO);
		memcpy(b.data, slot.data, slot.len);
	}
	assert_int_equal(check(&b), QB_OK);
	buf_free(&b);
}

static void every_byte_is_covered(void **state)
{
	(void)state;
	struct buf b = {0};
	buf_put(&b, slot.data, slot.len);
	for (size_t at = 0; at < b.len; at += at < 300 ? 1 : 97) {
		b.data[at] ^= 1;
		assert_int_not_equal(check(&b), QB_OK);
		b.data[at] ^= 1;
	}
	for (size_t n = 0; n < slot.len; n += n < 300 ? 1 : 97) {
		struct record out;
		assert_int_equal(record_check(&s.g, slot.data, n, &out, NULL), QB_FORMAT);
	}
	buf_u8(&b, 0);
	assert_int_equal(check(&b), QB_FORMAT);
	buf_free(&b);
}

static void records_swapped_between_slots(void **state)
{
	(void)state;
	struct buf other = {0};
	struct record swapped;
	scene_seal(&s, RECORD_SLOT, 32, "null", &other, &swapped);
	assert_int_equal(record_expect(&swapped, RECORD_SLOT, 31, NULL), QB_CRYPTO);
	assert_int_equal(record_expect(&rec, RECORD_SLOT, 31, NULL), QB_OK);
	memcpy(other.data, slot.data, RECORD_HEADER_BYTES); /* with the header rewritten to match */
	assert_int_equal(check(&other), QB_CRYPTO);
	buf_free(&other);
}

static void claim_copied_by_another_analyst(void **state)
{
	(void)state;
	struct buf claim = {0};
	struct record_header h = scene_header(&s, RECORD_CLAIM, 1), read;
	memset(h.author, 0xa, sizeof h.author);
	assert_int_equal(record_seal(&s.g, &h, "{}", 2, &claim, NULL), QB_OK);
	assert_int_equal(check(&claim), QB_OK);
	memset(h.author, 0xb, sizeof h.author);
	record_header_encode(&h, claim.data);
	assert_int_equal(record_header_decode(claim.data, &read, NULL), QB_OK);
	assert_int_equal(check(&claim), QB_CRYPTO);
	buf_free(&claim);
}

static void sealed_to_the_servers_key(void **state)
{
	(void)state;
	struct scene servers;
	struct buf b = {0};
	struct record out;
	struct custody_group mixed = s.g;
	scene_make(&servers, 3, 2);
	scene_seal(&servers, RECORD_SLOT, 31, "null", &b, &out);
	assert_int_equal(check(&b), QB_CRYPTO);
	memcpy(mixed.s, servers.g.s, POINT_BYTES); /* its S under the honest transcript */
	struct record_header h = scene_header(&s, RECORD_SLOT, 31);
	buf_clear(&b);
	assert_int_equal(record_seal(&mixed, &h, "null", 4, &b, NULL), QB_OK);
	assert_int_equal(check(&b), QB_CRYPTO);
	buf_free(&b);
	scene_free(&servers);
}

static void of_another_epoch_or_campaign(void **state)
{
	(void)state;
	struct record out;
	struct custody_group g = s.g;
	g.seal_epoch++;
	assert_int_equal(record_check(&g, slot.data, slot.len, &out, NULL), QB_CRYPTO);
	g = s.g;
	g.campaign[0] ^= 1;
	assert_int_equal(record_check(&g, slot.data, slot.len, &out, NULL), QB_CRYPTO);
}

/* A sealer that pads with something else than zeros could hide a message; it would prove well, but not open. */
static void bad_padding_is_refused(void **state)
{
	(void)state;
	static const struct {
		uint32_t length;
		size_t dirty;
	} cases[] = {{4, 20}, {257, 300}, {UINT32_MAX, 300}, {4, 259}};
	for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
		uint8_t padded[260] = {0};
		struct buf out = {0};
		for (int k = 0; k < 4; k++)
			padded[k] = (uint8_t)(cases[i].length >> (8 * k));
		if (cases[i].dirty < sizeof padded)
			padded[cases[i].dirty] = 1;
		assert_false(unpad_content(padded, 256, &out));
		assert_int_equal(out.len, 0);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(shifted_copy_as_a_canary),      cmocka_unit_test(foreign_r_in_an_own_record),
	    cmocka_unit_test(invalid_points_and_scalars),    cmocka_unit_test(every_byte_is_covered),
	    cmocka_unit_test(records_swapped_between_slots), cmocka_unit_test(claim_copied_by_another_analyst),
	    cmocka_unit_test(sealed_to_the_servers_key),     cmocka_unit_test(of_another_epoch_or_campaign),
	    cmocka_unit_test(bad_padding_is_refused),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
