/*
 * Resharing and repair in the projection. Both are side stages: what they gather has no effect on who opens anything
 * until it is whole, and an attempt that ends early leaves everything as it was, under its number.
 */
#include "server/view/reshare.h"

#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/custody/complaint.h"

static struct party_public keys_of(const struct view_party *p)
{
	struct party_public k;
	memcpy(k.sign, p->signing_key, sizeof k.sign);
	memcpy(k.exchange, p->exchange_key, sizeof k.exchange);
	return k;
}

static void reshare_clear(struct reshare_view *r)
{
	for (int i = 0; i < CUSTODY_MAX; i++)
		buf_free(&r->deal[i]);
	buf_free(&r->canary);
	*r = (struct reshare_view){0};
}

static void repair_clear(struct repair_view *r)
{
	for (int i = 0; i < CUSTODY_MAX; i++) {
		buf_free(&r->split[i]);
		buf_free(&r->sum[i]);
	}
	*r = (struct repair_view){0};
}

void view_free_reshare(struct campaign *c)
{
	reshare_clear(&c->reshare);
	repair_clear(&c->repair);
	for (uint64_t i = 0; i + 1 < c->epoch; i++) {
		for (int j = 0; j < CUSTODY_MAX; j++)
			buf_free(&c->later[i].proof.deal[j]);
		buf_free(&c->later[i].proof.certificate);
	}
	qb_free(c->later);
}

int reshare_member(const struct campaign *c, const char *name)
{
	for (int i = 0; c->reshare.under_way && i < c->reshare.n; i++) {
		if (strcmp(c->reshare.member[i].party->name, name) == 0)
			return i;
	}
	return -1;
}

int reshare_dealer(const struct campaign *c, const char *name)
{
	for (int i = 0; c->reshare.under_way && i < c->k; i++) {
		if (strcmp(c->custodian[c->reshare.dealer[i]].party->name, name) == 0)
			return i;
	}
	return -1;
}

int repair_helper(const struct campaign *c, const char *name)
{
	for (int i = 0; c->repair.under_way && i < c->k; i++) {
		if (strcmp(c->custodian[c->repair.helper[i]].party->name, name) == 0)
			return i;
	}
	return -1;
}

bool campaign_former(const struct campaign *c, const char *name)
{
	for (int i = 0; i < c->n_former; i++) {
		if (strcmp(c->former[i]->name, name) == 0)
			return true;
	}
	return false;
}

/* Exactly k different custodians in office, as ascending positions. */
static enum qb_status positions(const struct campaign *c, const json_t *names, const char *what, int out[CUSTODY_MAX],
                                struct qb_error *e)
{
	bool chosen[CUSTODY_MAX] = {false};
	int count = 0;
	size_t i;
	json_t *v;
	json_array_foreach(names, i, v)
	{
		int at = custodian_index(c, json_string_value(v));
		if (at < 0 || chosen[at])
			return qb_fail(e, QB_REFUSED, what, "name custodians in office, each once", "'%.60s' is none",
			               json_string_value(v));
		chosen[at] = true;
	}
	for (int at = 0; at < c->n; at++) {
		if (chosen[at])
			out[count++] = at;
	}
	if (count != c->k)
		return qb_fail(e, QB_REFUSED, what, NULL, "%d names are given, %d are needed", count, c->k);
	return QB_OK;
}

