/*
 * People in the projection. A party keeps its name and its former keys for ever: what a key signed in its time stays
 * valid, and from its replacement on it counts for nothing. Keys that replace lost ones wait until two colleagues have
 * compared the fingerprint with the person, since whoever hands out invitations could otherwise become anybody.
 */
#include "server/view/people.h"

#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

const struct view_party *view_party_by_id(const struct view *v, const uint8_t key_id[static 16])
{
	for (int i = 0; i < v->n_parties; i++) {
		const struct view_party *p = v->party[i];
		if (memcmp(p->key_id, key_id, 16) == 0)
			return p;
		for (int k = 0; k < p->n_past; k++) {
			if (memcmp(p->past[k].key_id, key_id, 16) == 0)
				return p;
		}
	}
	return NULL;
}

const struct view_party *view_party_acting(const struct view *v, const uint8_t key_id[static 16])
{
	const struct view_party *p = view_party_by_id(v, key_id);
	return p != NULL && !p->retired && memcmp(p->key_id, key_id, 16) == 0 ? p : NULL;
}

const uint8_t *view_signing_key(const struct view *v, const uint8_t key_id[static 16])
{
	const struct view_party *p = view_party_by_id(v, key_id);
	if (p == NULL || memcmp(p->key_id, key_id, 16) == 0)
		return p != NULL ? p->signing_key : NULL;
	for (int k = 0; k < p->n_past; k++) {
		if (memcmp(p->past[k].key_id, key_id, 16) == 0)
			return p->past[k].signing_key;
	}
	return NULL;
}

bool view_one_person(const struct view_party *a, const struct view_party *b)
{
	return strcmp(a->person, b->person) == 0;
}

enum qb_status view_eligible(const struct view *v, const struct campaign *c, const char *name, enum plan_duty duty,
                             struct qb_error *e)
{
	const struct view_party *p = view_party_named(v, name);
	if (p == NULL || p->retired)
		return qb_fail(e, QB_REFUSED, name, "invite and enrol the person first", "%s",
		               p == NULL ? "is not enrolled" : "is retired");
	for (int i = 0; i < c->plan->n_people; i++) {
		const struct plan_person *other = &c->plan->person[i];
		const struct view_party *q = view_party_named(v, other->name);
		if (q != NULL && view_one_person(p, q) && other->duty != duty)
			return qb_fail(e, QB_REFUSED, name, "one person, one side: take somebody else",
			               "is %s '%s' of this campaign", plan_duty_word(other->duty), other->name);
	}
	return QB_OK;
}

void view_rotation_statement(const uint8_t old_id[static 16], const struct party_public *fresh, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/party/rotation");
	transcript_field(&t, old_id, 16);
	transcript_field(&t, fresh->sign, sizeof fresh->sign);
	transcript_field(&t, fresh->exchange, sizeof fresh->exchange);
	transcript_end(&t, out);
}

bool view_keys_in_use(const struct view *v, const struct view_party *p)
{
	for (int i = 0; i < v->n_campaigns; i++) {
		const struct campaign *c = v->campaign[i];
		/* what is dealt is dealt under everybody's keys */
		bool dealt = false;
		for (int j = 0; j < c->n; j++)
			dealt = dealt || c->custodian[j].deal_seq != NO_SEQ;
		if (!campaign_over(c) && c->state < C_REHEARSED && !c->stalled && dealt &&
		    custodian_index(c, p->name) >= 0)
			return true;
		if (reshare_member(c, p->name) >= 0 || reshare_dealer(c, p->name) >= 0 ||
		    repair_helper(c, p->name) >= 0 ||
		    (c->repair.under_way && custodian_index(c, p->name) == c->repair.lost))
			return true;
	}
	return false;
}

static struct view_party *party_named(struct view *v, const char *name)
{
	for (int i = 0; i < v->n_parties; i++) {
		if (strcmp(v->party[i]->name, name) == 0)
			return v->party[i];
	}
	return NULL;
}

static struct view_key key_of(const struct wire_entry *en, const struct entry *leaf)
{
	struct view_key k = {.seq = (int64_t)leaf->seq};
	wire_entry_hex(en, "signing_key", k.signing_key, 32);
	wire_entry_hex(en, "exchange_key", k.exchange_key, 32);
	sign_key_id(k.signing_key, k.key_id);
	return k;
}

static void take_key(struct view_party *p, const struct view_key *k, int64_t seq)
{
	if (p->n_past == VIEW_KEYS_MAX)
		return; /* the service refuses it before it comes to this */
	struct view_key *old = &p->past[p->n_past++];
	memcpy(old->key_id, p->key_id, 16);
	memcpy(old->signing_key, p->signing_key, 32);
	memcpy(old->exchange_key, p->exchange_key, 32);
	old->seq = p->key_seq;
	memcpy(p->key_id, k->key_id, 16);
	memcpy(p->signing_key, k->signing_key, 32);
	memcpy(p->exchange_key, k->exchange_key, 32);
	p->key_seq = seq;
	p->retired = p->has_pending = false;
	p->n_vouchers = 0;
}

