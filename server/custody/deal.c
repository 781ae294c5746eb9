/* A custodian's deal. Nothing secret outlives deal_make but in the ciphertexts. */
#include "server/custody/deal.h"

#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/custody/aead.h"
#include "server/custody/proof.h"

static const uint8_t magic[4] = {'Q', 'B', 'D', '1'};

/* What a signed deal gives away about its sender. */
static enum qb_status at_fault(struct qb_error *e, uint32_t from, const char *what)
{
	char who[40];
	snprintf(who, sizeof who, "deal of custodian %u", from);
	return qb_fail(e, QB_CRYPTO, who, "abandon this attempt; the next leaves this custodian out", "%s", what);
}

/* What anyone on the way could have done to it: nobody is blamed. */
static enum qb_status not_theirs(struct qb_error *e, enum qb_status status, uint32_t from, const char *what)
{
	char who[40];
	snprintf(who, sizeof who, "deal of custodian %u", from);
	return qb_fail(e, status, who, "fetch it again; if it stays so, ask this custodian for it directly", "%s",
	               what);
}

static void possession_challenge(const struct deal *d, uint8_t c[static SCALAR_BYTES])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/keygen/possession");
	transcript_field(&t, d->ctx, sizeof d->ctx);
	transcript_u64(&t, d->from);
	for (uint32_t m = 0; m < d->k; m++)
		transcript_field(&t, d->commitment[m], POINT_BYTES);
	transcript_field(&t, d->ephemeral, sizeof d->ephemeral);
	transcript_field(&t, d->pop_r, sizeof d->pop_r);
	group_challenge(&t, c);
}

void deal_hash(const struct deal *d, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/keygen/round-1");
	transcript_field(&t, d->ctx, sizeof d->ctx);
	transcript_u64(&t, d->from);
	transcript_u64(&t, d->k);
	for (uint32_t m = 0; m < d->k; m++)
		transcript_field(&t, d->commitment[m], POINT_BYTES);
	transcript_field(&t, d->pop_r, sizeof d->pop_r);
	transcript_field(&t, d->pop_z, sizeof d->pop_z);
	transcript_field(&t, d->ephemeral, sizeof d->ephemeral);
	for (uint32_t j = 0; j < d->n; j++)
		transcript_field(&t, d->share[j], DEAL_SHARE_BYTES);
	transcript_end(&t, out);
}

#define SHARE_AD_BYTES 80

/* Share key and associated data between d's sender and custodian `to`, from their common point z. */
static void share_key(const struct keygen_context *c, const struct deal *d, uint32_t to,
                      const uint8_t z[static POINT_BYTES], struct transcript *t, uint8_t ad[static SHARE_AD_BYTES])
{
	transcript_begin(t, "quietbell/1/keygen/share-key");
	transcript_field(t, c->ctx, sizeof c->ctx);
	transcript_u64(t, d->from);
	transcript_u64(t, to);
	transcript_field(t, d->ephemeral, POINT_BYTES);
	transcript_field(t, c->party[to - 1].exchange, POINT_BYTES);
	transcript_field(t, z, POINT_BYTES);
	memcpy(ad, c->ctx, sizeof c->ctx);
	le64_store(ad + 64, d->from);
	le64_store(ad + 72, to);
}

/* Commitments to the polynomial and its proof of possession. */
static bool commit(struct deal *d, const uint8_t (*coef)[SCALAR_BYTES])
{
	uint8_t w[SCALAR_BYTES], ch[SCALAR_BYTES], statement[64];
	bool ok = true;
	for (uint32_t m = 0; m < d->k; m++)
		ok = ok && group_mul_base(d->commitment[m], coef[m]);
	deal_hash(d, statement); /* R_pop, z_pop and ciphertexts are still zero: ctx, i, k, all C, E */
	proof_nonce("quietbell/1/nonce/possession", coef[0], statement, sizeof statement, w);
	ok = ok && group_mul_base(d->pop_r, w);
	possession_challenge(d, ch);
	group_scalar_mul(ch, ch, coef[0]);
	group_scalar_add(d->pop_z, w, ch);
	wipe(w, sizeof w);
	wipe(ch, sizeof ch);
	return ok && group_scalar_ok(d->pop_z);
}

