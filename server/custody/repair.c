/* Repair of a lost share. Nothing secret outlives a call but in the ciphertexts and the share itself. */
#include "server/custody/repair.h"

#include <stdio.h>
#include <string.h>

#include "server/base/check.h"

static const uint8_t split_magic[4] = {'Q', 'B', 'F', '1'}, sum_magic[4] = {'Q', 'B', 'G', '1'};

static enum qb_status blame(struct qb_error *e, uint32_t from, const char *what)
{
	char who[40];
	snprintf(who, sizeof who, "repair by custodian %u", from);
	return qb_fail(e, QB_CRYPTO, who, "abandon this attempt; the next takes another helper", "%s", what);
}

/* What anyone on the way could have done to it. */
static enum qb_status not_theirs(struct qb_error *e, enum qb_status status, uint32_t from, const char *what)
{
	char who[40];
	snprintf(who, sizeof who, "repair by custodian %u", from);
	return qb_fail(e, status, who, "fetch it again; if it stays so, ask this custodian for it directly", "%s",
	               what);
}

static void context_hash(struct repair_context *c)
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/repair/context");
	transcript_field(&t, c->group.campaign, sizeof c->group.campaign);
	transcript_u64(&t, c->group.epoch);
	transcript_u64(&t, c->attempt);
	transcript_field(&t, c->group.th, sizeof c->group.th);
	transcript_u64(&t, c->lost);
	transcript_field(&t, c->receiver.sign, sizeof c->receiver.sign);
	transcript_field(&t, c->receiver.exchange, sizeof c->receiver.exchange);
	transcript_u64(&t, c->group.k);
	for (uint32_t p = 0; p < c->group.k; p++) {
		transcript_u64(&t, c->helper[p]);
		transcript_field(&t, c->party[p].sign, sizeof c->party[p].sign);
		transcript_field(&t, c->party[p].exchange, sizeof c->party[p].exchange);
	}
	transcript_end(&t, c->ctx);
}

enum qb_status repair_context_init(struct repair_context *out, const struct custody_group *g, uint64_t attempt,
                                   uint32_t lost, const struct party_public *receiver, const uint32_t *helper,
                                   const struct party_public *party, struct qb_error *e)
{
	*out = (struct repair_context){0};
	if (g->k < 2 || g->n > CUSTODY_MAX || g->k >= g->n || lost == 0 || lost > g->n)
		return qb_fail(e, QB_RANGE, "repair", NULL, "custodian %u has no share in this group", lost);
	enum qb_status s = party_public_check(receiver, "receiver", e);
	for (uint32_t p = 0; s == QB_OK && p < g->k; p++) {
		if (helper[p] == 0 || helper[p] > g->n || helper[p] == lost || (p > 0 && helper[p] <= helper[p - 1]))
			return qb_fail(e, QB_RANGE, "repair",
			               "name each helper once, in ascending order, without the one who lost the share",
			               "custodian %u can't be helper number %u", helper[p], p + 1);
		s = party_public_check(&party[p], "helper", e);
		for (uint32_t q = 0; s == QB_OK && q < p; q++)
			if (memcmp(party[q].sign, party[p].sign, SIGN_PUBLIC) == 0 ||
			    memcmp(party[q].exchange, party[p].exchange, POINT_BYTES) == 0)
				s = qb_fail(e, QB_CRYPTO, "repair", "every helper needs keys of their own",
				            "helpers %u and %u share a key", helper[q], helper[p]);
	}
	if (s != QB_OK)
		return s;
	out->group = *g;
	out->attempt = attempt;
	out->lost = lost;
	out->receiver = *receiver;
	memcpy(out->helper, helper, g->k * sizeof *helper);
	memcpy(out->party, party, g->k * sizeof *party);
	context_hash(out);
	return QB_OK;
}

/* The place of custodian i in the list of helpers, or group.k. */
static uint32_t place_of(const struct repair_context *c, uint32_t i)
{
	uint32_t p = 0;
	while (p < c->group.k && c->helper[p] != i)
		p++;
	return p;
}

static bool same_keys(const struct party_key *me, const struct party_public *p)
{
	struct party_public mine;
	party_key_public(me, &mine);
	return memcmp(&mine, p, sizeof mine) == 0;
}

