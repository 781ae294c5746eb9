/* Malicious dealers, recipients and relays during a resharing: each attack is mounted, each must fail by name. */
#include "tests/unit/custody/reshare_scene.h"

#include <stdio.h>

#include "server/custody/deal.h"

static struct reshare_scene r; /* 3 of 4 to 2 of 4; dealers 2, 3, 4 */

static int enter(void **state)
{
	(void)state;
	reshare_scene_make(&r, 4, 3, 4, 2);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	reshare_scene_free(&r);
	return 0;
}

/* The deal at `place` is refused with its sender's name, and so is the whole resharing. */
static void refused(uint32_t place, const char *why)
{
	struct custody_group g;
	struct qb_error e = {0};
	char who[40];
	snprintf(who, sizeof who, "resharing by custodian %u", r.dealer[place]);
	assert_int_equal(reshare_check(&r.c, &r.deal[place], &e), QB_CRYPTO);
	assert_string_equal(e.where, who);
	assert_non_null(strstr(e.what, why));
	assert_int_equal(reshare_group(&r.c, r.deal, &g, NULL), QB_CRYPTO);
}

/* A dealer deals a secret of their own: everything proves well, but the group key would become another. */
static void another_secret_is_dealt(void **state)
{
	(void)state;
	struct dealing g = reshare_dealing(&r.c);
	struct deal good = r.deal[1];
	struct buf b = {0};
	assert_int_equal(dealing_make(&g, 3, &r.old.key[2], NULL, &b, NULL), QB_OK);
	assert_int_equal(reshare_parse(&r.c, b.data, b.len, &r.deal[1], NULL), QB_OK);
	assert_int_equal(dealing_check(&g, &r.deal[1], NULL), QB_OK);
	refused(1, "something else than this custodian's share");
	buf_clear(&b); /* nor another custodian's share, which a thief may hold */
	assert_int_equal(dealing_make(&g, 3, &r.old.key[2], r.old.share[0], &b, NULL), QB_OK);
	assert_int_equal(reshare_parse(&r.c, b.data, b.len, &r.deal[1], NULL), QB_OK);
	refused(1, "something else than this custodian's share");
	buf_free(&b);
	r.deal[1] = good;
}

/* A thief of a signing key commits to Y_i, which is public, without knowing s_i. */
static void public_share_without_possession(void **state)
{
	(void)state;
	struct dealing g = reshare_dealing(&r.c);
	struct deal good = r.deal[1];
	struct buf b = {0};
	assert_int_equal(dealing_make(&g, 3, &r.old.key[2], NULL, &b, NULL), QB_OK);
	assert_int_equal(reshare_parse(&r.c, b.data, b.len, &r.deal[1], NULL), QB_OK);
	memcpy(r.deal[1].commitment[0], r.old.g.y[2], POINT_BYTES);
	reshare_scene_resign(&r, &r.deal[1]);
	refused(1, "possession");
	buf_free(&b);
	r.deal[1] = good;
}

static void invalid_points_and_scalars(void **state)
{
	(void)state;
	struct deal *d = &r.deal[0], good = *d;
	uint8_t *const fields[] = {d->commitment[0], d->commitment[1], d->pop_r, d->ephemeral};
	for (size_t f = 0; f < 4; f++)
		for (int q = 0; q < SCENE_BAD_POINTS; q++) {
			scene_bad_point(q, fields[f]);
			reshare_scene_resign(&r, d);
			refused(0, "not a valid point");
			*d = good;
		}
	scene_add_order(d->pop_z);
	reshare_scene_resign(&r, d);
	refused(0, "canonical");
	*d = good;
}