static bool encrypt_shares(const struct keygen_context *c, struct deal *d, const uint8_t (*coef)[SCALAR_BYTES],
                           const uint8_t ephemeral[static SCALAR_BYTES])
{
	uint8_t z[POINT_BYTES], f[SCALAR_BYTES], ad[SHARE_AD_BYTES];
	bool ok = true;
	for (uint32_t to = 1; ok && to <= d->n; to++) {
		struct transcript t;
		ok = group_mul(z, ephemeral, c->party[to - 1].exchange);
		group_poly_eval(f, coef, d->k, to);
		ok = ok && group_scalar_ok(f);
		share_key(c, d, to, z, &t, ad);
		aead_seal(&t, ad, sizeof ad, f, sizeof f, d->share[to - 1]);
	}
	wipe(z, sizeof z);
	wipe(f, sizeof f);
	return ok;
}

enum qb_status deal_make(const struct keygen_context *c, uint32_t i, const struct party_key *me, struct buf *out,
                         struct qb_error *e)
{
	struct party_public mine;
	party_key_public(me, &mine);
	if (i == 0 || i > c->n || memcmp(&mine, &c->party[i - 1], sizeof mine) != 0)
		return qb_fail(e, QB_RANGE, "key generation", NULL, "this key is not custodian %u's", i);
	struct secret *coefs = secret_new((size_t)c->k * SCALAR_BYTES), *eph = secret_new(SCALAR_BYTES);
	uint8_t(*coef)[SCALAR_BYTES] = (uint8_t(*)[SCALAR_BYTES])(void *)secret_bytes(coefs);
	struct deal d = {.from = i, .n = c->n, .k = c->k};
	bool ok;
	memcpy(d.ctx, c->ctx, sizeof d.ctx);
	do { /* a second turn is needed with probability 2^-240 */
		memset(d.pop_r, 0, sizeof d.pop_r);
		memset(d.pop_z, 0, sizeof d.pop_z);
		memset(d.share, 0, sizeof d.share);
		for (uint32_t m = 0; m < c->k; m++)
			group_scalar_random(coef[m]);
		group_scalar_random(secret_bytes(eph));
		ok = group_mul_base(d.ephemeral, secret_view(eph));
		ok = ok && commit(&d, (const uint8_t(*)[SCALAR_BYTES])coef);
		ok = ok && encrypt_shares(c, &d, (const uint8_t(*)[SCALAR_BYTES])coef, secret_view(eph));
	} while (!ok);
	secret_free(&coefs);
	secret_free(&eph);
	deal_hash(&d, d.hash);
	sign_bytes(me->seed, d.hash, sizeof d.hash, d.signature);
	deal_encode(&d, out);
	return QB_OK;
}

void deal_encode(const struct deal *d, struct buf *out)
{
	buf_put(out, magic, sizeof magic);
	buf_u32(out, d->from);
	buf_u32(out, d->n);
	buf_u32(out, d->k);
	buf_put(out, d->ctx, sizeof d->ctx);
	for (uint32_t m = 0; m < d->k; m++)
		buf_put(out, d->commitment[m], POINT_BYTES);
	buf_put(out, d->pop_r, sizeof d->pop_r);
	buf_put(out, d->pop_z, sizeof d->pop_z);
	buf_put(out, d->ephemeral, sizeof d->ephemeral);
	for (uint32_t j = 0; j < d->n; j++)
		buf_put(out, d->share[j], DEAL_SHARE_BYTES);
	buf_put(out, d->signature, sizeof d->signature);
}

static enum qb_status check_values(const struct deal *d, struct qb_error *e)
{
	for (uint32_t m = 0; m < d->k; m++)
		if (!group_point_ok(d->commitment[m]))
			return at_fault(e, d->from, "a commitment is not a valid point");
	if (!group_point_ok(d->pop_r) || !group_point_ok(d->ephemeral))
		return at_fault(e, d->from, "R or E is not a valid point");
	if (!group_scalar_ok(d->pop_z))
		return at_fault(e, d->from, "the proof of possession is not a canonical scalar");
	return QB_OK;
}

