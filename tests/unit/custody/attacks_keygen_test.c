/* Malicious custodians and a malicious relay during key generation: each attack is mounted, each must fail by name. */
#include "tests/unit/custody/scene.h"

#include <stdio.h>

#include "server/custody/aead.h"
#include "server/custody/complaint.h"

/* A correct proof of possession for what d says now, by whoever knows a0: rebuilt here from its field list. */
static void prove_possession(struct deal *d, const uint8_t a0[SCALAR_BYTES])
{
	uint8_t w[SCALAR_BYTES], c[SCALAR_BYTES];
	struct transcript t;
	group_scalar_random(w);
	assert_true(group_mul_base(d->pop_r, w));
	transcript_begin(&t, "quietbell/1/keygen/possession");
	transcript_field(&t, d->ctx, 64);
	transcript_u64(&t, d->from);
	for (uint32_t m = 0; m < d->k; m++)
		transcript_field(&t, d->commitment[m], POINT_BYTES);
	transcript_field(&t, d->ephemeral, POINT_BYTES);
	transcript_field(&t, d->pop_r, POINT_BYTES);
	group_challenge(&t, c);
	group_scalar_mul(c, c, a0);
	group_scalar_add(d->pop_z, w, c);
}

static void refused(const struct scene *s, uint32_t guilty)
{
	struct custody_group g;
	struct qb_error e = {0};
	char who[40];
	snprintf(who, sizeof who, "deal of custodian %u", guilty);
	assert_int_equal(deal_check(&s->c, &s->deal[guilty - 1], &e), QB_CRYPTO);
	assert_string_equal(e.where, who);
	assert_int_equal(keygen_group(&s->c, s->deal, &g, NULL), QB_CRYPTO);
}

static void own_proof_is_accepted(void **state)
{
	(void)state;
	struct scene s;
	uint8_t a0[SCALAR_BYTES];
	scene_parties(&s, 3, 2);
	group_scalar_random(a0);
	assert_true(group_mul_base(s.deal[2].commitment[0], a0));
	prove_possession(&s.deal[2], a0);
	scene_resign(&s, &s.deal[2]);
	assert_int_equal(deal_check(&s.c, &s.deal[2], NULL),
	                 QB_OK); /* so the refusals below are not for other reasons */
	scene_free(&s);
}

/* Custodian 3 waits for the others and picks C_30 so that the group key becomes a key of their own. */
static void rogue_key_without_possession(void **state)
{
	(void)state;
	struct scene s;
	uint8_t x[SCALAR_BYTES], mine[POINT_BYTES], sum[POINT_BYTES];
	scene_parties(&s, 3, 2);
	group_scalar_random(x);
	assert_true(group_mul_base(mine, x));
	assert_true(group_sub(sum, mine, s.deal[0].commitment[0]));
	assert_true(group_sub(s.deal[2].commitment[0], sum, s.deal[1].commitment[0]));
	prove_possession(&s.deal[2], x); /* knows x, not the logarithm of C_30 */
	scene_resign(&s, &s.deal[2]);
	refused(&s, 3);
	/* Copying another's commitment together with its proof does not help either. */
	memcpy(s.deal[2].commitment, s.deal[0].commitment, sizeof s.deal[0].commitment);
	memcpy(s.deal[2].pop_r, s.deal[0].pop_r, POINT_BYTES);
	memcpy(s.deal[2].pop_z, s.deal[0].pop_z, SCALAR_BYTES);
	memcpy(s.deal[2].ephemeral, s.deal[0].ephemeral, POINT_BYTES);
	scene_resign(&s, &s.deal[2]);
	refused(&s, 3);
	scene_free(&s);
}

static void top_coefficient_cancelled(void **state)
{
	(void)state;
	struct scene s;
	struct custody_group g;
	struct qb_error e = {0};
	uint8_t a0[SCALAR_BYTES], sum[POINT_BYTES], twice[POINT_BYTES];
	scene_parties(&s, 3, 2);
	struct deal *d = &s.deal[2];
	group_scalar_random(a0);
	assert_true(group_mul_base(d->commitment[0], a0));
	assert_true(group_add(sum, s.deal[0].commitment[1], s.deal[1].commitment[1]));
	assert_true(group_add(twice, sum, sum));
	assert_true(group_sub(d->commitment[1], sum, twice)); /* minus the others' sum */
	prove_possession(d, a0);
	scene_resign(&s, d);
	assert_int_equal(deal_check(&s.c, d, NULL), QB_OK);
	assert_int_equal(keygen_group(&s.c, s.deal, &g, &e), QB_CRYPTO);
	assert_non_null(strstr(e.what, "degree 1 vanishes"));
	scene_free(&s);
}