/* Polynomials of another degree would change how many are needed; other sizes are no messages. */
static void too_few_or_too_many_commitments(void **state)
{
	(void)state;
	struct buf b = {0};
	struct deal out;
	for (uint32_t k = 1; k <= 3; k += 2) {
		struct deal d = r.deal[0];
		d.k = k;
		memcpy(d.commitment[2], d.commitment[0], POINT_BYTES);
		reshare_scene_resign(&r, &d);
		buf_clear(&b);
		deal_encode(&d, &b);
		assert_int_equal(reshare_parse(&r.c, b.data, b.len, &out, NULL), QB_FORMAT);
		b.data[12] = 2;
		assert_int_equal(reshare_parse(&r.c, b.data, b.len, &out, NULL), QB_FORMAT);
		assert_int_equal(reshare_check(&r.c, &d, NULL), QB_CRYPTO);
	}
	buf_clear(&b);
	deal_encode(&r.deal[0], &b);
	for (size_t n = 0; n < b.len; n++)
		assert_int_equal(reshare_parse(&r.c, b.data, n, &out, NULL), QB_FORMAT);
	buf_u8(&b, 0);
	assert_int_equal(reshare_parse(&r.c, b.data, b.len, &out, NULL), QB_FORMAT);
	b.len--;
	for (size_t at = 0; at < b.len; at += 3) { /* the relay alters a byte: refused, and nobody is blamed */
		struct qb_error e = {0};
		b.data[at] ^= 4;
		enum qb_status s = reshare_parse(&r.c, b.data, b.len, &out, NULL);
		if (s == QB_OK)
			s = reshare_check(&r.c, &out, &e);
		assert_true(s == QB_FORMAT || (s == QB_CRYPTO && strstr(e.what, "signature is false") != NULL));
		b.data[at] ^= 4;
	}
	buf_free(&b);
}

/* -1/x mod l: x^(l-2), by Fermat, times l-1. */
static void minus_inverse(const uint8_t x[SCALAR_BYTES], uint8_t out[SCALAR_BYTES])
{
	uint8_t order[SCALAR_BYTES] = {0}, result[SCALAR_BYTES];
	scene_add_order(order);
	order[0] = (uint8_t)(order[0] - 2);
	group_scalar_from_u64(result, 1);
	for (int bit = 255; bit >= 0; bit--) {
		group_scalar_mul(result, result, result);
		if ((order[bit / 8] >> (bit % 8) & 1) != 0)
			group_scalar_mul(result, result, x);
	}
	order[0] = (uint8_t)(order[0] + 1);
	group_scalar_mul(out, result, order);
}

/* The last dealer cancels the others' top coefficients, so that one share alone would be the key. */
static void top_coefficient_cancelled(void **state)
{
	(void)state;
	uint8_t lambda[SCALAR_BYTES], term[POINT_BYTES], sum[POINT_BYTES], inverse[SCALAR_BYTES];
	struct deal *d = &r.deal[2], good = *d;
	struct custody_group g;
	struct qb_error e = {0};
	struct secret *part;
	for (size_t p = 0; p < 2; p++) {
		assert_true(group_lagrange(lambda, r.dealer, 3, p));
		assert_true(group_mul(p == 0 ? sum : term, lambda, r.deal[p].commitment[1]));
	}
	assert_true(group_add(sum, sum, term));
	assert_true(group_lagrange(lambda, r.dealer, 3, 2));
	minus_inverse(lambda, inverse);
	assert_true(group_mul(d->commitment[1], inverse, sum));
	/* The proof of possession is over all commitments: the dealer knows s_4, so it can be made again. */
	uint8_t w[SCALAR_BYTES], c[SCALAR_BYTES];
	struct transcript t;
	group_scalar_random(w);
	assert_true(group_mul_base(d->pop_r, w));
	transcript_begin(&t, "quietbell/1/reshare/possession");
	transcript_field(&t, d->ctx, 64);
	transcript_u64(&t, d->from);
	for (uint32_t m = 0; m < d->k; m++)
		transcript_field(&t, d->commitment[m], POINT_BYTES);
	transcript_field(&t, d->ephemeral, POINT_BYTES);
	transcript_field(&t, d->pop_r, POINT_BYTES);
	group_challenge(&t, c);
	group_scalar_mul(c, c, secret_view(r.old.share[3]));
	group_scalar_add(d->pop_z, w, c);
	reshare_scene_resign(&r, d);
	assert_int_equal(reshare_check(&r.c, d, NULL), QB_OK);
	assert_int_equal(reshare_group(&r.c, r.deal, &g, &e), QB_CRYPTO);
	assert_non_null(strstr(e.what, "degree 1 vanishes"));
	/* The dealer can't know that polynomial: its shares are bad, and a complaint names it. */
	e = (struct qb_error){0};
	assert_int_equal(reshare_take(&r.c, d, 1, &r.next.key[0], &part, &e), QB_CRYPTO);
	assert_string_equal(e.where, "resharing by custodian 4");
	*d = good;
}

