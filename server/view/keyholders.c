/*
 * Key generation in the projection: deals, complaints that anybody can judge again, exclusions, certificates, canaries
 * and rehearsals. Resharing and repair are in reshare.c.
 */
#include "server/view/keyholders.h"

#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/custody/complaint.h"
#include "server/view/reshare.h"

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
	c->attempt_since_ns = now_ns;
	for (int i = 0; i < c->n; i++) {
		c->custodian[i].party = view_party_named(v, plan_person(c->plan, DUTY_CUSTODIAN, i)->name);
		restart(&c->custodian[i]);
		if (c->custodian[i].party == NULL)
			return qb_fail(e, QB_REFUSED, "plan: parties", "enrol first", "custodian %d is not enrolled",
			               i + 1);
	}
	return context(c, e);
}

/* ---- an attempt that ends without a key ---- */

static void note_failure(struct campaign *c, const char *excluded, const char *why, const char *how)
{
	c->failure = qb_realloc(c->failure, (size_t)c->n_failures + 1, sizeof *c->failure);
	struct keygen_failure *f = &c->failure[c->n_failures++];
	*f = (struct keygen_failure){.attempt = c->attempt};
	(void)snprintf(f->excluded, sizeof f->excluded, "%s", excluded);
	(void)snprintf(f->how, sizeof f->how, "%s", how);
	(void)snprintf(f->why, sizeof f->why, "%.299s", why);
}

