/* Malicious custodians and a malicious server at an opening: forged, replayed, malformed and too few partial openings.
 */
#include "tests/unit/custody/scene.h"

#include <sodium.h>

#define AT_I 4
#define AT_D (4 + 4 + 4 + 64 + 64)
#define AT_C (AT_D + 32)
#define AT_Z (AT_C + 32)

static struct scene s;
static struct buf slot, other_slot;
static struct record rec, other;
static struct partial_authority spot, truth;
static struct buf good; /* custodian 1's partial of rec under spot */

static int enter(void **state)
{
	(void)state;
	scene_make(&s, 3, 2);
	scene_seal(&s, RECORD_SLOT, 31, "live", &slot, &rec);
	scene_seal(&s, RECORD_SLOT, 32, "null", &other_slot, &other);
	spot = scene_authority(PARTIAL_SPOT, 0x11);
	truth = scene_authority(PARTIAL_TRUTH, 0x11);
	assert_int_equal(partial_make(&s.g, &rec, 1, s.share[0], &spot, &good, NULL), QB_OK);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	buf_free(&slot);
	buf_free(&other_slot);
	buf_free(&good);
	scene_free(&s);
	return 0;
}

static enum qb_status check(const uint8_t *p, const struct record *r, const struct partial_authority *a)
{
	struct partial out;
	return partial_check(&s.g, r, a, p, PARTIAL_BYTES, &out, NULL);
}

/* Fields of the partial-opening transcript, D on request: what a weaker protocol would hash. */
static void weak_challenge(bool with_d, const uint8_t *d, const uint8_t *a1, const uint8_t *a2, uint8_t c[32])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/opening/partial");
	transcript_field(&t, s.g.th, 64);
	transcript_field(&t, rec.id, 64);
	transcript_u64(&t, 1);
	transcript_u64(&t, PARTIAL_SPOT);
	transcript_field(&t, spot.hash, 64);
	transcript_field(&t, s.g.y[0], 32);
	transcript_field(&t, rec.r, 32);
	if (with_d)
		transcript_field(&t, d, 32);
	transcript_field(&t, a1, 32);
	transcript_field(&t, a2, 32);
	group_challenge(&t, c);
}

/* Custodian 1 picks A' first and solves D from the challenge: holds whenever D is not in the challenge. */
static void d_left_out_of_the_challenge(void **state)
{
	(void)state;
	uint8_t w[32], a1[32], a2[32], c[32], z[32], inverse[32], zr[32], diff[32], d[32], bytes[PARTIAL_BYTES];
	group_scalar_random(w);
	assert_true(group_mul_base(a1, w));
	group_scalar_random(z);
	assert_true(group_mul_base(a2, z)); /* any point */
	weak_challenge(false, NULL, a1, a2, c);
	group_scalar_mul(z, c, secret_view(s.share[0]));
	group_scalar_add(z, z, w);
	assert_int_equal(crypto_core_ristretto255_scalar_invert(inverse, c), 0);
	assert_true(group_mul(zr, z, rec.r) && group_sub(diff, zr, a2) && group_mul(d, inverse, diff));
	/* The forgery satisfies the weaker verifier: zR - cD == A' and zG - cY == A. */
	uint8_t cd[32], back[32];
	assert_true(group_mul(cd, c, d) && group_sub(back, zr, cd));
	assert_memory_equal(back, a2, 32);
	memcpy(bytes, good.data, sizeof bytes);
	assert_memory_not_equal(bytes + AT_D, d, 32);
	memcpy(bytes + AT_D, d, 32);
	memcpy(bytes + AT_C, c, 32);
	memcpy(bytes + AT_Z, z, 32);
	assert_int_equal(check(bytes, &rec, &spot), QB_CRYPTO);
	/* The field list above with D is the real one: an honest proof made from it passes. */
	assert_true(group_mul(d, secret_view(s.share[0]), rec.r) && group_mul(a2, w, rec.r));
	weak_challenge(true, d, a1, a2, c);
	group_scalar_mul(z, c, secret_view(s.share[0]));
	group_scalar_add(z, z, w);
	memcpy(bytes + AT_D, d, 32);
	memcpy(bytes + AT_C, c, 32);
	memcpy(bytes + AT_Z, z, 32);
	assert_int_equal(check(bytes, &rec, &spot), QB_OK);
}