static void bad_shares_are_found_and_judged(void **state)
{
	(void)state;
	struct dealing g = reshare_dealing(&r.c);
	struct custody_group group;
	struct secret *share;
	struct buf b = {0};
	enum complaint_verdict verdict;
	struct qb_error e = {0};
	struct deal good = r.deal[0];
	uint8_t nonsense[DEAL_SHARE_BYTES] = {1, 2, 3};
	const uint8_t *const shares[] = {nonsense, good.share[2]};
	for (size_t q = 0; q < 2; q++) {
		e = (struct qb_error){0};
		memcpy(r.deal[0].share[1], shares[q], DEAL_SHARE_BYTES);
		reshare_scene_resign(&r, &r.deal[0]);
		assert_int_equal(reshare_check(&r.c, &r.deal[0], NULL), QB_OK);
		assert_int_equal(reshare_share(&r.c, r.deal, 2, &r.next.key[1], &group, &share, &e), QB_CRYPTO);
		assert_string_equal(e.where, "resharing by custodian 2");
		assert_null(share);
		buf_clear(&b);
		assert_int_equal(complaint_dealing_make(&g, &r.deal[0], 2, &r.next.key[1], &b, NULL), QB_OK);
		assert_int_equal(complaint_dealing_judge(&g, &r.deal[0], b.data, b.len, &verdict, NULL), QB_OK);
		assert_int_equal(verdict, COMPLAINT_SENDER_GUILTY);
		r.deal[0] = good;
	}
	buf_free(&b);
}

static void false_complaints(void **state)
{
	(void)state;
	struct dealing g = reshare_dealing(&r.c);
	struct buf b = {0};
	enum complaint_verdict v;
	assert_int_equal(complaint_dealing_make(&g, &r.deal[0], 2, &r.next.key[1], &b, NULL), QB_OK);
	assert_int_equal(complaint_dealing_judge(&g, &r.deal[0], b.data, b.len, &v, NULL), QB_OK);
	assert_int_equal(v, COMPLAINT_FALSE);
	for (size_t at = 12; at < COMPLAINT_BYTES; at++) {
		b.data[at] ^= 2;
		assert_int_equal(complaint_dealing_judge(&g, &r.deal[0], b.data, b.len, &v, NULL), QB_OK);
		assert_int_equal(v, COMPLAINT_FALSE);
		b.data[at] ^= 2;
	}
	for (size_t n = 0; n < b.len; n++)
		assert_int_equal(complaint_dealing_judge(&g, &r.deal[0], b.data, n, &v, NULL), QB_FORMAT);
	assert_int_equal(complaint_dealing_judge(&g, &r.deal[1], b.data, b.len, &v, NULL), QB_FORMAT);
	b.data[4] = 1; /* custodian 1 did not deal */
	assert_int_equal(complaint_dealing_judge(&g, &r.deal[0], b.data, b.len, &v, NULL), QB_FORMAT);
	b.data[4] = 2;
	/* A signed deal of another attempt is no evidence in this one, where its shares would not decrypt. */
	struct reshare_scene other = r;
	struct party_public from[SCENE_MAX];
	memcpy(from, r.c.from, sizeof r.c.from[0] * 3);
	assert_int_equal(reshare_context_init(&other.c, &r.old.g, 9, r.dealer, from, 4, 2, r.next.pub, NULL), QB_OK);
	reshare_scene_deal(&other, 0);
	assert_int_equal(complaint_dealing_judge(&g, &other.deal[0], b.data, b.len, &v, NULL), QB_FORMAT);
	r.deal[0].share[1][0] ^= 1; /* spoilt on the way: nobody is judged by an unsigned deal */
	assert_int_equal(complaint_dealing_judge(&g, &r.deal[0], b.data, b.len, &v, NULL), QB_CRYPTO);
	r.deal[0].share[1][0] ^= 1;
	buf_free(&b);
}

