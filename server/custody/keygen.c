/* What follows from all deals together: group key, public shares, transcript, certificate. */
#include "server/custody/keygen.h"

#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/custody/deal.h"

static const uint8_t magic[4] = {'Q', 'B', 'C', '1'};

static void context_hash(struct keygen_context *c)
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/keygen/context");
	transcript_field(&t, c->campaign, sizeof c->campaign);
	transcript_u64(&t, c->epoch);
	transcript_u64(&t, c->attempt);
	transcript_u64(&t, c->n);
	transcript_u64(&t, c->k);
	for (uint32_t j = 0; j < c->n; j++) {
		transcript_field(&t, c->party[j].sign, sizeof c->party[j].sign);
		transcript_field(&t, c->party[j].exchange, sizeof c->party[j].exchange);
	}
	transcript_end(&t, c->ctx);
}

enum qb_status keygen_parties_check(uint32_t n, uint32_t k, const struct party_public *party, struct qb_error *e)
{
	if (n > CUSTODY_MAX || k < 2 || n < 3 || k > n - 1)
		return qb_fail(e, QB_RANGE, "custodians", "at least 2 must be needed, and one may be absent",
		               "%u needed of %u; accepted: 2 <= needed <= custodians - 1, at most %d custodians", k, n,
		               CUSTODY_MAX);
	for (uint32_t j = 0; j < n; j++) {
		char who[40];
		snprintf(who, sizeof who, "custodian %u", j + 1);
		enum qb_status s = party_public_check(&party[j], who, e);
		if (s != QB_OK)
			return s;
		for (uint32_t i = 0; i < j; i++)
			if (memcmp(party[i].sign, party[j].sign, SIGN_PUBLIC) == 0 ||
			    memcmp(party[i].exchange, party[j].exchange, POINT_BYTES) == 0)
				return qb_fail(e, QB_CRYPTO, who, "every custodian needs keys of their own",
				               "custodians %u and %u share a key", i + 1, j + 1);
	}
	return QB_OK;
}

enum qb_status keygen_context_init(struct keygen_context *out, const uint8_t campaign[static CAMPAIGN_ID_BYTES],
                                   uint64_t epoch, uint64_t attempt, uint32_t n, uint32_t k,
                                   const struct party_public *parties, struct qb_error *e)
{
	*out = (struct keygen_context){0};
	enum qb_status s = keygen_parties_check(n, k, parties, e);
	if (s != QB_OK)
		return s;
	if (epoch > UINT32_MAX)
		return qb_fail(e, QB_RANGE, "custodians", NULL, "the epoch is too large");
	memcpy(out->campaign, campaign, CAMPAIGN_ID_BYTES);
	out->epoch = epoch;
	out->attempt = attempt;
	out->n = n;
	out->k = k;
	memcpy(out->party, parties, n * sizeof *parties);
	context_hash(out);
	return QB_OK;
}