enum qb_status reshare_prepare(const struct view *v, const struct campaign *c, const struct wire_entry *en,
                               struct reshare_view *out, struct qb_error *e)
{
	const json_t *names = wire_entry_json(en, "names");
	struct party_public from[CUSTODY_MAX], to[CUSTODY_MAX];
	uint32_t dealer[CUSTODY_MAX];
	size_t i;
	json_t *name;
	*out = (struct reshare_view){.under_way = true, .canary_seq = NO_SEQ};
	if (c->state != C_SEALED && c->state != C_CLOSED)
		return qb_fail(e, QB_CONFLICT, "reshare", "reshare a sealed campaign that is not opened yet",
		               "the campaign is %s", campaign_word(c));
	if (c->reshare.under_way || c->repair.under_way || campaign_full_opening(c))
		return qb_fail(e, QB_CONFLICT, "reshare", "wait until it is done, or end it", "%s is under way",
		               c->reshare.under_way  ? "another resharing"
		               : c->repair.under_way ? "a repair"
		                                     : "the full opening");
	if (json_array_size(names) > CUSTODY_MAX)
		return qb_fail(e, QB_RANGE, "reshare: names", NULL, "holds more than %d names", CUSTODY_MAX);
	out->n = (int)json_array_size(names);
	out->k = (int)wire_entry_int(en, "needed");
	json_array_foreach(names, i, name)
	{
		const char *who = json_string_value(name);
		const struct view_party *p = view_party_named(v, who);
		enum qb_status st = view_eligible(v, c, who, DUTY_CUSTODIAN, e);
		if (st != QB_OK)
			return st;
		if (p->role != ROLE_CUSTODIAN)
			return qb_fail(e, QB_REFUSED, "reshare: names", "invite the person as custodian",
			               "'%s' is enrolled as %s", who, wire_role_word(p->role));
		for (size_t j = 0; j < i; j++) {
			if (out->member[j].party == p)
				return qb_fail(e, QB_REFUSED, "reshare: names", NULL, "'%s' is named twice", who);
		}
		out->member[i] = (struct custodian){.party = p,
		                                    .deal_seq = NO_SEQ,
		                                    .certify_seq = NO_SEQ,
		                                    .rehearsal_seq = NO_SEQ,
		                                    .commitment_seq = NO_SEQ,
		                                    .contribution_seq = NO_SEQ};
		to[i] = keys_of(p);
	}
	enum qb_status st = positions(c, wire_entry_json(en, "dealers"), "reshare: dealers", out->dealer, e);
	for (int j = 0; st == QB_OK && j < c->k; j++) {
		dealer[j] = (uint32_t)out->dealer[j] + 1;
		from[j] = keys_of(c->custodian[out->dealer[j]].party);
	}
	return st == QB_OK ? reshare_context_init(&out->context, &c->group, c->reshare_attempt, dealer, from,
	                                          (uint32_t)out->n, (uint32_t)out->k, to, e)
	                   : st;
}

enum qb_status repair_prepare(const struct campaign *c, const struct wire_entry *en, struct repair_view *out,
                              struct qb_error *e)
{
	struct party_public helpers[CUSTODY_MAX], receiver;
	uint32_t index[CUSTODY_MAX];
	*out = (struct repair_view){.under_way = true, .attempt = c->repair_attempt};
	out->lost = custodian_index(c, en->by);
	if (out->lost < 0 || c->state < C_CERTIFIED || c->state > C_CLOSED || c->repair.under_way ||
	    c->reshare.under_way)
		return qb_fail(e, QB_CONFLICT, "repair", "wait until what is under way is done",
		               "a share can't be repaired now");
	enum qb_status st = positions(c, wire_entry_json(en, "helpers"), "repair: helpers", out->helper, e);
	for (int i = 0; st == QB_OK && i < c->k; i++) {
		index[i] = (uint32_t)out->helper[i] + 1;
		helpers[i] = keys_of(c->custodian[out->helper[i]].party);
	}
	receiver = keys_of(c->custodian[out->lost].party);
	return st == QB_OK ? repair_context_init(&out->context, &c->group, out->attempt, (uint32_t)out->lost + 1,
	                                         &receiver, index, helpers, e)
	                   : st;
}

enum qb_status reshare_deals(const struct campaign *c, struct deal *out, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < c->k; i++)
		st = reshare_parse(&c->reshare.context, c->reshare.deal[i].data, c->reshare.deal[i].len, &out[i], e);
	return st;
}

