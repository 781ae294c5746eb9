/* From k old shares to n new ones of the same key. */
#include "server/custody/reshare.h"

#include <string.h>

#include "server/base/check.h"

static void context_hash(struct reshare_context *c)
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/reshare/context");
	transcript_field(&t, c->old.campaign, sizeof c->old.campaign);
	transcript_u64(&t, c->epoch);
	transcript_u64(&t, c->attempt);
	transcript_field(&t, c->old.th, sizeof c->old.th);
	transcript_field(&t, c->old.s, sizeof c->old.s);
	transcript_u64(&t, c->old.k);
	for (uint32_t p = 0; p < c->old.k; p++) {
		transcript_u64(&t, c->dealer[p]);
		transcript_field(&t, c->from[p].sign, sizeof c->from[p].sign);
		transcript_field(&t, c->from[p].exchange, sizeof c->from[p].exchange);
	}
	transcript_u64(&t, c->n);
	transcript_u64(&t, c->k);
	for (uint32_t j = 0; j < c->n; j++) {
		transcript_field(&t, c->party[j].sign, sizeof c->party[j].sign);
		transcript_field(&t, c->party[j].exchange, sizeof c->party[j].exchange);
	}
	transcript_end(&t, c->ctx);
}

static enum qb_status check_dealers(const struct custody_group *old, const uint32_t *dealer,
                                    const struct party_public *from, struct qb_error *e)
{
	if (old->k < 2 || old->k > CUSTODY_MAX || old->n > CUSTODY_MAX)
		return qb_fail(e, QB_RANGE, "resharing", NULL, "there is no group to reshare");
	for (uint32_t p = 0; p < old->k; p++) {
		if (dealer[p] == 0 || dealer[p] > old->n || (p > 0 && dealer[p] <= dealer[p - 1]))
			return qb_fail(e, QB_RANGE, "resharing", "name each dealer once, in ascending order",
			               "custodian %u can't be dealer number %u", dealer[p], p + 1);
		enum qb_status s = party_public_check(&from[p], "dealer", e);
		if (s != QB_OK)
			return s;
		for (uint32_t q = 0; q < p; q++)
			if (memcmp(from[q].sign, from[p].sign, SIGN_PUBLIC) == 0)
				return qb_fail(e, QB_CRYPTO, "resharing", "every dealer needs keys of their own",
				               "dealers %u and %u share a key", dealer[q], dealer[p]);
	}
	return QB_OK;
}

enum qb_status reshare_context_init(struct reshare_context *out, const struct custody_group *old, uint64_t attempt,
                                    const uint32_t *dealer, const struct party_public *from, uint32_t n, uint32_t k,
                                    const struct party_public *party, struct qb_error *e)
{
	*out = (struct reshare_context){0};
	enum qb_status s = check_dealers(old, dealer, from, e);
	if (s == QB_OK)
		s = keygen_parties_check(n, k, party, e);
	if (s != QB_OK)
		return s;
	if (old->epoch >= UINT32_MAX)
		return qb_fail(e, QB_RANGE, "resharing", NULL, "the epoch is too large");
	out->old = *old;
	out->epoch = old->epoch + 1;
	out->attempt = attempt;
	out->n = n;
	out->k = k;
	memcpy(out->dealer, dealer, old->k * sizeof *dealer);
	memcpy(out->from, from, old->k * sizeof *from);
	memcpy(out->party, party, n * sizeof *party);
	context_hash(out);
	return QB_OK;
}

struct dealing reshare_dealing(const struct reshare_context *c)
{
	return (struct dealing){.kind = DEAL_RESHARE,
	                        .ctx = c->ctx,
	                        .n = c->n,
	                        .k = c->k,
	                        .to = c->party,
	                        .dealers = c->old.k,
	                        .index = c->dealer,
	                        .dealer = c->from};
}

enum qb_status reshare_make(const struct reshare_context *c, uint32_t i, const struct party_key *me,
                            const struct secret *share, struct buf *out, struct qb_error *e)
{
	uint8_t y[POINT_BYTES];
	struct dealing g = reshare_dealing(c);
	if (dealing_place(&g, i) == g.dealers)
		return qb_fail(e, QB_RANGE, "resharing", NULL, "custodian %u is not one of the dealers", i);
	if (secret_size(share) != SCALAR_BYTES || !group_mul_base(y, secret_view(share)) ||
	    memcmp(y, c->old.y[i - 1], sizeof y) != 0)
		return qb_fail(e, QB_CRYPTO, "key share", NULL, "it is not custodian %u's share of this group key", i);
	return dealing_make(&g, i, me, share, out, e);
}

enum qb_status reshare_parse(const struct reshare_context *c, const uint8_t *p, size_t n, struct deal *out,
                             struct qb_error *e)
{
	struct dealing g = reshare_dealing(c);
	return dealing_parse(&g, p, n, out, e);
}

enum qb_status reshare_check(const struct reshare_context *c, const struct deal *d, struct qb_error *e)
{
	struct dealing g = reshare_dealing(c);
	enum qb_status s = dealing_check(&g, d, e);
	if (s == QB_OK && memcmp(d->commitment[0], c->old.y[d->from - 1], POINT_BYTES) != 0)
		s = dealing_blame(d, "it deals something else than this custodian's share", e);
	return s;
}