/* A helper's place, if these are their keys. */
static enum qb_status own_place(const struct repair_context *c, uint32_t i, const struct party_key *me, uint32_t *place,
                                struct qb_error *e)
{
	*place = place_of(c, i);
	if (*place == c->group.k)
		return qb_fail(e, QB_RANGE, "repair", NULL, "custodian %u is not one of the helpers", i);
	if (!same_keys(me, &c->party[*place]))
		return qb_fail(e, QB_RANGE, "repair", NULL, "this key is not custodian %u's", i);
	return QB_OK;
}

static struct sealed_share_route split_route(const struct repair_context *c, const struct repair_split *d,
                                             uint32_t place)
{
	return (struct sealed_share_route){
	    "quietbell/1/repair/summand-key", c->ctx, d->from, c->helper[place], d->ephemeral,
	    c->party[place].exchange};
}

static struct sealed_share_route sum_route(const struct repair_context *c, const struct repair_sum *d)
{
	return (struct sealed_share_route){"quietbell/1/repair/sum-key", d->splits, d->from, c->lost, d->ephemeral,
	                                   c->receiver.exchange};
}

static void split_hash(const struct repair_split *d, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/repair/split");
	transcript_field(&t, d->ctx, sizeof d->ctx);
	transcript_u64(&t, d->from);
	transcript_u64(&t, d->k);
	for (uint32_t p = 0; p < d->k; p++)
		transcript_field(&t, d->commitment[p], POINT_BYTES);
	transcript_field(&t, d->ephemeral, sizeof d->ephemeral);
	for (uint32_t p = 0; p < d->k; p++)
		transcript_field(&t, d->summand[p], SEALED_SHARE_BYTES);
	transcript_end(&t, out);
}

/* All first messages, so that a helper who shows different ones to different people is found out. */
static void splits_hash(const struct repair_context *c, const struct repair_split *splits, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/repair/splits");
	transcript_field(&t, c->ctx, sizeof c->ctx);
	for (uint32_t p = 0; p < c->group.k; p++) {
		transcript_field(&t, splits[p].hash, sizeof splits[p].hash);
		transcript_field(&t, splits[p].signature, sizeof splits[p].signature);
	}
	transcript_end(&t, out);
}

static void sum_hash(const struct repair_sum *d, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/repair/sum");
	transcript_field(&t, d->splits, sizeof d->splits);
	transcript_u64(&t, d->from);
	transcript_field(&t, d->ephemeral, sizeof d->ephemeral);
	transcript_field(&t, d->sum, sizeof d->sum);
	transcript_end(&t, out);
}

static void split_encode(const struct repair_split *d, struct buf *out)
{
	buf_put(out, split_magic, sizeof split_magic);
	buf_u32(out, d->from);
	buf_u32(out, d->k);
	buf_put(out, d->ctx, sizeof d->ctx);
	for (uint32_t p = 0; p < d->k; p++)
		buf_put(out, d->commitment[p], POINT_BYTES);
	buf_put(out, d->ephemeral, sizeof d->ephemeral);
	for (uint32_t p = 0; p < d->k; p++)
		buf_put(out, d->summand[p], SEALED_SHARE_BYTES);
	buf_put(out, d->signature, sizeof d->signature);
}

/* Random summands of rest for all places but the last, which gets what is left; their commitments and ciphertexts. */
static bool split(const struct repair_context *c, struct repair_split *d, uint8_t rest[static SCALAR_BYTES],
                  const uint8_t ephemeral[static SCALAR_BYTES])
{
	uint8_t summand[SCALAR_BYTES], z[POINT_BYTES];
	bool ok = group_mul_base(d->ephemeral, ephemeral);
	for (uint32_t p = 0; ok && p < d->k; p++) {
		if (p + 1 < d->k) {
			group_scalar_random(summand);
			group_scalar_sub(rest, rest, summand);
		} else {
			memcpy(summand, rest, sizeof summand);
		}
		struct sealed_share_route way = split_route(c, d, p);
		ok = group_mul_base(d->commitment[p], summand) && group_mul(z, ephemeral, way.exchange);
		if (ok)
			sealed_share_put(&way, z, summand, d->summand[p]);
	}
	wipe(summand, sizeof summand);
	wipe(z, sizeof z);
	return ok;
}