static void transcript_of_deals(const struct keygen_context *c, const struct deal *deals,
                                const uint8_t s[static POINT_BYTES], uint8_t th[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/keygen/transcript");
	transcript_field(&t, c->ctx, sizeof c->ctx);
	for (uint32_t i = 0; i < c->n; i++) {
		transcript_field(&t, deals[i].hash, sizeof deals[i].hash);
		transcript_field(&t, deals[i].signature, sizeof deals[i].signature);
	}
	transcript_field(&t, s, POINT_BYTES);
	transcript_end(&t, th);
}

/* Aggregate commitments sum over i of C_im for every m; all must be points, the top one above all. */
static enum qb_status aggregate(const struct keygen_context *c, const struct deal *deals, uint8_t (*sum)[POINT_BYTES],
                                struct qb_error *e)
{
	for (uint32_t m = 0; m < c->k; m++) {
		memcpy(sum[m], deals[0].commitment[m], POINT_BYTES);
		for (uint32_t i = 1; i < c->n; i++)
			if (!group_add(sum[m], sum[m], deals[i].commitment[m]))
				return qb_fail(e, QB_CRYPTO, "all deals", "abandon this attempt and start the next",
				               "the sum of the commitments of degree %u vanishes", m);
	}
	return QB_OK;
}

static void second_generator(struct custody_group *g)
{
	struct transcript t;
	uint8_t wide[64];
	transcript_begin(&t, "quietbell/1/record/second-generator");
	transcript_field(&t, g->seal_th, sizeof g->seal_th);
	transcript_end(&t, wide);
	CHECK(group_from_hash(g->g2, wide));
}

enum qb_status keygen_group(const struct keygen_context *c, const struct deal *deals, struct custody_group *out,
                            struct qb_error *e)
{
	uint8_t sum[CUSTODY_MAX][POINT_BYTES];
	*out = (struct custody_group){0};
	struct custody_group g = {.epoch = c->epoch, .seal_epoch = c->epoch, .n = c->n, .k = c->k};
	for (uint32_t i = 0; i < c->n; i++) {
		if (deals[i].from != i + 1)
			return qb_fail(e, QB_CRYPTO, "all deals", NULL, "deal %u is from custodian %u", i + 1,
			               deals[i].from);
		enum qb_status s = deal_check(c, &deals[i], e);
		if (s != QB_OK)
			return s;
	}
	enum qb_status s = aggregate(c, deals, sum, e);
	if (s != QB_OK)
		return s;
	memcpy(g.campaign, c->campaign, sizeof g.campaign);
	memcpy(g.ctx, c->ctx, sizeof g.ctx);
	memcpy(g.s, sum[0], POINT_BYTES);
	for (uint32_t j = 0; j < c->n; j++)
		if (!group_poly_point(g.y[j], (const uint8_t(*)[POINT_BYTES])sum, c->k, j + 1))
			return qb_fail(e, QB_CRYPTO, "all deals", "abandon this attempt and start the next",
			               "the share of custodian %u vanishes", j + 1);
	transcript_of_deals(c, deals, g.s, g.th);
	memcpy(g.seal_th, g.th, sizeof g.seal_th);
	second_generator(&g);
	*out = g;
	return QB_OK;
}

enum qb_status keygen_share(const struct keygen_context *c, const struct deal *deals, uint32_t i,
                            const struct party_key *me, struct custody_group *out, struct secret **share,
                            struct qb_error *e)
{
	uint8_t y[POINT_BYTES];
	*share = NULL;
	enum qb_status s = keygen_group(c, deals, out, e);
	if (s != QB_OK)
		return s;
	struct secret *sum = secret_new(SCALAR_BYTES), *part = NULL;
	for (uint32_t j = 0; s == QB_OK && j < c->n; j++) {
		s = deal_take(c, &deals[j], i, me, &part, e);
		if (s == QB_OK)
			group_scalar_add(secret_bytes(sum), secret_view(sum), secret_view(part));
		secret_free(&part);
	}
	if (s == QB_OK && (!group_mul_base(y, secret_view(sum)) || memcmp(y, out->y[i - 1], POINT_BYTES) != 0))
		s = qb_fail(e, QB_CRYPTO, "all deals", NULL, "the sum of the shares does not fit the commitments");
	if (s == QB_OK)
		*share = sum;
	else
		secret_free(&sum);
	return s;
}

void keygen_certificate_hash(const struct custody_group *g, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/keygen/certificate");
	transcript_field(&t, g->th, sizeof g->th);
	transcript_field(&t, g->s, sizeof g->s);
	for (uint32_t j = 0; j < g->n; j++)
		transcript_field(&t, g->y[j], POINT_BYTES);
	transcript_end(&t, out);
}

void keygen_certificate_sign(const struct custody_group *g, const struct secret *seed,
                             uint8_t signature[static SIGN_BYTES])
{
	uint8_t h[64];
	keygen_certificate_hash(g, h);
	sign_bytes(seed, h, sizeof h, signature);
}

bool keygen_certificate_signed_by(const struct custody_group *g, const uint8_t pk[static SIGN_PUBLIC],
                                  const uint8_t signature[static SIGN_BYTES])
{
	uint8_t h[64];
	keygen_certificate_hash(g, h);
	return sign_verify(pk, h, sizeof h, signature);
}

void keygen_certificate_encode(const struct custody_group *g, const uint8_t (*signature)[SIGN_BYTES], struct buf *out)
{
	buf_put(out, magic, sizeof magic);
	buf_u32(out, g->n);
	buf_u32(out, g->k);
	buf_put(out, g->th, sizeof g->th);
	buf_put(out, g->s, sizeof g->s);
	for (uint32_t j = 0; j < g->n; j++)
		buf_put(out, g->y[j], POINT_BYTES);
	for (uint32_t j = 0; j < g->n; j++)
		buf_put(out, signature[j], SIGN_BYTES);
}

enum qb_status keygen_certificate_check(const struct custody_group *g, const struct party_public *party,
                                        const uint8_t *p, size_t n, struct qb_error *e)
{
	size_t body = 12 + 64 + POINT_BYTES * (1 + (size_t)g->n);
	if (n != body + (size_t)g->n * SIGN_BYTES || memcmp(p, magic, sizeof magic) != 0)
		return qb_fail(e, QB_FORMAT, "certificate", NULL, "it is not a certificate of %u custodians", g->n);
	struct buf expected = {0};
	static const uint8_t none[CUSTODY_MAX][SIGN_BYTES];
	keygen_certificate_encode(g, none, &expected);
	bool same = memcmp(p, expected.data, body) == 0;
	buf_free(&expected);
	if (!same)
		return qb_fail(e, QB_CRYPTO, "certificate", "do not use this group key",
		               "it does not say what the signed deals say");
	for (uint32_t j = 0; j < g->n; j++)
		if (!keygen_certificate_signed_by(g, party[j].sign, p + body + (size_t)j * SIGN_BYTES))
			return qb_fail(e, QB_CRYPTO, "certificate", NULL, "custodian %u did not sign it", j + 1);
	return QB_OK;
}

enum qb_status keygen_certificate_verify(const struct keygen_context *c, const struct deal *deals, const uint8_t *p,
                                         size_t n, struct custody_group *out, struct qb_error *e)
{
	struct custody_group g;
	*out = (struct custody_group){0};
	enum qb_status s = keygen_group(c, deals, &g, e);
	if (s == QB_OK)
		s = keygen_certificate_check(&g, c->party, p, n, e);
	if (s == QB_OK)
		*out = g;
	return s;
}