enum qb_status reshare_take(const struct reshare_context *c, const struct deal *d, uint32_t to,
                            const struct party_key *me, struct secret **part, struct qb_error *e)
{
	struct dealing g = reshare_dealing(c);
	return dealing_take(&g, d, to, me, part, e);
}

/* A_m = sum over the dealers of lambda_i C_im for every m: commitments to the new sharing of the old key. */
static enum qb_status aggregate(const struct reshare_context *c, const struct deal *deals, uint8_t (*sum)[POINT_BYTES],
                                struct qb_error *e)
{
	uint8_t lambda[SCALAR_BYTES], term[POINT_BYTES];
	for (uint32_t p = 0; p < c->old.k; p++) {
		bool ok = group_lagrange(lambda, c->dealer, c->old.k, p);
		for (uint32_t m = 0; m < c->k; m++) {
			ok = ok && group_mul(term, lambda, deals[p].commitment[m]);
			if (p == 0)
				memcpy(sum[m], term, POINT_BYTES);
			else
				ok = ok && group_add(sum[m], sum[m], term);
			if (!ok)
				return qb_fail(e, QB_CRYPTO, "all deals", "abandon this attempt and start the next",
				               "the sum of the commitments of degree %u vanishes", m);
		}
	}
	if (memcmp(sum[0], c->old.s, POINT_BYTES) != 0)
		return qb_fail(e, QB_CRYPTO, "all deals", "do not use the new shares",
		               "they would belong to another group key");
	return QB_OK;
}

static void transcript_of_deals(const struct reshare_context *c, const struct deal *deals, uint8_t th[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/reshare/transcript");
	transcript_field(&t, c->ctx, sizeof c->ctx);
	for (uint32_t p = 0; p < c->old.k; p++) {
		transcript_field(&t, deals[p].hash, sizeof deals[p].hash);
		transcript_field(&t, deals[p].signature, sizeof deals[p].signature);
	}
	transcript_field(&t, c->old.s, POINT_BYTES);
	transcript_end(&t, th);
}

enum qb_status reshare_group(const struct reshare_context *c, const struct deal *deals, struct custody_group *out,
                             struct qb_error *e)
{
	uint8_t sum[CUSTODY_MAX][POINT_BYTES];
	*out = (struct custody_group){0};
	for (uint32_t p = 0; p < c->old.k; p++) {
		if (deals[p].from != c->dealer[p])
			return qb_fail(e, QB_CRYPTO, "all deals", NULL, "deal %u is from custodian %u", p + 1,
			               deals[p].from);
		enum qb_status s = reshare_check(c, &deals[p], e);
		if (s != QB_OK)
			return s;
	}
	enum qb_status s = aggregate(c, deals, sum, e);
	if (s != QB_OK)
		return s;
	struct custody_group g = c->old;
	g.epoch = c->epoch;
	g.n = c->n;
	g.k = c->k;
	memset(g.y, 0, sizeof g.y);
	for (uint32_t j = 0; j < c->n; j++)
		if (!group_poly_point(g.y[j], (const uint8_t(*)[POINT_BYTES])sum, c->k, j + 1))
			return qb_fail(e, QB_CRYPTO, "all deals", "abandon this attempt and start the next",
			               "the share of custodian %u vanishes", j + 1);
	transcript_of_deals(c, deals, g.th);
	*out = g;
	return QB_OK;
}

enum qb_status reshare_share(const struct reshare_context *c, const struct deal *deals, uint32_t j,
                             const struct party_key *me, struct custody_group *out, struct secret **share,
                             struct qb_error *e)
{
	uint8_t lambda[SCALAR_BYTES], y[POINT_BYTES];
	*share = NULL;
	enum qb_status s = reshare_group(c, deals, out, e);
	if (s != QB_OK)
		return s;
	struct secret *sum = secret_new(SCALAR_BYTES), *part = NULL;
	for (uint32_t p = 0; s == QB_OK && p < c->old.k; p++) {
		s = reshare_take(c, &deals[p], j, me, &part, e);
		if (s == QB_OK) {
			CHECK(group_lagrange(lambda, c->dealer, c->old.k, p));
			group_scalar_mul(secret_bytes(part), lambda, secret_view(part));
			group_scalar_add(secret_bytes(sum), secret_view(sum), secret_view(part));
		}
		secret_free(&part);
	}
	if (s == QB_OK && (!group_mul_base(y, secret_view(sum)) || memcmp(y, out->y[j - 1], POINT_BYTES) != 0))
		s = qb_fail(e, QB_CRYPTO, "all deals", NULL, "the sum of the shares does not fit the commitments");
	if (s == QB_OK)
		*share = sum;
	else
		secret_free(&sum);
	return s;
}

enum qb_status reshare_certificate_verify(const struct reshare_context *c, const struct deal *deals, const uint8_t *p,
                                          size_t n, struct custody_group *out, struct qb_error *e)
{
	struct custody_group g;
	*out = (struct custody_group){0};
	enum qb_status s = reshare_group(c, deals, &g, e);
	if (s == QB_OK)
		s = keygen_certificate_check(&g, c->party, p, n, e);
	if (s == QB_OK)
		*out = g;
	return s;
}