enum qb_status deal_parse(const struct keygen_context *c, const uint8_t *p, size_t n, struct deal *out,
                          struct qb_error *e)
{
	memset(out, 0, sizeof *out);
	struct cursor r = cursor_over(p, n);
	const uint8_t *m = cursor_take(&r, sizeof magic);
	out->from = cursor_u32(&r);
	out->n = cursor_u32(&r);
	out->k = cursor_u32(&r);
	cursor_copy(&r, out->ctx, sizeof out->ctx);
	if (r.bad || memcmp(m, magic, sizeof magic) != 0)
		return qb_fail(e, QB_FORMAT, "deal", NULL, "it is not a deal");
	if (out->n != c->n || out->k != c->k || out->from == 0 || out->from > c->n ||
	    memcmp(out->ctx, c->ctx, sizeof c->ctx) != 0)
		return qb_fail(e, QB_FORMAT, "deal", NULL, "it belongs to another key generation or attempt");
	for (uint32_t j = 0; j < c->k; j++)
		cursor_copy(&r, out->commitment[j], POINT_BYTES);
	cursor_copy(&r, out->pop_r, sizeof out->pop_r);
	cursor_copy(&r, out->pop_z, sizeof out->pop_z);
	cursor_copy(&r, out->ephemeral, sizeof out->ephemeral);
	for (uint32_t j = 0; j < c->n; j++)
		cursor_copy(&r, out->share[j], DEAL_SHARE_BYTES);
	cursor_copy(&r, out->signature, sizeof out->signature);
	if (r.bad || r.left != 0)
		return not_theirs(e, QB_FORMAT, out->from,
		                  "it does not have exactly the commitments and shares it must have");
	deal_hash(out, out->hash);
	return QB_OK;
}

enum qb_status deal_check(const struct keygen_context *c, const struct deal *d, struct qb_error *e)
{
	uint8_t h[64], ch[SCALAR_BYTES], zg[POINT_BYTES], cc[POINT_BYTES], sum[POINT_BYTES];
	if (d->from == 0 || d->from > c->n || d->n != c->n || d->k != c->k ||
	    memcmp(d->ctx, c->ctx, sizeof c->ctx) != 0)
		return qb_fail(e, QB_CRYPTO, "deal", NULL, "it belongs to another key generation or attempt");
	deal_hash(d, h);
	if (memcmp(h, d->hash, sizeof h) != 0 || !sign_verify(c->party[d->from - 1].sign, h, sizeof h, d->signature))
		return not_theirs(e, QB_CRYPTO, d->from, "its signature is false");
	enum qb_status s = check_values(d, e);
	if (s != QB_OK)
		return s;
	possession_challenge(d, ch);
	if (!group_mul_base(zg, d->pop_z) || !group_mul(cc, ch, d->commitment[0]) || !group_add(sum, cc, d->pop_r) ||
	    memcmp(zg, sum, sizeof sum) != 0)
		return at_fault(e, d->from, "the proof of possession is false");
	return QB_OK;
}

enum qb_status deal_take_with(const struct keygen_context *c, const struct deal *d, uint32_t to,
                              const uint8_t z[static POINT_BYTES], uint8_t share[static SCALAR_BYTES],
                              struct qb_error *e)
{
	uint8_t ad[SHARE_AD_BYTES], expected[POINT_BYTES], got[POINT_BYTES];
	struct transcript t;
	CHECK(to >= 1 && to <= c->n);
	share_key(c, d, to, z, &t, ad);
	if (!aead_open(&t, ad, sizeof ad, d->share[to - 1], DEAL_SHARE_BYTES, share))
		return at_fault(e, d->from, "its encrypted share can't be decrypted");
	if (!group_scalar_ok(share) || !group_mul_base(got, share) ||
	    !group_poly_point(expected, d->commitment, d->k, to) || memcmp(got, expected, sizeof got) != 0) {
		wipe(share, SCALAR_BYTES);
		return at_fault(e, d->from, "its share does not fit its commitments");
	}
	return QB_OK;
}

enum qb_status deal_take(const struct keygen_context *c, const struct deal *d, uint32_t to, const struct party_key *me,
                         struct secret **share, struct qb_error *e)
{
	struct party_public mine;
	uint8_t z[POINT_BYTES];
	*share = NULL;
	party_key_public(me, &mine);
	if (to == 0 || to > c->n || memcmp(&mine, &c->party[to - 1], sizeof mine) != 0)
		return qb_fail(e, QB_RANGE, "key generation", NULL, "this key is not custodian %u's", to);
	if (!group_mul(z, secret_view(me->exchange), d->ephemeral))
		return at_fault(e, d->from, "E is not a valid point");
	struct secret *f = secret_new(SCALAR_BYTES);
	enum qb_status s = deal_take_with(c, d, to, z, secret_bytes(f), e);
	wipe(z, sizeof z);
	if (s == QB_OK)
		*share = f;
	else
		secret_free(&f);
	return s;
}