static void d_changed(void **state)
{
	(void)state;
	uint8_t bytes[PARTIAL_BYTES], shift[32], d[32];
	struct qb_error e = {0};
	struct partial out;
	group_scalar_random(shift);
	assert_true(group_mul_base(d, shift));
	memcpy(bytes, good.data, sizeof bytes);
	assert_true(group_add(bytes + AT_D, bytes + AT_D, d));
	assert_int_equal(partial_check(&s.g, &rec, &spot, bytes, sizeof bytes, &out, &e), QB_CRYPTO);
	assert_string_equal(e.where, "opening by custodian 1");
}

static void replayed_for_something_else(void **state)
{
	(void)state;
	uint8_t bytes[PARTIAL_BYTES];
	struct partial_authority request = scene_authority(PARTIAL_SPOT, 0x12);
	assert_int_equal(check(good.data, &rec, &spot), QB_OK);
	assert_int_equal(check(good.data, &other, &spot), QB_CRYPTO);
	assert_int_equal(check(good.data, &rec, &truth), QB_CRYPTO);
	assert_int_equal(check(good.data, &rec, &request), QB_CRYPTO);
	/* The plain fields rewritten to match. */
	memcpy(bytes, good.data, sizeof bytes);
	memcpy(bytes + 12, other.id, 64);
	assert_int_equal(check(bytes, &other, &spot), QB_CRYPTO);
	memcpy(bytes, good.data, sizeof bytes);
	bytes[8] = PARTIAL_TRUTH;
	memcpy(bytes + 12 + 64, truth.hash, 64);
	assert_int_equal(check(bytes, &rec, &truth), QB_CRYPTO);
	memcpy(bytes, good.data, sizeof bytes);
	memcpy(bytes + 12 + 64, request.hash, 64);
	assert_int_equal(check(bytes, &rec, &request), QB_CRYPTO);
	for (uint8_t i = 0; i < 5; i++) { /* another custodian's name on it, and none */
		memcpy(bytes, good.data, sizeof bytes);
		bytes[AT_I] = i;
		assert_int_equal(check(bytes, &rec, &spot), i == 1 ? QB_OK : i == 2 || i == 3 ? QB_CRYPTO : QB_FORMAT);
	}
}

static void malformed_partials(void **state)
{
	(void)state;
	uint8_t bytes[PARTIAL_BYTES + 1] = {0};
	struct partial out;
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		memcpy(bytes, good.data, PARTIAL_BYTES);
		scene_bad_point(q, bytes + AT_D);
		assert_int_equal(check(bytes, &rec, &spot), QB_CRYPTO);
	}
	for (size_t at = AT_C; at <= AT_Z; at += 32) {
		memcpy(bytes, good.data, PARTIAL_BYTES);
		scene_add_order(bytes + at);
		assert_int_equal(check(bytes, &rec, &spot), QB_CRYPTO);
		memcpy(bytes, good.data, PARTIAL_BYTES);
		bytes[at + 31] |= 0x80;
		assert_int_equal(check(bytes, &rec, &spot), QB_CRYPTO);
		memset(bytes + at, 0, 32);
		assert_int_equal(check(bytes, &rec, &spot), QB_CRYPTO);
	}
	memcpy(bytes, good.data, PARTIAL_BYTES);
	for (size_t n = 0; n <= PARTIAL_BYTES + 1; n++)
		assert_int_equal(partial_check(&s.g, &rec, &spot, bytes, n, &out, NULL),
		                 n == PARTIAL_BYTES ? QB_OK : QB_FORMAT);
	for (size_t at = 0; at < PARTIAL_BYTES; at++) {
		bytes[at] ^= 8;
		assert_int_not_equal(check(bytes, &rec, &spot), QB_OK);
		bytes[at] ^= 8;
	}
}