/* Deals of another attempt, another dealer's place, key generation's deals, two deals shown to two people. */
static void replayed_reordered_equivocated(void **state)
{
	(void)state;
	struct reshare_context next;
	struct custody_group g, h;
	struct deal out, swap;
	struct buf b = {0};
	assert_int_equal(reshare_context_init(&next, &r.old.g, 2, r.dealer, r.c.from, 4, 2, r.next.pub, NULL), QB_OK);
	deal_encode(&r.deal[0], &b);
	assert_int_equal(reshare_parse(&next, b.data, b.len, &out, NULL), QB_FORMAT);
	memcpy(b.data + 16, next.ctx, 64);
	assert_int_equal(reshare_parse(&next, b.data, b.len, &out, NULL), QB_OK);
	assert_int_equal(reshare_check(&next, &out, NULL), QB_CRYPTO);
	buf_clear(&b);
	deal_encode(&r.old.deal[1], &b);
	assert_int_equal(reshare_parse(&r.c, b.data, b.len, &out, NULL), QB_FORMAT);
	out = r.old.deal[1];
	assert_int_equal(reshare_check(&r.c, &out, NULL), QB_CRYPTO);
	out = r.deal[1]; /* relabelled: the labels of what is signed differ */
	out.kind = DEAL_KEYGEN;
	assert_int_equal(reshare_check(&r.c, &out, NULL), QB_CRYPTO);
	assert_int_equal(reshare_group(&r.c, r.deal, &g, NULL), QB_OK);
	swap = r.deal[0];
	r.deal[0] = r.deal[1];
	r.deal[1] = swap;
	assert_int_equal(reshare_group(&r.c, r.deal, &h, NULL), QB_CRYPTO);
	r.deal[0] = r.deal[1]; /* one dealer twice */
	assert_int_equal(reshare_group(&r.c, r.deal, &h, NULL), QB_CRYPTO);
	reshare_scene_deal(&r, 0);
	reshare_scene_deal(&r, 1);
	assert_int_equal(reshare_group(&r.c, r.deal, &h, NULL), QB_OK);
	assert_memory_not_equal(g.th, h.th, 64);
	uint8_t sig[SIGN_BYTES];
	keygen_certificate_sign(&h, r.next.key[1].seed, sig);
	assert_false(keygen_certificate_signed_by(&g, r.next.pub[1].sign, sig));
	buf_free(&b);
}

/* The service names dealers or recipients with keys of its own: their ctx is another, so nobody else's deals fit. */
static void keys_of_the_services_own(void **state)
{
	(void)state;
	struct reshare_context c;
	struct party_key own;
	struct party_public pub, party[4];
	struct buf b = {0};
	struct deal out;
	party_key_new(&own);
	party_key_public(&own, &pub);
	memcpy(party, r.next.pub, sizeof party);
	party[3] = pub;
	assert_int_equal(reshare_context_init(&c, &r.old.g, 1, r.dealer, r.c.from, 4, 2, party, NULL), QB_OK);
	assert_memory_not_equal(c.ctx, r.c.ctx, 64);
	deal_encode(&r.deal[0], &b);
	assert_int_equal(reshare_parse(&c, b.data, b.len, &out, NULL), QB_FORMAT);
	/* As a dealer it has no share to deal on. */
	struct party_public from[3] = {pub, r.c.from[1], r.c.from[2]};
	assert_int_equal(reshare_context_init(&c, &r.old.g, 1, r.dealer, from, 4, 2, r.next.pub, NULL), QB_OK);
	struct secret *made_up = secret_new(SCALAR_BYTES);
	group_scalar_random(secret_bytes(made_up));
	assert_int_equal(reshare_make(&c, 2, &own, made_up, &b, NULL), QB_CRYPTO);
	secret_free(&made_up);
	party_key_free(&own);
	buf_free(&b);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(another_secret_is_dealt),    cmocka_unit_test(public_share_without_possession),
	    cmocka_unit_test(invalid_points_and_scalars), cmocka_unit_test(too_few_or_too_many_commitments),
	    cmocka_unit_test(top_coefficient_cancelled),  cmocka_unit_test(bad_shares_are_found_and_judged),
	    cmocka_unit_test(false_complaints),           cmocka_unit_test(replayed_reordered_equivocated),
	    cmocka_unit_test(keys_of_the_services_own),
	};
	if (secret_setup(NULL) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