static void invalid_points_and_scalars_in_every_field(void **state)
{
	(void)state;
	struct scene s;
	scene_parties(&s, 3, 2);
	struct deal *d = &s.deal[1], good = *d;
	uint8_t *const fields[] = {d->commitment[0], d->commitment[1], d->pop_r, d->ephemeral};
	for (size_t f = 0; f < 4; f++)
		for (int q = 0; q < SCENE_BAD_POINTS; q++) {
			*d = good;
			scene_bad_point(q, fields[f]);
			scene_resign(&s, d);
			refused(&s, 2);
		}
	*d = good;
	scene_add_order(d->pop_z);
	scene_resign(&s, d);
	refused(&s, 2);
	*d = good;
	d->pop_z[31] |= 0x80;
	scene_resign(&s, d);
	refused(&s, 2);
	*d = good;
	memset(d->pop_z, 0, SCALAR_BYTES);
	scene_resign(&s, d);
	refused(&s, 2);
	scene_free(&s);
}

/* Polynomials of too high or too low a degree; a message that is too short or too long. */
static void too_few_or_too_many_commitments(void **state)
{
	(void)state;
	struct scene s;
	struct buf b = {0}, c = {0};
	struct deal out;
	scene_parties(&s, 4, 3);
	for (uint32_t k = 2; k <= 4; k += 2) { /* one fewer, one more, with the count changed to match and signed */
		struct deal d = s.deal[0];
		d.k = k;
		memcpy(d.commitment[3], d.commitment[0], POINT_BYTES);
		scene_resign(&s, &d);
		buf_clear(&b);
		deal_encode(&d, &b);
		assert_int_equal(deal_parse(&s.c, b.data, b.len, &out, NULL), QB_FORMAT);
		b.data[12] = 3; /* and with the count left as it should be */
		assert_int_equal(deal_parse(&s.c, b.data, b.len, &out, NULL), QB_FORMAT);
		assert_int_equal(deal_check(&s.c, &d, NULL), QB_CRYPTO);
	}
	buf_clear(&b);
	deal_encode(&s.deal[0], &b);
	for (size_t n = 0; n < b.len; n++)
		assert_int_equal(deal_parse(&s.c, b.data, n, &out, NULL), QB_FORMAT);
	buf_put(&c, b.data, b.len);
	buf_u8(&c, 0);
	assert_int_equal(deal_parse(&s.c, c.data, c.len, &out, NULL), QB_FORMAT);
	for (size_t at = 0; at < b.len; at += 3) { /* the relay alters a byte */
		b.data[at] ^= 4;
		enum qb_status got = deal_parse(&s.c, b.data, b.len, &out, NULL);
		assert_true(got != QB_OK || deal_check(&s.c, &out, NULL) != QB_OK);
		b.data[at] ^= 4;
	}
	buf_free(&b);
	buf_free(&c);
	scene_free(&s);
}

/* Custodian 1 sends custodian 2 something else than f(2); everything else is in order and signed. */
static void bad_share(struct scene *s, const uint8_t ct[DEAL_SHARE_BYTES])
{
	struct custody_group g;
	struct secret *share;
	struct buf b = {0};
	enum complaint_verdict verdict;
	struct qb_error e = {0};
	struct deal good = s->deal[0];
	memcpy(s->deal[0].share[1], ct, DEAL_SHARE_BYTES);
	scene_resign(s, &s->deal[0]);
	assert_int_equal(deal_check(&s->c, &s->deal[0], NULL), QB_OK);
	assert_int_equal(keygen_share(&s->c, s->deal, 2, &s->key[1], &g, &share, &e), QB_CRYPTO);
	assert_string_equal(e.where, "deal of custodian 1");
	assert_null(share);
	assert_int_equal(complaint_make(&s->c, &s->deal[0], 2, &s->key[1], &b, NULL), QB_OK);
	assert_int_equal(b.len, COMPLAINT_BYTES);
	assert_int_equal(complaint_judge(&s->c, &s->deal[0], b.data, b.len, &verdict, NULL), QB_OK);
	assert_int_equal(verdict, COMPLAINT_SENDER_GUILTY);
	buf_free(&b);
	s->deal[0] = good;
}