/* The next attempt, without the person at `out` (from 0), or with everybody when out is -1. */
static void next_attempt(struct campaign *c, int out, int64_t now_ns)
{
	struct qb_error ignored = {0};
	for (int i = 0; i < c->n; i++)
		restart(&c->custodian[i]);
	for (int i = out; out >= 0 && i + 1 < c->n; i++)
		c->custodian[i] = c->custodian[i + 1];
	c->n -= out >= 0;
	c->attempt++;
	c->attempt_since_ns = now_ns;
	c->has_group = false;
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

int campaign_silent(const struct campaign *c, const char *name, int64_t now_ns)
{
	int i = custodian_index(c, name);
	bool others = true;
	if (i < 0 || c->state != C_DRAFTED || c->stalled || now_ns - c->attempt_since_ns < KEYGEN_SILENCE_NS)
		return -1;
	const struct custodian *cu = &c->custodian[i];
	for (int j = 0; j < c->n; j++)
		others = others && (j == i || c->custodian[j].deal_seq != NO_SEQ);
	bool silent = cu->deal_seq == NO_SEQ || (c->has_group && cu->certify_seq == NO_SEQ);
	return silent && others ? i : -1;
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

static void apply_deal(struct campaign *c, int i, const struct wire_entry *en, const struct entry *leaf)
{
	struct custodian *cu = &c->custodian[i];
	struct buf b = {0};
	CHECK(base64_decode(wire_entry_text(en, "message"), &b));
	qb_free(cu->deal);
	cu->deal = b.data;
	cu->deal_n = b.len;
	cu->deal_seq = cu->commitment_seq = (int64_t)leaf->seq;
	wire_entry_hex(en, "contribution_commitment", cu->contribution_commitment, 64);
	for (int j = 0; j < c->n; j++) {
		if (c->custodian[j].deal_seq == NO_SEQ)
			return;
	}
	derive_group(c);
}

/* What proves the first group for ever: deals and certificate, also when other people hold the shares later. */
static void keep_founders(struct campaign *c)
{
	uint8_t signatures[CUSTODY_MAX][SIGN_BYTES];
	struct buf certificate = {0};
	if (c->founding.certificate.len > 0)
		return;
	for (int i = 0; i < c->n; i++) {
		buf_put(&c->founding.deal[i], c->custodian[i].deal, c->custodian[i].deal_n);
		memcpy(signatures[i], c->custodian[i].certificate_signature, SIGN_BYTES);
	}
	keygen_certificate_encode(&c->group, (const uint8_t(*)[SIGN_BYTES])signatures, &certificate);
	c->founding.certificate = certificate;
	c->n_founders = c->n;
}

/* Who did not open the canary before this one, and how often in a row. */
static void count_misses(struct campaign *c)
{
	for (int i = 0; i < c->n; i++) {
		struct custodian *cu = &c->custodian[i];
		cu->missed = cu->rehearsal_seq == NO_SEQ ? cu->missed + 1 : 0;
		cu->rehearsal_seq = NO_SEQ;
	}
}

static void apply_canary(struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                         const uint8_t leaf_hash[static 32])
{
	struct buf b = {0};
	CHECK(base64_decode(wire_entry_text(en, "record"), &b));
	if (c->state == C_DRAFTED) {
		c->state = C_CERTIFIED;
		keep_founders(c);
	} else if (c->canary_seq != NO_SEQ) {
		count_misses(c);
	}
	qb_free(c->canary);
	c->canary = b.data;
	c->canary_n = b.len;
	c->canary_seq = (int64_t)leaf->seq;
	c->canary_ns = leaf->received_gps_ns;
	c->canary_index = campaign_next_canary(c);
	c->n_canaries++;
	memcpy(c->canary_leaf, leaf_hash, 32);
}

static bool apply_keygen(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	const char *type = en->type->type;
	struct qb_error ignored = {0};
	int i = custodian_index(c, en->by), guilty;
	if (strcmp(type, "deal") == 0) {
		if (i >= 0)
			apply_deal(c, i, en, leaf);
	} else if (strcmp(type, "keygen-failed") == 0) {
		note_failure(c, "", en->why, "nobody is to blame");
		next_attempt(c, -1, leaf->received_gps_ns);
	} else if (strcmp(type, "complaint") == 0) {
		if (campaign_judge(c, en, &guilty, &ignored) == QB_OK) {
			note_failure(c, c->custodian[guilty].party->name, en->why,
			             guilty == i ? "made a false complaint" : "dealt a bad share");
			next_attempt(c, guilty, leaf->received_gps_ns);
		}
	} else if (strcmp(type, "exclusion") == 0) {
		if ((guilty = campaign_silent(c, wire_entry_text(en, "name"), leaf->received_gps_ns)) >= 0) {
			note_failure(c, wire_entry_text(en, "name"), en->why, "was silent");
			next_attempt(c, guilty, leaf->received_gps_ns);
		}
	} else if (strcmp(type, "certify") == 0) {
		if (i >= 0) {
			c->custodian[i].certify_seq = (int64_t)leaf->seq;
			wire_entry_hex(en, "certificate_signature", c->custodian[i].certificate_signature, 64);
		}
	} else {
		return false;
	}
	return true;
}

bool view_apply_keyholders(const struct view *v, struct campaign *c, const struct wire_entry *en,
                           const struct entry *leaf, const uint8_t leaf_hash[static 32])
{
	const char *type = en->type->type;
	int i = custodian_index(c, en->by);
	if (apply_keygen(c, en, leaf) || view_apply_reshare(v, c, en, leaf, leaf_hash))
		return true;
	if (strcmp(type, "canary") == 0) {
		apply_canary(c, en, leaf, leaf_hash);
	} else if (strcmp(type, "rehearsal-request") == 0) {
		; /* the canary that follows it says all */
	} else if (strcmp(type, "rehearsal") == 0) {
		if (i >= 0) {
			c->custodian[i].rehearsal_seq = (int64_t)leaf->seq;
			c->custodian[i].missed = 0;
		}
	} else if (strcmp(type, "rehearsed") == 0) {
		if (c->state == C_CERTIFIED)
			c->state = C_REHEARSED;
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

void view_free_keyholders(struct campaign *c)
{
	for (int i = 0; i < CUSTODY_MAX; i++) {
		qb_free(c->custodian[i].deal);
		buf_free(&c->founding.deal[i]);
	}
	buf_free(&c->founding.certificate);
	qb_free(c->canary);
	qb_free(c->failure);
	view_free_reshare(c);
}
