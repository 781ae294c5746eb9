/* Making and checking deals. Nothing secret outlives dealing_make but in the ciphertexts. */
#include "server/custody/dealing.h"

#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/custody/proof.h"
#include "server/custody/sealed_share.h"

static const struct {
	char magic[5];
	const char *whose; /* in errors, before the dealer's number */
	const char *possession, *message, *share_key;
} kinds[] = {
    [DEAL_KEYGEN] = {"QBD1", "deal of custodian", "quietbell/1/keygen/possession", "quietbell/1/keygen/round-1",
                     "quietbell/1/keygen/share-key"},
    [DEAL_RESHARE] = {"QBS1", "resharing by custodian", "quietbell/1/reshare/possession", "quietbell/1/reshare/deal",
                      "quietbell/1/reshare/share-key"},
};
#define MAGIC_BYTES 4

/* What a signed deal gives away about its sender. */
enum qb_status dealing_blame(const struct deal *d, const char *what, struct qb_error *e)
{
	char who[40];
	snprintf(who, sizeof who, "%s %u", kinds[d->kind].whose, d->from);
	return qb_fail(e, QB_CRYPTO, who, "abandon this attempt; the next leaves this custodian out", "%s", what);
}

/* What anyone on the way could have done to it: nobody is blamed. */
static enum qb_status not_theirs(struct qb_error *e, enum qb_status status, const struct deal *d, const char *what)
{
	char who[40];
	snprintf(who, sizeof who, "%s %u", kinds[d->kind].whose, d->from);
	return qb_fail(e, status, who, "fetch it again; if it stays so, ask this custodian for it directly", "%s",
	               what);
}

uint32_t dealing_place(const struct dealing *g, uint32_t from)
{
	for (uint32_t p = 0; p < g->dealers; p++)
		if ((g->index == NULL ? p + 1 : g->index[p]) == from)
			return p;
	return g->dealers;
}

static bool same_keys(const struct party_key *me, const struct party_public *p)
{
	struct party_public mine;
	party_key_public(me, &mine);
	return memcmp(&mine, p, sizeof mine) == 0;
}

