/*
 * Key generation in the projection: deals, certificates, complaints that anybody can judge again, exclusions. What
 * follows a certified key is in rehearsals.c and reshare.c.
 */
#include "server/view/keyholders.h"

#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/custody/complaint.h"

static void restart(struct custodian *cu)
{
	const struct view_party *p = cu->party;
	qb_free(cu->deal);
	*cu = (struct custodian){.party = p,
	                         .deal_seq = NO_SEQ,
	                         .certify_seq = NO_SEQ,
	                         .rehearsal_seq = NO_SEQ,
	                         .commitment_seq = NO_SEQ,
	                         .contribution_seq = NO_SEQ};
}

static enum qb_status context(struct campaign *c, struct qb_error *e)
{
	struct party_public parties[CUSTODY_MAX];
	for (int i = 0; i < c->n; i++) {
		memcpy(parties[i].sign, c->custodian[i].party->signing_key, 32);
		memcpy(parties[i].exchange, c->custodian[i].party->exchange_key, 32);
	}
	return keygen_context_init(&c->context, c->id, 1, c->attempt, (uint32_t)c->n, (uint32_t)c->k, parties, e);
}

enum qb_status view_draft_keyholders(const struct view *v, struct campaign *c, int64_t now_ns, struct qb_error *e)
{
	c->n = c->plan->custodians;
	c->k = c->plan->custodians_needed;
	c->attempt = 1;
	c->epoch = 1;
	c->canary_seq = NO_SEQ;
	c->step_ns = now_ns;
	for (int i = 0; i < c->n; i++) {
		c->custodian[i].party = view_party_named(v, plan_person(c->plan, DUTY_CUSTODIAN, i)->name);
		restart(&c->custodian[i]);
		if (c->custodian[i].party == NULL)
			return qb_fail(e, QB_REFUSED, "plan: parties", "enrol first", "custodian %d is not enrolled",
			               i + 1);
		view_begin_term(c, c->custodian[i].party, now_ns);
	}
	return context(c, e);
}

void view_begin_term(struct campaign *c, const struct view_party *p, int64_t from_ns)
{
	c->term = qb_realloc(c->term, (size_t)c->n_terms + 1, sizeof *c->term);
	c->term[c->n_terms++] = (struct custody_term){p, from_ns, INT64_MAX};
}

void view_end_term(struct campaign *c, const struct view_party *p, int64_t to_ns)
{
	for (int i = 0; i < c->n_terms; i++) {
		if (c->term[i].party == p && c->term[i].to_ns == INT64_MAX)
			c->term[i].to_ns = to_ns;
	}
}

bool view_all_did(const struct custodian *list, int n, size_t offset)
{
	for (int i = 0; i < n; i++) {
		const int64_t *seq = (const int64_t *)(const void *)((const char *)&list[i] + offset);
		if (*seq == NO_SEQ)
			return false;
	}
	return true;
}

static bool any_did(const struct custodian *list, int n, size_t offset)
{
	for (int i = 0; i < n; i++) {
		const int64_t *seq = (const int64_t *)(const void *)((const char *)&list[i] + offset);
		if (*seq != NO_SEQ)
			return true;
	}
	return false;
}

/* ---- an attempt that ends without a key ---- */

void view_note_failure(struct campaign *c, enum attempt_kind kind, uint64_t attempt, const char *excluded,
                       const char *how, const struct wire_entry *en)
{
	c->failure = qb_realloc(c->failure, (size_t)c->n_failures + 1, sizeof *c->failure);
	struct custody_failure *f = &c->failure[c->n_failures++];
	*f = (struct custody_failure){.kind = kind, .attempt = attempt};
	(void)snprintf(f->excluded, sizeof f->excluded, "%s", excluded);
	(void)snprintf(f->how, sizeof f->how, "%s", how);
	(void)snprintf(f->by, sizeof f->by, "%s", en->by);
	(void)snprintf(f->why, sizeof f->why, "%.299s", en->why);
}

static void forget_founders(struct campaign *c)
{
	for (int i = 0; i < CUSTODY_MAX; i++)
		buf_free(&c->founding.deal[i]);
	buf_free(&c->founding.certificate);
	c->n_founders = 0;
}

/* The next attempt, without the person at `out` (from 0), or with everybody when out is -1. */
static void next_attempt(struct campaign *c, int out, int64_t now_ns)
{
	struct qb_error ignored = {0};
	for (int i = 0; i < c->n; i++)
		restart(&c->custodian[i]);
	if (out >= 0)
		view_end_term(c, c->custodian[out].party, now_ns);
	for (int i = out; out >= 0 && i + 1 < c->n; i++)
		c->custodian[i] = c->custodian[i + 1];
	c->n -= out >= 0;
	c->attempt++;
	c->step_ns = now_ns;
	c->state = C_DRAFTED;
	c->canary_seq = NO_SEQ;
	c->has_group = false;
	forget_founders(c);
	c->stalled = c->n < c->k + 1 || context(c, &ignored) != QB_OK;
}