enum qb_status reshare_judge(const struct campaign *c, const struct wire_entry *en, const char **guilty,
                             struct qb_error *e)
{
	struct deal *d = QB_NEW(struct deal);
	struct buf b = {0};
	enum complaint_verdict verdict = COMPLAINT_FALSE;
	const char *accused = wire_entry_text(en, "accused");
	int by = reshare_member(c, en->by), dealer = reshare_dealer(c, accused);
	struct dealing g = reshare_dealing(&c->reshare.context);
	enum qb_status st = QB_OK;
	if (!c->reshare.under_way || (uint64_t)wire_entry_int(en, "attempt") != c->reshare_attempt || by < 0 ||
	    dealer < 0 || c->reshare.deal[dealer].len == 0)
		st = qb_fail(e, QB_CONFLICT, "complaint", "follow the ledger",
		             "it is about no deal of the attempt that runs");
	if (st == QB_OK && !base64_decode(wire_entry_text(en, "complaint"), &b))
		st = qb_fail(e, QB_FORMAT, "complaint", NULL, "is not base64");
	if (st == QB_OK && (b.len < 12 || b.data[4] != c->reshare.dealer[dealer] + 1 || b.data[8] != by + 1))
		st = qb_fail(e, QB_CRYPTO, "complaint", NULL, "names other custodians than its entry");
	if (st == QB_OK)
		st =
		    reshare_parse(&c->reshare.context, c->reshare.deal[dealer].data, c->reshare.deal[dealer].len, d, e);
	if (st == QB_OK)
		st = complaint_dealing_judge(&g, d, b.data, b.len, &verdict, e);
	*guilty = verdict == COMPLAINT_SENDER_GUILTY ? accused : en->by;
	buf_free(&b);
	qb_free(d);
	return st;
}

static void apply_deal(struct campaign *c, const struct wire_entry *en)
{
	struct reshare_view *r = &c->reshare;
	int place = reshare_dealer(c, en->by);
	struct qb_error ignored = {0};
	if (place < 0 || (uint64_t)wire_entry_int(en, "attempt") != c->reshare_attempt || r->deal[place].len > 0)
		return;
	CHECK(base64_decode(wire_entry_text(en, "message"), &r->deal[place]));
	for (int i = 0; i < c->k; i++) {
		if (r->deal[i].len == 0)
			return;
	}
	struct deal *deals = QB_NEW_ARRAY(struct deal, (size_t)c->k);
	r->has_group = reshare_deals(c, deals, &ignored) == QB_OK &&
	               reshare_group(&r->context, deals, &r->group, &ignored) == QB_OK;
	qb_free(deals);
}

static void end_attempt(struct campaign *c)
{
	if (!c->reshare.under_way)
		return;
	reshare_clear(&c->reshare);
	c->reshare_attempt++;
}

/* The new set takes office. */
static void take_office(struct campaign *c, const struct entry *leaf)
{
	struct reshare_view *r = &c->reshare;
	uint8_t signatures[CUSTODY_MAX][SIGN_BYTES];
	c->later = qb_realloc(c->later, (size_t)c->epoch, sizeof *c->later);
	struct epoch_proof *p = &c->later[c->epoch - 1];
	*p = (struct epoch_proof){.context = r->context, .seq = (int64_t)leaf->seq};
	for (int i = 0; i < c->k; i++) {
		p->proof.deal[i] = r->deal[i];
		r->deal[i] = (struct buf){0};
	}
	for (int i = 0; i < r->n; i++)
		memcpy(signatures[i], r->member[i].certificate_signature, SIGN_BYTES);
	keygen_certificate_encode(&r->group, (const uint8_t(*)[SIGN_BYTES])signatures, &p->proof.certificate);
	c->n_former = 0;
	if (c->epoch == 1)
		memcpy(c->founder, c->custodian, sizeof c->founder);
	for (int i = 0; i < c->n; i++) {
		c->founder[i].deal = c->epoch == 1 ? NULL : c->founder[i].deal;
		qb_free(c->custodian[i].deal);
		if (reshare_member(c, c->custodian[i].party->name) < 0)
			c->former[c->n_former++] = c->custodian[i].party;
	}
	memcpy(c->custodian, r->member, sizeof c->custodian);
	c->n = r->n;
	c->k = r->k;
	c->group = r->group;
	c->epoch++;
	qb_free(c->canary);
	c->canary = r->canary.data;
	c->canary_n = r->canary.len;
	r->canary = (struct buf){0};
	c->canary_seq = r->canary_seq;
	c->canary_index = r->canary_index;
	c->canary_ns = leaf->received_gps_ns;
	memcpy(c->canary_leaf, r->canary_leaf, 32);
	end_attempt(c);
}