enum qb_status repair_split_make(const struct repair_context *c, uint32_t i, const struct party_key *me,
                                 const struct secret *share, struct buf *out, struct qb_error *e)
{
	uint8_t lambda[SCALAR_BYTES], y[POINT_BYTES];
	struct repair_split d = {.from = i, .k = c->group.k};
	uint32_t place;
	bool ok;
	enum qb_status s = own_place(c, i, me, &place, e);
	if (s != QB_OK)
		return s;
	if (secret_size(share) != SCALAR_BYTES || !group_mul_base(y, secret_view(share)) ||
	    memcmp(y, c->group.y[i - 1], sizeof y) != 0)
		return qb_fail(e, QB_CRYPTO, "key share", NULL, "it is not custodian %u's share of this group key", i);
	CHECK(group_lagrange_at(lambda, c->helper, c->group.k, place, c->lost));
	memcpy(d.ctx, c->ctx, sizeof d.ctx);
	struct secret *rest = secret_new(SCALAR_BYTES), *eph = secret_new(SCALAR_BYTES);
	do { /* a second turn is needed with probability 2^-240 */
		group_scalar_random(secret_bytes(eph));
		group_scalar_mul(secret_bytes(rest), lambda, secret_view(share));
		ok = split(c, &d, secret_bytes(rest), secret_view(eph));
	} while (!ok);
	secret_free(&rest);
	secret_free(&eph);
	split_hash(&d, d.hash);
	sign_bytes(me->seed, d.hash, sizeof d.hash, d.signature);
	split_encode(&d, out);
	return QB_OK;
}

enum qb_status repair_split_parse(const struct repair_context *c, const uint8_t *p, size_t n, struct repair_split *out,
                                  struct qb_error *e)
{
	memset(out, 0, sizeof *out);
	struct cursor r = cursor_over(p, n);
	const uint8_t *m = cursor_take(&r, sizeof split_magic);
	out->from = cursor_u32(&r);
	out->k = cursor_u32(&r);
	cursor_copy(&r, out->ctx, sizeof out->ctx);
	if (r.bad || memcmp(m, split_magic, sizeof split_magic) != 0)
		return qb_fail(e, QB_FORMAT, "repair", NULL, "it is not the first message of a repair");
	if (out->k != c->group.k || place_of(c, out->from) == c->group.k ||
	    memcmp(out->ctx, c->ctx, sizeof c->ctx) != 0)
		return qb_fail(e, QB_FORMAT, "repair", NULL, "it belongs to another repair or attempt");
	for (uint32_t q = 0; q < out->k; q++)
		cursor_copy(&r, out->commitment[q], POINT_BYTES);
	cursor_copy(&r, out->ephemeral, sizeof out->ephemeral);
	for (uint32_t q = 0; q < out->k; q++)
		cursor_copy(&r, out->summand[q], SEALED_SHARE_BYTES);
	cursor_copy(&r, out->signature, sizeof out->signature);
	if (r.bad || r.left != 0)
		return not_theirs(e, QB_FORMAT, out->from, "it does not have exactly the summands it must have");
	split_hash(out, out->hash);
	return QB_OK;
}

enum qb_status repair_split_check(const struct repair_context *c, const struct repair_split *d, struct qb_error *e)
{
	uint8_t h[64], lambda[SCALAR_BYTES], whole[POINT_BYTES], sum[POINT_BYTES];
	uint32_t place = place_of(c, d->from);
	if (place == c->group.k || d->k != c->group.k || memcmp(d->ctx, c->ctx, sizeof c->ctx) != 0)
		return qb_fail(e, QB_CRYPTO, "repair", NULL, "it belongs to another repair or attempt");
	split_hash(d, h);
	if (memcmp(h, d->hash, sizeof h) != 0 || !sign_verify(c->party[place].sign, h, sizeof h, d->signature))
		return not_theirs(e, QB_CRYPTO, d->from, "its signature is false");
	if (!group_point_ok(d->ephemeral))
		return blame(e, d->from, "E is not a valid point");
	bool ok = group_point_ok(d->commitment[0]);
	memcpy(sum, d->commitment[0], sizeof sum);
	for (uint32_t p = 1; ok && p < d->k; p++)
		ok = group_add(sum, sum, d->commitment[p]);
	if (!ok)
		return blame(e, d->from, "a commitment is not a valid point, or a sum of them vanishes");
	CHECK(group_lagrange_at(lambda, c->helper, c->group.k, place, c->lost));
	if (!group_mul(whole, lambda, c->group.y[d->from - 1]) || memcmp(whole, sum, sizeof sum) != 0)
		return blame(e, d->from, "its summands do not make up this custodian's part");
	return QB_OK;
}