enum qb_status campaign_judge(const struct campaign *c, const struct wire_entry *en, int *guilty, struct qb_error *e)
{
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	enum complaint_verdict verdict = COMPLAINT_FALSE;
	int by = custodian_index(c, en->by), accused = custodian_index(c, wire_entry_text(en, "accused"));
	enum qb_status st = QB_OK;
	if (c->state != C_DRAFTED || c->stalled || (uint64_t)wire_entry_int(en, "attempt") != c->attempt || by < 0 ||
	    accused < 0 || by == accused || c->custodian[accused].deal_seq == NO_SEQ)
		st = qb_fail(e, QB_CONFLICT, "complaint", "follow the ledger",
		             "it is about no deal of the attempt that runs");
	if (st == QB_OK && !base64_decode(wire_entry_text(en, "complaint"), &b))
		st = qb_fail(e, QB_FORMAT, "complaint", NULL, "is not base64");
	if (st == QB_OK && (b.len < 12 || b.data[4] != accused + 1 || b.data[8] != by + 1))
		st = qb_fail(e, QB_CRYPTO, "complaint", NULL, "names other custodians than its entry");
	if (st == QB_OK)
		st = deal_parse(&c->context, c->custodian[accused].deal, c->custodian[accused].deal_n, d, e);
	if (st == QB_OK)
		st = complaint_judge(&c->context, d, b.data, b.len, &verdict, e);
	*guilty = verdict == COMPLAINT_SENDER_GUILTY ? accused : by;
	buf_free(&b);
	qb_free(d);
	return st;
}

const char *campaign_attempt_word(enum attempt_kind kind)
{
	static const char *const of[] = {"key generation", "resharing", "repair"};
	return of[kind];
}

json_t *campaign_failures(const struct campaign *c)
{
	json_t *list = json_array();
	for (int i = 0; i < c->n_failures; i++) {
		const struct custody_failure *f = &c->failure[i];
		json_t *j = json_object();
		json_object_set_new(j, "of", json_string(campaign_attempt_word(f->kind)));
		json_object_set_new(j, "attempt", json_integer((json_int_t)f->attempt));
		json_object_set_new(j, "excluded", f->excluded[0] != '\0' ? json_string(f->excluded) : json_null());
		json_object_set_new(j, "how", json_string(f->how));
		json_object_set_new(j, "by", json_string(f->by));
		json_object_set_new(j, "why", json_string(f->why));
		json_array_append_new(list, j);
	}
	return list;
}

bool campaign_blamed(const struct campaign *c, const char *name)
{
	for (int i = 0; i < c->n_failures; i++) {
		if (strcmp(c->failure[i].excluded, name) == 0)
			return true;
	}
	return false;
}

int campaign_silent(const struct campaign *c, const char *name, int64_t now_ns)
{
	int i = custodian_index(c, name);
	if (i < 0 || c->state > C_CERTIFIED || c->stalled || now_ns - c->step_ns < KEYGEN_SILENCE_NS)
		return -1;
	bool dealt = view_all_did(c->custodian, c->n, offsetof(struct custodian, deal_seq));
	size_t due = c->state == C_CERTIFIED ? offsetof(struct custodian, rehearsal_seq)
	             : dealt                 ? offsetof(struct custodian, certify_seq)
	                                     : offsetof(struct custodian, deal_seq);
	/* When the deals make no group nobody can certify: that is no silence. */
	if (dealt && !c->has_group)
		return -1;
	return any_did(c->custodian, c->n, due) && !view_all_did(&c->custodian[i], 1, due) ? i : -1;
}

/* ---- the steps ---- */

/* All deals are in: the group follows, as any outsider can compute it. A bad set is for the custodians to report. */
static void derive_group(struct campaign *c)
{
	struct deal *deals = QB_NEW_ARRAY(struct deal, (size_t)c->n);
	struct qb_error ignored = {0};
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < c->n; i++)
		st = deal_parse(&c->context, c->custodian[i].deal, c->custodian[i].deal_n, &deals[i], &ignored);
	if (st == QB_OK)
		st = keygen_group(&c->context, deals, &c->group, &ignored);
	c->has_group = st == QB_OK;
	qb_free(deals);
}

/* Of the attempt that runs, and not after its end. */
static bool runs(const struct campaign *c, const struct wire_entry *en)
{
	return c->state == C_DRAFTED && !c->stalled && (uint64_t)wire_entry_int(en, "attempt") == c->attempt;
}

static void apply_deal(struct campaign *c, int i, const struct wire_entry *en, const struct entry *leaf)
{
	struct custodian *cu = &c->custodian[i];
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	struct qb_error ignored = {0};
	CHECK(base64_decode(wire_entry_text(en, "message"), &b));
	bool good = cu->deal_seq == NO_SEQ && deal_parse(&c->context, b.data, b.len, d, &ignored) == QB_OK &&
	            d->from == (uint32_t)i + 1 && deal_check(&c->context, d, &ignored) == QB_OK;
	qb_free(d);
	if (!good) {
		buf_free(&b);
		return;
	}
	cu->deal = b.data;
	cu->deal_n = b.len;
	cu->deal_seq = cu->commitment_seq = (int64_t)leaf->seq;
	wire_entry_hex(en, "contribution_commitment", cu->contribution_commitment, 64);
	c->step_ns = leaf->received_gps_ns;
	if (view_all_did(c->custodian, c->n, offsetof(struct custodian, deal_seq)))
		derive_group(c);
}