static void apply_enrolment(struct view *v, const struct wire_entry *en, const struct entry *leaf)
{
	struct view_key k = key_of(en, leaf);
	struct view_party *p = party_named(v, wire_entry_text(en, "name"));
	if (p != NULL) {
		p->has_pending = true;
		p->pending = k;
		p->n_vouchers = 0;
		return;
	}
	p = QB_NEW(struct view_party);
	(void)snprintf(p->name, sizeof p->name, "%s", wire_entry_text(en, "name"));
	(void)snprintf(p->person, sizeof p->person, "%s", p->name);
	CHECK(wire_role_parse(wire_entry_text(en, "role"), &p->role));
	memcpy(p->key_id, k.key_id, 16);
	memcpy(p->signing_key, k.signing_key, 32);
	memcpy(p->exchange_key, k.exchange_key, 32);
	p->seq = p->key_seq = k.seq;
	p->retired_seq = NO_SEQ;
	v->party = qb_realloc(v->party, (size_t)v->n_parties + 1, sizeof *v->party);
	v->party[v->n_parties++] = p;
}

enum qb_status view_may_vouch(const struct view *v, const char *by_name, const char *name, struct qb_error *e)
{
	const struct view_party *p = view_party_named(v, name), *by = view_party_named(v, by_name);
	if (p == NULL || by == NULL || !p->has_pending)
		return qb_fail(e, QB_CONFLICT, name, "see quietbell party list",
		               "has no new keys that wait for vouches");
	if (view_one_person(p, by))
		return qb_fail(e, QB_REFUSED, name, "let a colleague do it", "nobody vouches for their own keys");
	for (int i = 0; i < p->n_vouchers; i++) {
		if (view_one_person(view_party_named(v, p->voucher[i]), by))
			return qb_fail(e, QB_CONFLICT, name, "let another colleague do it",
			               "the same person vouched already");
	}
	/* Somebody who knows the person from the campaign, and not a name made up for the purpose. */
	for (int i = 0; i < v->n_campaigns; i++) {
		const struct campaign *c = v->campaign[i];
		if (!campaign_over(c) && campaign_role(c, p) != ROLE_NONE && campaign_role(c, by) == ROLE_NONE)
			return qb_fail(e, QB_REFUSED, name, "let somebody with a part in it vouch",
			               "%s has no part in campaign '%s' of this party", by_name, c->name);
	}
	return QB_OK;
}

static void apply_vouch(struct view *v, const struct wire_entry *en, const struct entry *leaf)
{
	struct view_party *p = party_named(v, wire_entry_text(en, "name"));
	struct view_key k = key_of(en, leaf);
	struct qb_error ignored = {0};
	if (p == NULL || view_may_vouch(v, en->by, p->name, &ignored) != QB_OK || p->n_vouchers == VIEW_VOUCHES_MAX ||
	    memcmp(k.signing_key, p->pending.signing_key, 32) != 0 ||
	    memcmp(k.exchange_key, p->pending.exchange_key, 32) != 0)
		return;
	(void)snprintf(p->voucher[p->n_vouchers++], sizeof p->voucher[0], "%s", en->by);
	if (p->n_vouchers >= VIEW_VOUCHES) {
		struct view_key fresh = p->pending;
		take_key(p, &fresh, (int64_t)leaf->seq);
	}
}

bool view_apply_people(struct view *v, const struct wire_entry *en, const struct entry *leaf)
{
	const char *type = en->type->type;
	struct view_party *p;
	if (strcmp(type, "enrolment") == 0) {
		apply_enrolment(v, en, leaf);
	} else if (strcmp(type, "vouch") == 0) {
		apply_vouch(v, en, leaf);
	} else if (strcmp(type, "key-rotation") == 0) {
		struct view_key k = key_of(en, leaf);
		if ((p = party_named(v, en->by)) != NULL)
			take_key(p, &k, k.seq);
	} else if (strcmp(type, "retirement") == 0) {
		if ((p = party_named(v, wire_entry_text(en, "name"))) != NULL) {
			p->retired = true;
			p->retired_seq = (int64_t)leaf->seq;
		}
	} else if (strcmp(type, "same-person") == 0) {
		if ((p = party_named(v, wire_entry_text(en, "name"))) != NULL)
			(void)snprintf(p->person, sizeof p->person, "%s", wire_entry_text(en, "person"));
	} else {
		return false;
	}
	return true;
}
