/*
 * The service's part of key generation: it relays and keeps order. It checks what an outsider can check, so that junk
 * never enters the ledger, and judges complaints as everybody else can.
 */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/keyholders.h"

enum qb_status keyholder_message(const struct accepted *a, const char *key, struct buf *out, struct qb_error *e)
{
	if (!base64_decode(wire_entry_text(&a->entry, key), out))
		return qb_fail(e, QB_FORMAT, key, NULL, "is not base64");
	return QB_OK;
}

bool custodians_all_in(const struct custodian *list, int n, int except, size_t offset)
{
	for (int i = 0; i < n; i++) {
		const int64_t *seq = (const int64_t *)(const void *)((const char *)&list[i] + offset);
		if (i != except && *seq == NO_SEQ)
			return false;
	}
	return true;
}

static enum qb_status check_attempt(const struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	if (c->stalled)
		return qb_fail(e, QB_CONFLICT, "keygen", "draft a new plan",
		               "too few custodians are left for a key generation");
	if ((uint64_t)wire_entry_int(&a->entry, "attempt") != c->attempt)
		return qb_fail(e, QB_CONFLICT, "keygen: attempt", "follow the ledger", "attempt %llu runs now",
		               (unsigned long long)c->attempt);
	return QB_OK;
}

static enum qb_status check_deal(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int i = custodian_index(c, a->entry.by);
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	enum qb_status st = check_attempt(c, a, e);
	(void)o;
	if (st == QB_OK && (c->state != C_DRAFTED || c->custodian[i].deal_seq != NO_SEQ))
		st = qb_fail(e, QB_CONFLICT, "keygen", NULL, "the deal of %s for attempt %llu is in already",
		             a->entry.by, (unsigned long long)c->attempt);
	if (st == QB_OK)
		st = keyholder_message(a, "message", &b, e);
	if (st == QB_OK)
		st = deal_parse(&c->context, b.data, b.len, d, e);
	if (st == QB_OK && d->from != (uint32_t)i + 1)
		st = qb_fail(e, QB_CRYPTO, "keygen: message", NULL, "is from another custodian");
	if (st == QB_OK)
		st = deal_check(&c->context, d, e);
	buf_free(&b);
	qb_free(d);
	return st;
}

static enum qb_status check_certify(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	uint8_t given[64], own[64], signature[64];
	int i = custodian_index(c, a->entry.by);
	enum qb_status st = check_attempt(c, a, e);
	(void)o;
	if (st != QB_OK)
		return st;
	if (c->state != C_DRAFTED || !c->has_group || c->custodian[i].certify_seq != NO_SEQ)
		return qb_fail(e, QB_CONFLICT, "keygen", NULL, "a certificate of %s is not due now", a->entry.by);
	wire_entry_hex(&a->entry, "certificate", given, 64);
	wire_entry_hex(&a->entry, "certificate_signature", signature, 64);
	keygen_certificate_hash(&c->group, own);
	if (memcmp(given, own, 64) != 0)
		return qb_fail(e, QB_CRYPTO, "keygen: certificate", "verify the ledger's deals again",
		               "is not the certificate that follows from the deals in the ledger");
	if (!keygen_certificate_signed_by(&c->group, c->context.party[i].sign, signature))
		return qb_fail(e, QB_CRYPTO, "keygen: certificate_signature", NULL, "does not verify");
	return QB_OK;
}

static enum qb_status after_certify(struct txn *t, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int i = custodian_index(c, a->entry.by);
	if (!custodians_all_in(c->custodian, c->n, i, offsetof(struct custodian, certify_seq)))
		return QB_OK;
	return canary_seal(t, c, &c->group, "canary", c->attempt, "all custodians certified", e);
}

static enum qb_status check_commitment(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int i = custodian_index(c, a->entry.by);
	(void)o;
	if (c->state != C_REHEARSED || (uint64_t)wire_entry_int(&a->entry, "sealing_attempt") != c->sealing_attempt ||
	    c->custodian[i].commitment_seq != NO_SEQ)
		return qb_fail(e, QB_CONFLICT, "keygen", NULL, "a new commitment is not due now");
	return QB_OK;
}