static void apply_certify(struct campaign *c, int i, const struct wire_entry *en, const struct entry *leaf)
{
	struct custodian *cu = &c->custodian[i];
	uint8_t signature[SIGN_BYTES];
	wire_entry_hex(en, "certificate_signature", signature, SIGN_BYTES);
	if (!c->has_group || cu->certify_seq != NO_SEQ ||
	    !keygen_certificate_signed_by(&c->group, c->context.party[i].sign, signature))
		return;
	cu->certify_seq = (int64_t)leaf->seq;
	memcpy(cu->certificate_signature, signature, SIGN_BYTES);
	c->step_ns = leaf->received_gps_ns;
}

void view_keep_founders(struct campaign *c)
{
	uint8_t signatures[CUSTODY_MAX][SIGN_BYTES];
	if (c->founding.certificate.len > 0)
		return;
	for (int i = 0; i < c->n; i++) {
		buf_put(&c->founding.deal[i], c->custodian[i].deal, c->custodian[i].deal_n);
		memcpy(signatures[i], c->custodian[i].certificate_signature, SIGN_BYTES);
	}
	keygen_certificate_encode(&c->group, (const uint8_t(*)[SIGN_BYTES])signatures, &c->founding.certificate);
	c->n_founders = c->n;
}

static void apply_failed(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	/* Only when every deal is good and yet no group follows; whatever else goes wrong has somebody to blame. */
	if (c->has_group || !view_all_did(c->custodian, c->n, offsetof(struct custodian, deal_seq)))
		return;
	view_note_failure(c, ATTEMPT_KEYGEN, c->attempt, "", "nobody is to blame", en);
	next_attempt(c, -1, leaf->received_gps_ns);
}

static void apply_exclusion(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	const char *name = wire_entry_text(en, "name");
	int i = campaign_silent(c, name, leaf->received_gps_ns);
	if (i < 0)
		return;
	view_note_failure(c, ATTEMPT_KEYGEN, c->attempt, name, "was silent", en);
	next_attempt(c, i, leaf->received_gps_ns);
}

static void apply_complaint(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	struct qb_error ignored = {0};
	int guilty;
	if (campaign_judge(c, en, &guilty, &ignored) != QB_OK)
		return;
	const char *name = c->custodian[guilty].party->name;
	view_note_failure(c, ATTEMPT_KEYGEN, c->attempt, name,
	                  strcmp(name, en->by) == 0 ? "made a false complaint" : "dealt a bad share", en);
	next_attempt(c, guilty, leaf->received_gps_ns);
}

static bool apply_keygen(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	const char *type = en->type->type;
	int i = custodian_index(c, en->by);
	if (strcmp(type, "deal") == 0) {
		if (i >= 0 && runs(c, en))
			apply_deal(c, i, en, leaf);
	} else if (strcmp(type, "certify") == 0) {
		if (i >= 0 && runs(c, en))
			apply_certify(c, i, en, leaf);
	} else if (strcmp(type, "keygen-failed") == 0) {
		if (i >= 0 && runs(c, en))
			apply_failed(c, en, leaf);
	} else if (strcmp(type, "complaint") == 0) {
		apply_complaint(c, en, leaf);
	} else if (strcmp(type, "exclusion") == 0) {
		apply_exclusion(c, en, leaf);
	} else if (strcmp(type, "contribution-commitment") == 0) {
		if (i >= 0) {
			c->custodian[i].commitment_seq = (int64_t)leaf->seq;
			wire_entry_hex(en, "contribution_commitment", c->custodian[i].contribution_commitment, 64);
		}
	} else if (strcmp(type, "contribution") == 0) {
		if (i >= 0)
			c->custodian[i].contribution_seq = (int64_t)leaf->seq;
	} else {
		return false;
	}
	return true;
}

bool view_apply_keyholders(const struct view *v, struct campaign *c, const struct wire_entry *en,
                           const struct entry *leaf, const uint8_t leaf_hash[static 32])
{
	return apply_keygen(c, en, leaf) || view_apply_rehearsals(c, en, leaf, leaf_hash) ||
	       view_apply_reshare(v, c, en, leaf, leaf_hash);
}

void view_renew_keyholders(struct view *v)
{
	struct qb_error ignored = {0};
	for (int i = 0; i < v->n_campaigns; i++) {
		struct campaign *c = v->campaign[i];
		if (c->state == C_DRAFTED && !c->stalled &&
		    !any_did(c->custodian, c->n, offsetof(struct custodian, deal_seq)))
			c->stalled = context(c, &ignored) != QB_OK;
	}
}

void view_free_keyholders(struct campaign *c)
{
	for (int i = 0; i < CUSTODY_MAX; i++)
		qb_free(c->custodian[i].deal);
	forget_founders(c);
	qb_free(c->canary);
	qb_free(c->failure);
	qb_free(c->term);
	view_free_reshare(c);
}