static enum qb_status check_splits(const struct repair_context *c, const struct repair_split *splits,
                                   struct qb_error *e)
{
	enum qb_status s = QB_OK;
	for (uint32_t p = 0; s == QB_OK && p < c->group.k; p++)
		s = splits[p].from != c->helper[p] ? qb_fail(e, QB_CRYPTO, "repair", NULL,
		                                             "message %u is from custodian %u", p + 1, splits[p].from)
		                                   : repair_split_check(c, &splits[p], e);
	return s;
}

/* Adds the scalar in ct to sum when it is the logarithm of expected. */
static bool take(const struct sealed_share_route *way, const struct party_key *me, const uint8_t *ct,
                 const uint8_t expected[static POINT_BYTES], struct secret *sum)
{
	uint8_t z[POINT_BYTES], part[SCALAR_BYTES] = {0}, got[POINT_BYTES];
	bool ok = group_mul(z, secret_view(me->exchange), way->ephemeral) && sealed_share_get(way, z, ct, part) &&
	          group_mul_base(got, part) && memcmp(got, expected, sizeof got) == 0;
	if (ok)
		group_scalar_add(secret_bytes(sum), secret_view(sum), part);
	wipe(z, sizeof z);
	wipe(part, sizeof part);
	return ok;
}

static bool seal_sum(const struct repair_context *c, struct repair_sum *d, const struct secret *sum)
{
	uint8_t z[POINT_BYTES];
	struct secret *eph = secret_new(SCALAR_BYTES);
	group_scalar_random(secret_bytes(eph));
	bool ok = group_mul_base(d->ephemeral, secret_view(eph)) &&
	          group_mul(z, secret_view(eph), c->receiver.exchange) && group_scalar_ok(secret_view(sum));
	struct sealed_share_route way = sum_route(c, d);
	if (ok)
		sealed_share_put(&way, z, secret_view(sum), d->sum);
	wipe(z, sizeof z);
	secret_free(&eph);
	return ok;
}

enum qb_status repair_sum_make(const struct repair_context *c, const struct repair_split *splits, uint32_t j,
                               const struct party_key *me, struct buf *out, struct qb_error *e)
{
	struct repair_sum d = {.from = j};
	uint32_t place;
	enum qb_status s = own_place(c, j, me, &place, e);
	if (s == QB_OK)
		s = check_splits(c, splits, e);
	if (s != QB_OK)
		return s;
	struct secret *sum = secret_new(SCALAR_BYTES);
	for (uint32_t p = 0; s == QB_OK && p < c->group.k; p++) {
		struct sealed_share_route way = split_route(c, &splits[p], place);
		if (!take(&way, me, splits[p].summand[place], splits[p].commitment[place], sum))
			s = blame(e, splits[p].from, "the summand meant for you does not fit its commitment");
	}
	if (s == QB_OK) {
		splits_hash(c, splits, d.splits);
		if (!seal_sum(c, &d, sum))
			s = qb_fail(e, QB_CRYPTO, "repair", "start the next attempt",
			            "the sum of the summands vanishes");
	}
	secret_free(&sum);
	if (s != QB_OK)
		return s;
	sum_hash(&d, d.hash);
	sign_bytes(me->seed, d.hash, sizeof d.hash, d.signature);
	buf_put(out, sum_magic, sizeof sum_magic);
	buf_u32(out, d.from);
	buf_put(out, d.splits, sizeof d.splits);
	buf_put(out, d.ephemeral, sizeof d.ephemeral);
	buf_put(out, d.sum, sizeof d.sum);
	buf_put(out, d.signature, sizeof d.signature);
	return QB_OK;
}