static enum qb_status check_failed(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	enum qb_status st = check_attempt(c, a, e);
	(void)o;
	if (st == QB_OK && c->state != C_DRAFTED)
		st = qb_fail(e, QB_CONFLICT, "keygen", NULL, "the key generation is over");
	if (st == QB_OK && custodian_index(c, wire_entry_text(&a->entry, "accused")) < 0)
		st = qb_fail(e, QB_REFUSED, "keygen: accused", NULL, "is not a custodian of this campaign");
	/* Everybody can check a deal, and whose share is bad a complaint proves: this is for sets of good deals only.
	 */
	for (int i = 0; st == QB_OK && i < c->n; i++) {
		if (c->custodian[i].deal_seq == NO_SEQ || c->has_group)
			st = qb_fail(e, QB_REFUSED, "keygen", "file a complaint about a bad share",
			             "nothing is wrong that everybody could see");
	}
	return st;
}

static enum qb_status check_complaint(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	int guilty;
	(void)o;
	return campaign_judge(c, &a->entry, &guilty, e);
}

static enum qb_status check_exclusion(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	const char *name = wire_entry_text(&a->entry, "name");
	if (campaign_silent(c, name, now_locked(o)) < 0)
		return qb_fail(e, QB_CONFLICT, "exclusion", "wait, or ask the person by telephone",
		               "the attempt has not stood still for three days because of '%s'", name);
	return QB_OK;
}

/* Who is a custodian in office may do everything; of a set to come or replaced, only what is theirs. */
enum part { IN_OFFICE, ANYBODY };
static const struct {
	const char *type;
	keyholder_check *check;
	keyholder_after *after;
	enum part part;
} steps[] = {
    {"deal", check_deal, NULL, IN_OFFICE},
    {"certify", check_certify, after_certify, IN_OFFICE},
    {"keygen-failed", check_failed, NULL, IN_OFFICE},
    {"complaint", check_complaint, NULL, IN_OFFICE},
    {"exclusion", check_exclusion, NULL, ANYBODY},
    {"contribution-commitment", check_commitment, NULL, IN_OFFICE},
    {"rehearsal-request", canary_check_request, canary_after_request, IN_OFFICE},
    {"reshare-request", reshare_check_request, NULL, ANYBODY},
    {"reshare-deal", reshare_check_deal, NULL, IN_OFFICE},
    {"reshare-complaint", reshare_check_complaint, NULL, ANYBODY},
    {"reshare-failed", reshare_check_failed, NULL, ANYBODY},
    {"reshare-certify", reshare_check_certify, reshare_after_certify, ANYBODY},
    {"share-erased", reshare_check_erased, NULL, ANYBODY},
    {"repair-request", repair_check_request, NULL, IN_OFFICE},
    {"repair-split", repair_check_split, NULL, IN_OFFICE},
    {"repair-sum", repair_check_sum, NULL, IN_OFFICE},
    {"repair-failed", repair_check_failed, NULL, IN_OFFICE},
    {"repaired", repair_check_done, NULL, IN_OFFICE},
};

enum qb_status case_keygen(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                           struct qb_error *e)
{
	struct accepted a;
	struct txn t;
	uint8_t leaf[32];
	int64_t seq;
	size_t s = 0;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	while (s < sizeof steps / sizeof steps[0] && strcmp(steps[s].type, a.entry.type->type) != 0)
		s++;
	if (s == sizeof steps / sizeof steps[0])
		st = qb_fail(e, QB_REFUSED, "entry", NULL, "an entry of type '%s' is not taken here",
		             a.entry.type->type);
	else if (steps[s].part == IN_OFFICE && custodian_index(c, a.entry.by) < 0)
		st = qb_fail(e, QB_REFUSED, "entry: by", NULL, "%s is not a custodian in office", a.entry.by);
	else
		st = steps[s].check(o, c, &a, e);
	if (st == QB_OK && (st = txn_begin(&t, o, "keygen", e)) == QB_OK) {
		st = txn_entry(&t, call->who->key_id, a.text, a.signature, &seq, leaf, e);
		if (st == QB_OK && steps[s].after != NULL)
			st = steps[s].after(&t, c, &a, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	accepted_free(&a);
	return st;
}