static void possession_challenge(const struct deal *d, uint8_t c[static SCALAR_BYTES])
{
	struct transcript t;
	transcript_begin(&t, kinds[d->kind].possession);
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
	transcript_begin(&t, kinds[d->kind].message);
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

/* The way of the share in d from its sender to recipient `to`. */
static struct sealed_share_route route(const struct dealing *g, const struct deal *d, uint32_t to)
{
	return (struct sealed_share_route){kinds[g->kind].share_key, g->ctx, d->from, to, d->ephemeral,
	                                   g->to[to - 1].exchange};
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
	secret_publish(d->pop_z, SCALAR_BYTES);
	wipe(w, sizeof w);
	wipe(ch, sizeof ch);
	return ok && group_scalar_ok(d->pop_z);
}

static bool encrypt_shares(const struct dealing *g, struct deal *d, const uint8_t (*coef)[SCALAR_BYTES],
                           const uint8_t ephemeral[static SCALAR_BYTES])
{
	uint8_t z[POINT_BYTES], f[SCALAR_BYTES];
	bool ok = true;
	for (uint32_t to = 1; ok && to <= d->n; to++) {
		struct sealed_share_route way = route(g, d, to);
		ok = group_mul(z, ephemeral, g->to[to - 1].exchange);
		group_poly_eval(f, coef, d->k, to);
		ok = ok && group_scalar_ok(f);
		sealed_share_put(&way, z, f, d->share[to - 1]);
	}
	wipe(z, sizeof z);
	wipe(f, sizeof f);
	return ok;
}

enum qb_status dealing_make(const struct dealing *g, uint32_t from, const struct party_key *me,
                            const struct secret *constant, struct buf *out, struct qb_error *e)
{
	uint32_t place = dealing_place(g, from);
	if (place == g->dealers || !same_keys(me, &g->dealer[place]))
		return qb_fail(e, QB_RANGE, kinds[g->kind].whose, NULL, "this key is not custodian %u's", from);
	if (constant != NULL && (secret_size(constant) != SCALAR_BYTES || !group_scalar_ok(secret_view(constant))))
		return qb_fail(e, QB_CRYPTO, kinds[g->kind].whose, NULL, "the dealt secret is not a valid scalar");
	struct secret *coefs = secret_new((size_t)g->k * SCALAR_BYTES), *eph = secret_new(SCALAR_BYTES);
	uint8_t(*coef)[SCALAR_BYTES] = (uint8_t(*)[SCALAR_BYTES])(void *)secret_bytes(coefs);
	struct deal d = {.kind = g->kind, .from = from, .n = g->n, .k = g->k};
	bool ok;
	memcpy(d.ctx, g->ctx, sizeof d.ctx);
	do { /* a second turn is needed with probability 2^-240 */
		memset(d.pop_r, 0, sizeof d.pop_r);
		memset(d.pop_z, 0, sizeof d.pop_z);
		memset(d.share, 0, sizeof d.share);
		for (uint32_t m = 0; m < g->k; m++)
			group_scalar_random(coef[m]);
		if (constant != NULL)
			memcpy(coef[0], secret_view(constant), SCALAR_BYTES);
		group_scalar_random(secret_bytes(eph));
		ok = group_mul_base(d.ephemeral, secret_view(eph));
		ok = ok && commit(&d, (const uint8_t(*)[SCALAR_BYTES])coef);
		ok = ok && encrypt_shares(g, &d, (const uint8_t(*)[SCALAR_BYTES])coef, secret_view(eph));
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
	buf_put(out, kinds[d->kind].magic, MAGIC_BYTES);
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
			return dealing_blame(d, "a commitment is not a valid point", e);
	if (!group_point_ok(d->pop_r) || !group_point_ok(d->ephemeral))
		return dealing_blame(d, "R or E is not a valid point", e);
	if (!group_scalar_ok(d->pop_z))
		return dealing_blame(d, "the proof of possession is not a canonical scalar", e);
	return QB_OK;
}

enum qb_status dealing_parse(const struct dealing *g, const uint8_t *p, size_t n, struct deal *out, struct qb_error *e)
{
	memset(out, 0, sizeof *out);
	out->kind = g->kind;
	struct cursor r = cursor_over(p, n);
	const uint8_t *m = cursor_take(&r, MAGIC_BYTES);
	out->from = cursor_u32(&r);
	out->n = cursor_u32(&r);
	out->k = cursor_u32(&r);
	cursor_copy(&r, out->ctx, sizeof out->ctx);
	if (r.bad || memcmp(m, kinds[g->kind].magic, MAGIC_BYTES) != 0)
		return qb_fail(e, QB_FORMAT, "deal", NULL, "it is not a deal");
	if (out->n != g->n || out->k != g->k || dealing_place(g, out->from) == g->dealers ||
	    memcmp(out->ctx, g->ctx, 64) != 0)
		return qb_fail(e, QB_FORMAT, "deal", NULL, "it belongs to another key generation or attempt");
	for (uint32_t j = 0; j < g->k; j++)
		cursor_copy(&r, out->commitment[j], POINT_BYTES);
	cursor_copy(&r, out->pop_r, sizeof out->pop_r);
	cursor_copy(&r, out->pop_z, sizeof out->pop_z);
	cursor_copy(&r, out->ephemeral, sizeof out->ephemeral);
	for (uint32_t j = 0; j < g->n; j++)
		cursor_copy(&r, out->share[j], DEAL_SHARE_BYTES);
	cursor_copy(&r, out->signature, sizeof out->signature);
	if (r.bad || r.left != 0)
		return not_theirs(e, QB_FORMAT, out,
		                  "it does not have exactly the commitments and shares it must have");
	deal_hash(out, out->hash);
	return QB_OK;
}

enum qb_status dealing_check(const struct dealing *g, const struct deal *d, struct qb_error *e)
{
	uint8_t h[64], ch[SCALAR_BYTES], zg[POINT_BYTES], cc[POINT_BYTES], sum[POINT_BYTES];
	uint32_t place = dealing_place(g, d->from);
	if (d->kind != g->kind || place == g->dealers || d->n != g->n || d->k != g->k ||
	    memcmp(d->ctx, g->ctx, 64) != 0)
		return qb_fail(e, QB_CRYPTO, "deal", NULL, "it belongs to another key generation or attempt");
	deal_hash(d, h);
	if (memcmp(h, d->hash, sizeof h) != 0 || !sign_verify(g->dealer[place].sign, h, sizeof h, d->signature))
		return not_theirs(e, QB_CRYPTO, d, "its signature is false");
	enum qb_status s = check_values(d, e);
	if (s != QB_OK)
		return s;
	possession_challenge(d, ch);
	if (!group_mul_base(zg, d->pop_z) || !group_mul(cc, ch, d->commitment[0]) || !group_add(sum, cc, d->pop_r) ||
	    memcmp(zg, sum, sizeof sum) != 0)
		return dealing_blame(d, "the proof of possession is false", e);
	return QB_OK;
}

enum qb_status dealing_take_with(const struct dealing *g, const struct deal *d, uint32_t to,
                                 const uint8_t z[static POINT_BYTES], uint8_t share[static SCALAR_BYTES],
                                 struct qb_error *e)
{
	uint8_t expected[POINT_BYTES], got[POINT_BYTES];
	CHECK(to >= 1 && to <= g->n);
	struct sealed_share_route way = route(g, d, to);
	if (!sealed_share_get(&way, z, d->share[to - 1], share))
		return dealing_blame(d, "its encrypted share does not decrypt to a scalar", e);
	if (!group_mul_base(got, share) || !group_poly_point(expected, d->commitment, d->k, to) ||
	    memcmp(got, expected, sizeof got) != 0) {
		wipe(share, SCALAR_BYTES);
		return dealing_blame(d, "its share does not fit its commitments", e);
	}
	return QB_OK;
}

enum qb_status dealing_take(const struct dealing *g, const struct deal *d, uint32_t to, const struct party_key *me,
                            struct secret **share, struct qb_error *e)
{
	uint8_t z[POINT_BYTES];
	*share = NULL;
	if (to == 0 || to > g->n || !same_keys(me, &g->to[to - 1]))
		return qb_fail(e, QB_RANGE, kinds[g->kind].whose, NULL, "this key is not custodian %u's", to);
	if (!group_mul(z, secret_view(me->exchange), d->ephemeral))
		return dealing_blame(d, "E is not a valid point", e);
	struct secret *f = secret_new(SCALAR_BYTES);
	enum qb_status s = dealing_take_with(g, d, to, z, secret_bytes(f), e);
	wipe(z, sizeof z);
	if (s == QB_OK)
		*share = f;
	else
		secret_free(&f);
	return s;
}
