/*
 * The service's part of key generation: it relays and keeps order. It checks what an outsider can check, so that junk
 * never enters the ledger, seals the canary when all have certified, and combines the rehearsal.
 */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define CANARY_BYTES 32

static enum qb_status check_deal(struct campaign *c, const struct accepted *a, int i, struct qb_error *e)
{
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	enum qb_status st = QB_OK;
	if (c->state != C_DRAFTED || c->custodian[i].deal_seq != NO_SEQ)
		st = qb_fail(e, QB_CONFLICT, "keygen", NULL, "the deal of %s for attempt %llu is in already",
		             a->entry.by, (unsigned long long)c->attempt);
	if (st == QB_OK && !base64_decode(wire_entry_text(&a->entry, "message"), &b))
		st = qb_fail(e, QB_FORMAT, "keygen: message", NULL, "is not base64");
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

static enum qb_status check_certify(struct campaign *c, const struct accepted *a, int i, struct qb_error *e)
{
	uint8_t given[64], own[64], signature[64];
	if (c->state != C_DRAFTED || !c->has_group || c->custodian[i].certify_seq != NO_SEQ)
		return qb_fail(e, QB_CONFLICT, "keygen", NULL, "a certificate of %s is not due now", a->entry.by);
	wire_entry_hex(&a->entry, "certificate", given, 64);
	wire_entry_hex(&a->entry, "certificate_signature", signature, 64);
	keygen_certificate_hash(&c->group, own);
	if (memcmp(given, own, 64) != 0)
		return qb_fail(e, QB_CRYPTO, "keygen: certificate", "verify the ledger's deals again",
		               "is not the certificate that follows from the deals in the ledger");
	if (!keygen_certificate_signed_by(&c->group, c->custodian[i].party->signing_key, signature))
		return qb_fail(e, QB_CRYPTO, "keygen: certificate_signature", NULL, "does not verify");
	return QB_OK;
}

static bool all_in(const struct campaign *c, int except, size_t offset)
{
	for (int i = 0; i < c->n; i++) {
		const int64_t *seq = (const int64_t *)(const void *)((const char *)&c->custodian[i] + offset);
		if (i != except && *seq == NO_SEQ)
			return false;
	}
	return true;
}

static void canary_key(const struct campaign *c, char out[static 48])
{
	char hex[33];
	hex_encode(hex, c->id, 16);
	memcpy(out, "canary-", 7);
	memcpy(out + 7, hex, 33);
}

/* The content stays unknown to the store: only its hash is kept, to be compared after the combination. */
static enum qb_status seal_canary(struct txn *t, struct campaign *c, struct qb_error *e)
{
	uint8_t content[CANARY_BYTES], hash[64];
	char key[48], hex[129];
	struct buf record = {0};
	struct record_header h = {.type = RECORD_CANARY, .epoch = 1, .index = c->attempt};
	memcpy(h.campaign, c->id, 16);
	memcpy(h.author, t->o->service_id, 16);
	random_bytes(content, sizeof content);
	blake2b_512(hash, content, sizeof content);
	hex_encode(hex, hash, 64);
	canary_key(c, key);
	enum qb_status st = record_seal(&c->group, &h, content, sizeof content, &record, e);
	wipe(content, sizeof content);
	if (st == QB_OK)
		st = store_setting_put(t->o->store, key, hex, e);
	if (st == QB_OK) {
		json_t *extra = json_object();
		char *text = base64_encode(record.data, record.len);
		json_object_set_new(extra, "attempt", json_integer((json_int_t)c->attempt));
		json_object_set_new(extra, "record", json_string(text));
		qb_free(text);
		st = txn_service_entry(t, "canary", c, "all custodians certified", extra, NULL, NULL, e);
	}
	buf_free(&record);
	return st;
}

static enum qb_status check_attempt(const struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	if ((uint64_t)wire_entry_int(&a->entry, "attempt") != c->attempt)
		return qb_fail(e, QB_CONFLICT, "keygen: attempt", "follow the ledger", "attempt %llu runs now",
		               (unsigned long long)c->attempt);
	return QB_OK;
}

static enum qb_status check_commitment(const struct campaign *c, const struct accepted *a, int i, struct qb_error *e)
{
	if (c->state != C_REHEARSED || (uint64_t)wire_entry_int(&a->entry, "sealing_attempt") != c->sealing_attempt ||
	    c->custodian[i].commitment_seq != NO_SEQ)
		return qb_fail(e, QB_CONFLICT, "keygen", NULL, "a new commitment is not due now");
	return QB_OK;
}

static enum qb_status check_failed(const struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	if (c->state != C_DRAFTED)
		return qb_fail(e, QB_CONFLICT, "keygen", NULL, "the key generation is over");
	if (custodian_index(c, wire_entry_text(&a->entry, "accused")) < 0)
		return qb_fail(e, QB_REFUSED, "keygen: accused", NULL, "is not a custodian of this campaign");
	return QB_OK;
}

enum qb_status case_keygen(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                           struct qb_error *e)
{
	struct accepted a;
	struct txn t;
	uint8_t leaf[32];
	int64_t seq;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	int i = custodian_index(c, a.entry.by);
	const char *type = a.entry.type->type;
	bool certify = strcmp(type, "certify") == 0;
	if (strcmp(type, "contribution-commitment") == 0)
		st = check_commitment(c, &a, i, e);
	else if ((st = check_attempt(c, &a, e)) != QB_OK)
		;
	else if (strcmp(type, "deal") == 0)
		st = check_deal(c, &a, i, e);
	else
		st = certify ? check_certify(c, &a, i, e) : check_failed(c, &a, e);
	if (st == QB_OK && (st = txn_begin(&t, o, "keygen", e)) == QB_OK) {
		st = txn_entry(&t, call->who->key_id, a.text, a.signature, &seq, leaf, e);
		if (st == QB_OK && certify && all_in(c, i, offsetof(struct custodian, certify_seq)))
			st = seal_canary(&t, c, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	accepted_free(&a);
	return st;
}

static enum qb_status combine_canary(struct ops *o, const struct campaign *c, const struct record *rec,
                                     const struct partial *latest, int latest_i, struct qb_error *e)
{
	struct partial partials[CUSTODY_MAX];
	struct buf content = {0}, want = {0};
	uint8_t hash[64], expected[64];
	char key[48];
	size_t n = 0;
	partials[n++] = *latest;
	for (int i = 0; i < c->n; i++) {
		if (i != latest_i)
			partials[n++] = c->custodian[i].rehearsal;
	}
	canary_key(c, key);
	enum qb_status st = partial_open(&c->group, rec, partials, n, &content, e);
	if (st == QB_OK)
		st = store_setting_get(o->store, key, &want, e);
	if (st == QB_OK) {
		blake2b_512(hash, content.data, content.len);
		if (!hex_decode(expected, 64, (const char *)want.data) || memcmp(hash, expected, 64) != 0)
			st = qb_fail(e, QB_CRYPTO, "rehearsal", "start a new key generation",
			             "the canary opened to another text");
	}
	buf_wipe(&content);
	buf_free(&want);
	return st;
}

/* The other custodians' partials are in the ledger; after a restart they are read back from there. */
static enum qb_status load_rehearsals(struct ops *o, struct campaign *c, const struct record *rec,
                                      const struct partial_authority *auth, int except, struct qb_error *e);

enum qb_status case_rehearsal(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                              struct qb_error *e)
{
	struct accepted a;
	struct buf share = {0};
	struct record rec;
	struct partial p;
	struct partial_authority auth = {.purpose = PARTIAL_REHEARSAL};
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	int i = custodian_index(c, a.entry.by);
	if (c->state != C_CERTIFIED || c->custodian[i].rehearsal_seq != NO_SEQ)
		st = qb_fail(e, QB_CONFLICT, "rehearsal", NULL, "a rehearsal of %s is not due now", a.entry.by);
	if (st == QB_OK)
		st = check_attempt(c, &a, e);
	memcpy(auth.hash, c->canary_leaf, 32);
	if (st == QB_OK)
		st = record_check(&c->group, c->canary, c->canary_n, &rec, e);
	if (st == QB_OK && !base64_decode(wire_entry_text(&a.entry, "share"), &share))
		st = qb_fail(e, QB_FORMAT, "rehearsal: share", NULL, "is not base64");
	if (st == QB_OK)
		st = partial_check(&c->group, &rec, &auth, share.data, share.len, &p, e);
	if (st == QB_OK && p.i != (uint32_t)i + 1)
		st = qb_fail(e, QB_CRYPTO, "rehearsal: share", NULL, "is another custodian's");
	bool last = st == QB_OK && all_in(c, i, offsetof(struct custodian, rehearsal_seq));
	if (last)
		st = load_rehearsals(o, c, &rec, &auth, i, e);
	if (last && st == QB_OK)
		st = combine_canary(o, c, &rec, &p, i, e);
	struct txn t;
	uint8_t leaf[32];
	int64_t seq;
	if (st == QB_OK && (st = txn_begin(&t, o, "rehearsal", e)) == QB_OK) {
		st = txn_entry(&t, call->who->key_id, a.text, a.signature, &seq, leaf, e);
		if (st == QB_OK && last) {
			json_t *extra = json_object();
			json_object_set_new(extra, "attempt", json_integer((json_int_t)c->attempt));
			st = txn_service_entry(&t, "rehearsed", c, "all custodians opened the canary", extra, NULL,
			                       NULL, e);
		}
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	buf_free(&share);
	accepted_free(&a);
	return st;
}

struct loading {
	struct campaign *c;
	const struct record *rec;
	const struct partial_authority *auth;
};

static enum qb_status load_one(void *state, uint64_t seq, const uint8_t *frame, size_t n,
                               const uint8_t leaf_hash[static 32], struct qb_error *e)
{
	struct loading *l = state;
	struct entry leaf;
	struct wire_entry en;
	struct buf share = {0};
	(void)seq;
	(void)leaf_hash;
	enum qb_status st = entry_decode(frame, n, &leaf, e);
	if (st != QB_OK || (st = wire_entry_parse((const char *)leaf.body, leaf.body_len, &en, e)) != QB_OK)
		return st;
	int i = custodian_index(l->c, en.by);
	if (i >= 0 && base64_decode(wire_entry_text(&en, "share"), &share))
		st = partial_check(&l->c->group, l->rec, l->auth, share.data, share.len, &l->c->custodian[i].rehearsal,
		                   e);
	buf_free(&share);
	wire_entry_free(&en);
	return st;
}

static enum qb_status load_rehearsals(struct ops *o, struct campaign *c, const struct record *rec,
                                      const struct partial_authority *auth, int except, struct qb_error *e)
{
	struct loading l = {c, rec, auth};
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < c->n; i++) {
		if (i != except)
			st = store_leaves(o->store, (uint64_t)c->custodian[i].rehearsal_seq, 1, load_one, &l, e);
	}
	return st;
}
