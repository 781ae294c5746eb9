/* The service's part of resharing and repair: it relays, keeps order, and checks what an outsider can check. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/keyholders.h"

static enum qb_status runs(bool under_way, uint64_t attempt, const struct accepted *a, const char *what,
                           struct qb_error *e)
{
	if (!under_way || (uint64_t)wire_entry_int(&a->entry, "attempt") != attempt)
		return qb_fail(e, QB_CONFLICT, what, "follow the ledger", "no such attempt is under way");
	return QB_OK;
}

enum qb_status reshare_check_request(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	struct reshare_view *r = QB_NEW(struct reshare_view);
	enum qb_status st = reshare_prepare(&o->view, c, &a->entry, r, e);
	qb_free(r);
	return st;
}

enum qb_status reshare_check_deal(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int place = reshare_dealer(c, a->entry.by);
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	enum qb_status st = runs(c->reshare.under_way, c->reshare_attempt, a, "reshare", e);
	(void)o;
	if (st == QB_OK && (place < 0 || c->reshare.deal[place].len > 0))
		st = qb_fail(e, QB_CONFLICT, "reshare", NULL, "a deal of %s is not due now", a->entry.by);
	if (st == QB_OK)
		st = keyholder_message(a, "message", &b, e);
	if (st == QB_OK)
		st = reshare_parse(&c->reshare.context, b.data, b.len, d, e);
	if (st == QB_OK && d->from != (uint32_t)c->reshare.dealer[place] + 1)
		st = qb_fail(e, QB_CRYPTO, "reshare: message", NULL, "is from another custodian");
	if (st == QB_OK)
		st = reshare_check(&c->reshare.context, d, e);
	buf_free(&b);
	qb_free(d);
	return st;
}

enum qb_status reshare_check_complaint(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	const char *guilty;
	(void)o;
	return reshare_judge(c, &a->entry, &guilty, e);
}

enum qb_status reshare_check_failed(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	(void)o;
	return runs(c->reshare.under_way, c->reshare_attempt, a, "reshare", e);
}

enum qb_status reshare_check_certify(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	uint8_t given[64], own[64], signature[64];
	int i = reshare_member(c, a->entry.by);
	enum qb_status st = runs(c->reshare.under_way, c->reshare_attempt, a, "reshare", e);
	(void)o;
	if (st != QB_OK)
		return st;
	if (i < 0 || !c->reshare.has_group || c->reshare.member[i].certify_seq != NO_SEQ)
		return qb_fail(e, QB_CONFLICT, "reshare", NULL, "a certificate of %s is not due now", a->entry.by);
	wire_entry_hex(&a->entry, "certificate", given, 64);
	wire_entry_hex(&a->entry, "certificate_signature", signature, 64);
	keygen_certificate_hash(&c->reshare.group, own);
	if (memcmp(given, own, 64) != 0)
		return qb_fail(e, QB_CRYPTO, "reshare: certificate", "verify the ledger's deals again",
		               "is not the certificate that follows from the deals in the ledger");
	if (!keygen_certificate_signed_by(&c->reshare.group, c->reshare.context.party[i].sign, signature))
		return qb_fail(e, QB_CRYPTO, "reshare: certificate_signature", NULL, "does not verify");
	return QB_OK;
}

enum qb_status reshare_after_certify(struct txn *t, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	struct reshare_view *r = &c->reshare;
	int i = reshare_member(c, a->entry.by);
	if (!custodians_all_in(r->member, r->n, i, offsetof(struct custodian, certify_seq)))
		return QB_OK;
	return canary_seal(t, c, &r->group, "reshare-canary", c->reshare_attempt, "all of the new set certified", e);
}

enum qb_status reshare_check_erased(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int64_t epoch = wire_entry_int(&a->entry, "epoch");
	(void)o;
	for (int i = 0; i < c->n_owed; i++) {
		if (c->owed[i].epoch == (uint64_t)epoch && strcmp(c->owed[i].party->name, a->entry.by) == 0)
			return QB_OK;
	}
	return qb_fail(e, QB_CONFLICT, "share-erased: epoch", NULL, "%s has no erasure of epoch %lld to state",
	               a->entry.by, (long long)epoch);
}

enum qb_status repair_check_request(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	struct repair_view *r = QB_NEW(struct repair_view);
	enum qb_status st = repair_prepare(c, &a->entry, r, e);
	(void)o;
	qb_free(r);
	return st;
}

static enum qb_status parse_splits(const struct campaign *c, struct repair_split *out, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < c->k; i++)
		st =
		    repair_split_parse(&c->repair.context, c->repair.split[i].data, c->repair.split[i].len, &out[i], e);
	return st;
}

enum qb_status repair_check_split(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int place = repair_helper(c, a->entry.by);
	struct repair_split *d = QB_NEW(struct repair_split);
	struct buf b = {0};
	enum qb_status st = runs(c->repair.under_way, c->repair_attempt, a, "repair", e);
	(void)o;
	if (st == QB_OK && (place < 0 || c->repair.split[place].len > 0))
		st = qb_fail(e, QB_CONFLICT, "repair", NULL, "a part of %s is not due now", a->entry.by);
	if (st == QB_OK)
		st = keyholder_message(a, "message", &b, e);
	if (st == QB_OK)
		st = repair_split_parse(&c->repair.context, b.data, b.len, d, e);
	if (st == QB_OK && d->from != (uint32_t)c->repair.helper[place] + 1)
		st = qb_fail(e, QB_CRYPTO, "repair: message", NULL, "is from another custodian");
	if (st == QB_OK)
		st = repair_split_check(&c->repair.context, d, e);
	buf_free(&b);
	qb_free(d);
	return st;
}

enum qb_status repair_check_sum(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int place = repair_helper(c, a->entry.by);
	struct repair_split *splits = QB_NEW_ARRAY(struct repair_split, (size_t)c->k);
	struct repair_sum *d = QB_NEW(struct repair_sum);
	struct buf b = {0};
	enum qb_status st = runs(c->repair.under_way, c->repair_attempt, a, "repair", e);
	(void)o;
	if (st == QB_OK && (place < 0 || c->repair.sum[place].len > 0))
		st = qb_fail(e, QB_CONFLICT, "repair", NULL, "a part of %s is not due now", a->entry.by);
	if (st == QB_OK)
		st = parse_splits(c, splits, e);
	if (st == QB_OK)
		st = keyholder_message(a, "message", &b, e);
	if (st == QB_OK)
		st = repair_sum_parse(&c->repair.context, b.data, b.len, d, e);
	if (st == QB_OK && d->from != (uint32_t)c->repair.helper[place] + 1)
		st = qb_fail(e, QB_CRYPTO, "repair: message", NULL, "is from another custodian");
	if (st == QB_OK)
		st = repair_sum_check(&c->repair.context, splits, d, e);
	buf_free(&b);
	qb_free(d);
	qb_free(splits);
	return st;
}

enum qb_status repair_check_failed(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	(void)o;
	return runs(c->repair.under_way, c->repair_attempt, a, "repair", e);
}

enum qb_status repair_check_done(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	enum qb_status st = runs(c->repair.under_way, c->repair_attempt, a, "repair", e);
	(void)o;
	if (st == QB_OK && custodian_index(c, a->entry.by) != c->repair.lost)
		st = qb_fail(e, QB_REFUSED, "repair", NULL, "%s lost no share", a->entry.by);
	return st;
}