/* A hash longer than its purpose allows would be outside the proof: refused. */
static void authority_with_a_tail(void **state)
{
	(void)state;
	struct partial_authority a = truth;
	struct buf out = {0};
	a.hash[40] = 1;
	assert_int_equal(partial_make(&s.g, &rec, 1, s.share[0], &a, &out, NULL), QB_FORMAT);
	assert_int_equal(check(good.data, &rec, &a), QB_FORMAT);
	a.purpose = (enum partial_purpose)77;
	assert_int_equal(partial_make(&s.g, &rec, 1, s.share[0], &a, &out, NULL), QB_REFUSED);
	assert_int_equal(out.len, 0);
}

static void too_few_repeated_or_mixed(void **state)
{
	(void)state;
	struct partial p[3], mixed[2];
	struct buf plain = {0};
	for (uint32_t i = 1; i <= 3; i++)
		scene_partial(&s, &rec, i, &spot, &p[i - 1]);
	assert_int_equal(partial_open(&s.g, &rec, p, 0, &plain, NULL), QB_CRYPTO);
	assert_int_equal(partial_open(&s.g, &rec, p, 1, &plain, NULL), QB_CRYPTO);
	mixed[0] = mixed[1] = p[0];
	assert_int_equal(partial_open(&s.g, &rec, mixed, 2, &plain, NULL), QB_CRYPTO);
	mixed[1].i = 2; /* one custodian under two numbers: combines to something else, the tag refuses */
	assert_int_equal(partial_open(&s.g, &rec, mixed, 2, &plain, NULL), QB_CRYPTO);
	mixed[1].i = 99;
	assert_int_equal(partial_open(&s.g, &rec, mixed, 2, &plain, NULL), QB_CRYPTO);
	scene_partial(&s, &other, 2, &spot, &mixed[1]);
	assert_int_equal(partial_open(&s.g, &rec, mixed, 2, &plain, NULL), QB_CRYPTO);
	scene_partial(&s, &rec, 2, &truth, &mixed[1]);
	assert_int_equal(partial_open(&s.g, &rec, mixed, 2, &plain, NULL), QB_CRYPTO);
	assert_int_equal(partial_open(&s.g, &other, p, 2, &plain, NULL), QB_CRYPTO);
	assert_int_equal(plain.len, 0);
	assert_int_equal(partial_open(&s.g, &rec, p + 1, 2, &plain, NULL), QB_OK);
	assert_memory_equal(plain.data, "live", 4);
	buf_free(&plain);
}

/* An analyst with a share of another group, or a made-up one, does not become a custodian. */
static void shares_of_another_group(void **state)
{
	(void)state;
	struct scene servers;
	struct buf out = {0};
	struct partial got;
	scene_make(&servers, 3, 2);
	assert_int_equal(partial_make(&s.g, &rec, 1, servers.share[0], &spot, &out, NULL), QB_CRYPTO);
	/* Made with the foreign group and shown to the honest one. */
	struct custody_group mixed = s.g;
	memcpy(mixed.y, servers.g.y, sizeof mixed.y);
	assert_int_equal(partial_make(&mixed, &rec, 1, servers.share[0], &spot, &out, NULL), QB_OK);
	assert_int_equal(partial_check(&s.g, &rec, &spot, out.data, out.len, &got, NULL), QB_CRYPTO);
	buf_free(&out);
	scene_free(&servers);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(d_left_out_of_the_challenge), cmocka_unit_test(d_changed),
	    cmocka_unit_test(replayed_for_something_else), cmocka_unit_test(malformed_partials),
	    cmocka_unit_test(authority_with_a_tail),       cmocka_unit_test(too_few_repeated_or_mixed),
	    cmocka_unit_test(shares_of_another_group),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