static void erased(struct campaign *c, const char *name)
{
	for (int i = 0; i < c->n_former; i++) {
		if (strcmp(c->former[i]->name, name) == 0)
			c->former[i] = c->former[--c->n_former];
	}
}

static void apply_member(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	int i = reshare_member(c, en->by);
	if (i < 0 || (uint64_t)wire_entry_int(en, "attempt") != c->reshare_attempt)
		return;
	if (strcmp(en->type->type, "reshare-certify") == 0) {
		c->reshare.member[i].certify_seq = (int64_t)leaf->seq;
		wire_entry_hex(en, "certificate_signature", c->reshare.member[i].certificate_signature, 64);
	} else {
		c->reshare.member[i].rehearsal_seq = (int64_t)leaf->seq;
	}
}

static void apply_repair_message(struct campaign *c, const struct wire_entry *en, struct buf *list)
{
	int i = repair_helper(c, en->by);
	if (i >= 0 && (uint64_t)wire_entry_int(en, "attempt") == c->repair_attempt && list[i].len == 0)
		CHECK(base64_decode(wire_entry_text(en, "message"), &list[i]));
}

static void end_repair(struct campaign *c)
{
	if (!c->repair.under_way)
		return;
	repair_clear(&c->repair);
	c->repair_attempt++;
}

bool view_apply_reshare(const struct view *v, struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                        const uint8_t leaf_hash[static 32])
{
	const char *type = en->type->type, *guilty;
	struct qb_error ignored = {0};
	if (strcmp(type, "reshare-request") == 0) {
		struct reshare_view *r = QB_NEW(struct reshare_view);
		if (reshare_prepare(v, c, en, r, &ignored) == QB_OK) {
			r->request_seq = (int64_t)leaf->seq;
			c->reshare = *r;
		}
		qb_free(r);
	} else if (strcmp(type, "reshare-deal") == 0) {
		apply_deal(c, en);
	} else if (strcmp(type, "reshare-complaint") == 0) {
		if (reshare_judge(c, en, &guilty, &ignored) == QB_OK)
			end_attempt(c);
	} else if (strcmp(type, "reshare-failed") == 0 || strcmp(type, "opening-request") == 0) {
		end_attempt(c);
		return strcmp(type, "reshare-failed") == 0;
	} else if (strcmp(type, "reshare-certify") == 0 || strcmp(type, "reshare-rehearsal") == 0) {
		apply_member(c, en, leaf);
	} else if (strcmp(type, "reshare-canary") == 0) {
		buf_free(&c->reshare.canary);
		CHECK(base64_decode(wire_entry_text(en, "record"), &c->reshare.canary));
		c->reshare.canary_seq = (int64_t)leaf->seq;
		c->reshare.canary_index = campaign_next_canary(c);
		c->n_canaries++;
		memcpy(c->reshare.canary_leaf, leaf_hash, 32);
	} else if (strcmp(type, "reshared") == 0) {
		if (c->reshare.under_way && c->reshare.has_group)
			take_office(c, leaf);
	} else if (strcmp(type, "share-erased") == 0) {
		erased(c, en->by);
	} else if (strcmp(type, "repair-request") == 0) {
		struct repair_view *r = QB_NEW(struct repair_view);
		if (repair_prepare(c, en, r, &ignored) == QB_OK)
			c->repair = *r;
		qb_free(r);
	} else if (strcmp(type, "repair-split") == 0) {
		apply_repair_message(c, en, c->repair.split);
	} else if (strcmp(type, "repair-sum") == 0) {
		apply_repair_message(c, en, c->repair.sum);
	} else if (strcmp(type, "repair-failed") == 0 || strcmp(type, "repaired") == 0) {
		end_repair(c);
	} else {
		return false;
	}
	return true;
}