static void bad_shares_are_found_and_judged(void **state)
{
	(void)state;
	struct scene s;
	uint8_t ct[DEAL_SHARE_BYTES] = {1, 2, 3};
	scene_parties(&s, 3, 2);
	bad_share(&s, ct);                 /* nonsense */
	bad_share(&s, s.deal[0].share[2]); /* another's share */
	struct deal first = s.deal[0];
	scene_deal(&s, 1); /* a second, inconsistent deal of the same custodian */
	bad_share(&s, first.share[1]);
	scene_free(&s);
}

/* The dealer encrypts a wrong value properly: decrypts well, but is not on the polynomial. */
static void well_encrypted_wrong_share(void **state)
{
	(void)state;
	struct scene s;
	uint8_t e[SCALAR_BYTES], z[POINT_BYTES], f[SCALAR_BYTES], ct[DEAL_SHARE_BYTES], ad[80], a0[SCALAR_BYTES];
	scene_parties(&s, 3, 2);
	struct deal *d = &s.deal[0];
	group_scalar_random(e);
	group_scalar_random(a0);
	group_scalar_random(f);
	assert_true(group_mul_base(d->ephemeral, e));
	assert_true(group_mul_base(d->commitment[0], a0));
	prove_possession(d, a0);
	assert_true(group_mul(z, e, s.pub[1].exchange));
	struct transcript t;
	transcript_begin(&t, "quietbell/1/keygen/share-key");
	transcript_field(&t, s.c.ctx, 64);
	transcript_u64(&t, 1);
	transcript_u64(&t, 2);
	transcript_field(&t, d->ephemeral, POINT_BYTES);
	transcript_field(&t, s.pub[1].exchange, POINT_BYTES);
	transcript_field(&t, z, POINT_BYTES);
	memcpy(ad, s.c.ctx, 64);
	le64_store(ad + 64, 1);
	le64_store(ad + 72, 2);
	aead_seal(&t, ad, sizeof ad, f, sizeof f, ct);
	bad_share(&s, ct);
	scene_free(&s);
}

static enum complaint_verdict judge(const struct scene *s, const struct buf *b)
{
	enum complaint_verdict v;
	assert_int_equal(complaint_judge(&s->c, &s->deal[0], b->data, b->len, &v, NULL), QB_OK);
	return v;
}

static void false_complaints(void **state)
{
	(void)state;
	struct scene s;
	struct buf b = {0};
	enum complaint_verdict v;
	scene_parties(&s, 3, 2);
	assert_int_equal(complaint_make(&s.c, &s.deal[0], 2, &s.key[1], &b, NULL), QB_OK);
	assert_int_equal(judge(&s, &b), COMPLAINT_FALSE); /* the share was good */
	uint8_t good[COMPLAINT_BYTES];
	memcpy(good, b.data, sizeof good);
	for (size_t at = 12; at < COMPLAINT_BYTES; at += 3) { /* Z, c or z altered, to make the share look bad */
		b.data[at] ^= 2;
		assert_int_equal(judge(&s, &b), COMPLAINT_FALSE);
		b.data[at] ^= 2;
	}
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		scene_bad_point(q, b.data + 12);
		assert_int_equal(judge(&s, &b), COMPLAINT_FALSE);
	}
	memcpy(b.data, good, sizeof good);
	scene_add_order(b.data + 76);
	assert_int_equal(judge(&s, &b), COMPLAINT_FALSE);
	memcpy(b.data, good, sizeof good);
	b.data[8] = 3; /* custodian 2's point as if it were custodian 3's complaint */
	assert_int_equal(judge(&s, &b), COMPLAINT_FALSE);
	b.data[8] = 9;
	assert_int_equal(complaint_judge(&s.c, &s.deal[0], b.data, b.len, &v, NULL), QB_FORMAT);
	memcpy(b.data, good, sizeof good);
	for (size_t n = 0; n < b.len; n++)
		assert_int_equal(complaint_judge(&s.c, &s.deal[0], b.data, n, &v, NULL), QB_FORMAT);
	assert_int_equal(complaint_judge(&s.c, &s.deal[1], b.data, b.len, &v, NULL), QB_FORMAT);
	/* The relay spoils a share on the way: nobody may be judged by an unsigned deal. */
	s.deal[0].share[1][0] ^= 1;
	assert_int_equal(complaint_judge(&s.c, &s.deal[0], b.data, b.len, &v, NULL), QB_CRYPTO);
	buf_free(&b);
	scene_free(&s);
}