enum qb_status repair_sum_parse(const struct repair_context *c, const uint8_t *p, size_t n, struct repair_sum *out,
                                struct qb_error *e)
{
	memset(out, 0, sizeof *out);
	struct cursor r = cursor_over(p, n);
	const uint8_t *m = cursor_take(&r, sizeof sum_magic);
	out->from = cursor_u32(&r);
	cursor_copy(&r, out->splits, sizeof out->splits);
	cursor_copy(&r, out->ephemeral, sizeof out->ephemeral);
	cursor_copy(&r, out->sum, sizeof out->sum);
	cursor_copy(&r, out->signature, sizeof out->signature);
	if (r.bad || r.left != 0 || memcmp(m, sum_magic, sizeof sum_magic) != 0 || place_of(c, out->from) == c->group.k)
		return qb_fail(e, QB_FORMAT, "repair", NULL, "it is not the second message of this repair");
	sum_hash(out, out->hash);
	return QB_OK;
}

enum qb_status repair_sum_check(const struct repair_context *c, const struct repair_split *splits,
                                const struct repair_sum *d, struct qb_error *e)
{
	uint8_t h[64];
	uint32_t place = place_of(c, d->from);
	if (place == c->group.k)
		return qb_fail(e, QB_CRYPTO, "repair", NULL, "it is not from one of the helpers");
	sum_hash(d, h);
	if (memcmp(h, d->hash, sizeof h) != 0 || !sign_verify(c->party[place].sign, h, sizeof h, d->signature))
		return not_theirs(e, QB_CRYPTO, d->from, "its signature is false");
	splits_hash(c, splits, h);
	if (memcmp(h, d->splits, sizeof h) != 0)
		return not_theirs(e, QB_CRYPTO, d->from, "it is about other first messages than these");
	if (!group_point_ok(d->ephemeral))
		return blame(e, d->from, "E is not a valid point");
	return QB_OK;
}

/* What the sum of the helper at `place` must be, in the exponent. */
static bool expected_sum(const struct repair_context *c, const struct repair_split *splits, uint32_t place,
                         uint8_t out[static POINT_BYTES])
{
	bool ok = true;
	memcpy(out, splits[0].commitment[place], POINT_BYTES);
	for (uint32_t p = 1; ok && p < c->group.k; p++)
		ok = group_add(out, out, splits[p].commitment[place]);
	return ok;
}

enum qb_status repair_share(const struct repair_context *c, const struct repair_split *splits,
                            const struct repair_sum *sums, const struct party_key *me, struct secret **share,
                            struct qb_error *e)
{
	uint8_t expected[POINT_BYTES], y[POINT_BYTES];
	*share = NULL;
	if (!same_keys(me, &c->receiver))
		return qb_fail(e, QB_RANGE, "repair", NULL, "this key is not the receiver's");
	enum qb_status s = check_splits(c, splits, e);
	struct secret *whole = secret_new(SCALAR_BYTES);
	for (uint32_t p = 0; s == QB_OK && p < c->group.k; p++) {
		struct sealed_share_route way = sum_route(c, &sums[p]);
		if (sums[p].from != c->helper[p])
			s = qb_fail(e, QB_CRYPTO, "repair", NULL, "sum %u is from custodian %u", p + 1, sums[p].from);
		else
			s = repair_sum_check(c, splits, &sums[p], e);
		if (s == QB_OK &&
		    (!expected_sum(c, splits, p, expected) || !take(&way, me, sums[p].sum, expected, whole)))
			s = blame(e, sums[p].from, "its sum does not fit the commitments");
	}
	if (s == QB_OK && (!group_mul_base(y, secret_view(whole)) || memcmp(y, c->group.y[c->lost - 1], sizeof y) != 0))
		s = qb_fail(e, QB_CRYPTO, "repair", NULL, "the sum of the sums is not custodian %u's share", c->lost);
	if (s == QB_OK)
		*share = whole;
	else
		secret_free(&whole);
	return s;
}