/* The server shows a certificate over a key of its own, signed by nobody or by keys of its own. */
static void group_key_of_the_servers_own(void **state)
{
	(void)state;
	struct scene s, servers;
	struct custody_group g;
	struct buf cert = {0};
	uint8_t sig[SCENE_MAX][SIGN_BYTES];
	scene_make(&s, 3, 2);
	scene_make(&servers, 3, 2);
	for (uint32_t j = 0; j < 3; j++)
		keygen_certificate_sign(&servers.g, servers.key[j].seed, sig[j]);
	keygen_certificate_encode(&servers.g, (const uint8_t(*)[SIGN_BYTES])sig, &cert);
	assert_int_equal(keygen_certificate_verify(&s.c, s.deal, cert.data, cert.len, &g, NULL), QB_CRYPTO);
	assert_int_equal(keygen_certificate_verify(&s.c, servers.deal, cert.data, cert.len, &g, NULL), QB_CRYPTO);
	/* Its own values under two honest signatures, which are over other values. */
	for (uint32_t j = 0; j < 3; j++)
		keygen_certificate_sign(&s.g, s.key[j].seed, sig[j]);
	buf_clear(&cert);
	keygen_certificate_encode(&servers.g, (const uint8_t(*)[SIGN_BYTES])sig, &cert);
	assert_int_equal(keygen_certificate_verify(&s.c, s.deal, cert.data, cert.len, &g, NULL), QB_CRYPTO);
	/* One signature missing. */
	memset(sig[1], 0, SIGN_BYTES);
	buf_clear(&cert);
	keygen_certificate_encode(&s.g, (const uint8_t(*)[SIGN_BYTES])sig, &cert);
	assert_int_equal(keygen_certificate_verify(&s.c, s.deal, cert.data, cert.len, &g, NULL), QB_CRYPTO);
	buf_free(&cert);
	scene_free(&s);
	scene_free(&servers);
}

/* Deals of an earlier attempt, in another order, or two different ones shown to two custodians. */
static void deals_replayed_reordered_equivocated(void **state)
{
	(void)state;
	struct scene s;
	struct keygen_context next;
	struct custody_group g, h;
	struct deal out;
	struct buf b = {0};
	scene_make(&s, 3, 2);
	assert_int_equal(keygen_context_init(&next, scene_campaign, 1, 2, 3, 2, s.pub, NULL), QB_OK);
	deal_encode(&s.deal[0], &b);
	assert_int_equal(deal_parse(&next, b.data, b.len, &out, NULL), QB_FORMAT);
	memcpy(b.data + 16, next.ctx, 64); /* its context rewritten */
	assert_int_equal(deal_parse(&next, b.data, b.len, &out, NULL), QB_OK);
	assert_int_equal(deal_check(&next, &out, NULL), QB_CRYPTO);
	struct deal swap = s.deal[0];
	s.deal[0] = s.deal[1];
	s.deal[1] = swap;
	assert_int_equal(keygen_group(&s.c, s.deal, &g, NULL), QB_CRYPTO);
	s.deal[1] = s.deal[0];
	s.deal[0] = swap;
	assert_int_equal(keygen_group(&s.c, s.deal, &g, NULL), QB_OK);
	scene_deal(&s,
	           1); /* a second deal, shown to somebody else: the two sides get different th, so no certificate */
	assert_int_equal(keygen_group(&s.c, s.deal, &h, NULL), QB_OK);
	assert_memory_not_equal(g.th, h.th, 64);
	uint8_t sig[SIGN_BYTES];
	keygen_certificate_sign(&h, s.key[1].seed, sig);
	assert_false(keygen_certificate_signed_by(&g, s.pub[1].sign, sig));
	buf_free(&b);
	scene_free(&s);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(own_proof_is_accepted),           cmocka_unit_test(rogue_key_without_possession),
    cmocka_unit_test(top_coefficient_cancelled),       cmocka_unit_test(invalid_points_and_scalars_in_every_field),
    cmocka_unit_test(too_few_or_too_many_commitments), cmocka_unit_test(bad_shares_are_found_and_judged),
    cmocka_unit_test(well_encrypted_wrong_share),      cmocka_unit_test(false_complaints),
    cmocka_unit_test(group_key_of_the_servers_own),    cmocka_unit_test(deals_replayed_reordered_equivocated),
};
SCENE_MAIN(tests)
