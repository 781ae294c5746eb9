/*
 * Resharing and repair in the projection. Both are side stages: what they gather has no effect on who opens anything
 * until it is whole, and an attempt that ends early leaves everything as it was, under its number.
 */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/custody/complaint.h"
#include "server/view/keyholders.h"

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
	qb_free(c->owed);
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

const struct erasure_owed *campaign_owes(const struct campaign *c, const char *name)
{
	for (int i = 0; i < c->n_owed; i++) {
		if (strcmp(c->owed[i].party->name, name) == 0)
			return &c->owed[i];
	}
	return NULL;
}

static void owe(struct campaign *c, const struct view_party *p, uint64_t epoch, uint64_t seq)
{
	for (int i = 0; i < c->n_owed; i++) {
		if (c->owed[i].party == p && c->owed[i].epoch == epoch) {
			c->owed[i].seq = (int64_t)seq;
			return;
		}
	}
	c->owed = qb_realloc(c->owed, (size_t)c->n_owed + 1, sizeof *c->owed);
	c->owed[c->n_owed++] = (struct erasure_owed){p, epoch, (int64_t)seq};
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
		if (campaign_blamed(c, json_string_value(v)))
			return qb_fail(e, QB_REFUSED, what, "take somebody else",
			               "'%.60s' cheated in an attempt before", json_string_value(v));
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
		if (campaign_blamed(c, who))
			return qb_fail(e, QB_REFUSED, "reshare: names", "take somebody else",
			               "'%s' was left out of this campaign", who);
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

/* Of the attempt that runs. */
static bool runs(const struct campaign *c, const struct wire_entry *en)
{
	return c->reshare.under_way && (uint64_t)wire_entry_int(en, "attempt") == c->reshare_attempt;
}

static void apply_deal(struct campaign *c, const struct wire_entry *en)
{
	struct reshare_view *r = &c->reshare;
	int place = reshare_dealer(c, en->by);
	struct deal *d = QB_NEW(struct deal), *deals;
	struct qb_error ignored = {0};
	struct buf b = {0};
	CHECK(base64_decode(wire_entry_text(en, "message"), &b));
	bool good = place >= 0 && r->deal[place].len == 0 &&
	            reshare_parse(&r->context, b.data, b.len, d, &ignored) == QB_OK &&
	            d->from == (uint32_t)r->dealer[place] + 1 && reshare_check(&r->context, d, &ignored) == QB_OK;
	qb_free(d);
	if (!good) {
		buf_free(&b);
		return;
	}
	r->deal[place] = b;
	for (int i = 0; i < c->k; i++) {
		if (r->deal[i].len == 0)
			return;
	}
	deals = QB_NEW_ARRAY(struct deal, (size_t)c->k);
	r->has_group = reshare_deals(c, deals, &ignored) == QB_OK &&
	               reshare_group(&r->context, deals, &r->group, &ignored) == QB_OK;
	qb_free(deals);
}

/* The attempt is over and changes nothing. When all had dealt, the new set holds shares that work, and must erase them.
 */
static void end_attempt(struct campaign *c, const char *guilty, const char *how, const struct wire_entry *en,
                        const struct entry *leaf)
{
	struct reshare_view *r = &c->reshare;
	if (!r->under_way)
		return;
	view_note_failure(c, ATTEMPT_RESHARING, c->reshare_attempt, guilty, how, en);
	for (int i = 0; r->has_group && i < r->n; i++)
		owe(c, r->member[i].party, 0, leaf->seq);
	reshare_clear(r);
	c->reshare_attempt++;
}

static void apply_complaint(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	struct qb_error ignored = {0};
	const char *guilty;
	if (reshare_judge(c, en, &guilty, &ignored) == QB_OK)
		end_attempt(c, guilty, strcmp(guilty, en->by) == 0 ? "made a false complaint" : "dealt a bad share", en,
		            leaf);
}

static void keep_proof(struct campaign *c, const struct entry *leaf)
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
}

/* Who leaves, who comes, and who has to erase the share that counts no more. */
static void change_terms(struct campaign *c, const struct entry *leaf)
{
	const struct reshare_view *r = &c->reshare;
	for (int i = 0; i < c->n; i++) {
		const struct view_party *p = c->custodian[i].party;
		owe(c, p, c->epoch, leaf->seq);
		if (reshare_member(c, p->name) < 0)
			view_end_term(c, p, leaf->received_gps_ns);
	}
	for (int i = 0; i < r->n; i++) {
		if (custodian_index(c, r->member[i].party->name) < 0)
			view_begin_term(c, r->member[i].party, leaf->received_gps_ns);
	}
}

/* The new set takes office. */
static void take_office(struct campaign *c, const struct entry *leaf)
{
	struct reshare_view *r = &c->reshare;
	keep_proof(c, leaf);
	change_terms(c, leaf);
	if (c->epoch == 1)
		memcpy(c->founder, c->custodian, sizeof c->founder);
	for (int i = 0; i < c->n; i++) {
		c->founder[i].deal = c->epoch == 1 ? NULL : c->founder[i].deal;
		qb_free(c->custodian[i].deal);
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
	c->canary_ns = r->canary_ns;
	memcpy(c->canary_leaf, r->canary_leaf, 32);
	for (int i = 0; i < c->n; i++)
		c->custodian[i].opened_ns = c->canary_ns;
	reshare_clear(r);
	c->reshare_attempt++;
}

static void apply_erased(struct campaign *c, const struct wire_entry *en)
{
	for (int i = c->n_owed - 1; i >= 0; i--) {
		if (strcmp(c->owed[i].party->name, en->by) == 0 &&
		    c->owed[i].epoch == (uint64_t)wire_entry_int(en, "epoch"))
			c->owed[i] = c->owed[--c->n_owed];
	}
}

static void apply_certify(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	struct reshare_view *r = &c->reshare;
	int i = reshare_member(c, en->by);
	uint8_t signature[SIGN_BYTES];
	wire_entry_hex(en, "certificate_signature", signature, SIGN_BYTES);
	if (i < 0 || !r->has_group || r->member[i].certify_seq != NO_SEQ ||
	    !keygen_certificate_signed_by(&r->group, r->context.party[i].sign, signature))
		return;
	r->member[i].certify_seq = (int64_t)leaf->seq;
	memcpy(r->member[i].certificate_signature, signature, SIGN_BYTES);
}

static void apply_canary(struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                         const uint8_t leaf_hash[static 32])
{
	struct reshare_view *r = &c->reshare;
	if (r->canary_seq != NO_SEQ || !view_all_did(r->member, r->n, offsetof(struct custodian, certify_seq)))
		return;
	CHECK(base64_decode(wire_entry_text(en, "record"), &r->canary));
	r->canary_seq = (int64_t)leaf->seq;
	r->canary_ns = leaf->received_gps_ns;
	r->canary_index = campaign_next_canary(c);
	c->n_canaries++;
	memcpy(r->canary_leaf, leaf_hash, 32);
}

static void apply_rehearsal(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	struct reshare_view *r = &c->reshare;
	int i = reshare_member(c, en->by);
	if (i >= 0 && r->canary_seq != NO_SEQ && r->member[i].rehearsal_seq == NO_SEQ &&
	    view_rehearsal_holds(&r->group, r->canary.data, r->canary.len, r->canary_leaf, en, (uint32_t)i + 1))
		r->member[i].rehearsal_seq = (int64_t)leaf->seq;
}

static void apply_repair_message(struct campaign *c, const struct wire_entry *en, struct buf *list)
{
	int i = repair_helper(c, en->by);
	if (i >= 0 && (uint64_t)wire_entry_int(en, "attempt") == c->repair_attempt && list[i].len == 0)
		CHECK(base64_decode(wire_entry_text(en, "message"), &list[i]));
}

static void apply_repair_end(struct campaign *c, const struct wire_entry *en, bool done)
{
	int by = custodian_index(c, en->by);
	if (!c->repair.under_way || (uint64_t)wire_entry_int(en, "attempt") != c->repair_attempt || by < 0 ||
	    (done && by != c->repair.lost))
		return;
	if (!done)
		view_note_failure(c, ATTEMPT_REPAIR, c->repair_attempt, "", "nobody is to blame", en);
	repair_clear(&c->repair);
	c->repair_attempt++;
}

static void apply_request(const struct view *v, struct campaign *c, const struct wire_entry *en,
                          const struct entry *leaf)
{
	struct qb_error ignored = {0};
	if (strcmp(en->type->type, "repair-request") == 0) {
		struct repair_view *r = QB_NEW(struct repair_view);
		if (repair_prepare(c, en, r, &ignored) == QB_OK)
			c->repair = *r;
		qb_free(r);
		return;
	}
	struct reshare_view *r = QB_NEW(struct reshare_view);
	if (reshare_prepare(v, c, en, r, &ignored) == QB_OK) {
		r->request_seq = (int64_t)leaf->seq;
		c->reshare = *r;
	}
	qb_free(r);
}

static void apply_reshare_step(struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                               const uint8_t leaf_hash[static 32])
{
	const struct reshare_view *r = &c->reshare;
	const char *type = en->type->type;
	if (strcmp(type, "reshare-deal") == 0)
		apply_deal(c, en);
	else if (strcmp(type, "reshare-failed") == 0)
		end_attempt(c, "", "nobody is to blame", en, leaf);
	else if (strcmp(type, "reshare-certify") == 0)
		apply_certify(c, en, leaf);
	else if (strcmp(type, "reshare-canary") == 0)
		apply_canary(c, en, leaf, leaf_hash);
	else if (strcmp(type, "reshare-rehearsal") == 0)
		apply_rehearsal(c, en, leaf);
	else if (r->canary_seq != NO_SEQ && view_all_did(r->member, r->n, offsetof(struct custodian, rehearsal_seq)))
		take_office(c, leaf); /* reshared */
}

bool view_apply_reshare(const struct view *v, struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                        const uint8_t leaf_hash[static 32])
{
	const char *type = en->type->type;
	if (strcmp(type, "reshare-request") == 0 || strcmp(type, "repair-request") == 0) {
		apply_request(v, c, en, leaf);
	} else if (strcmp(type, "opening-request") == 0) {
		/* a review must not wait for a resharing that hangs */
		end_attempt(c, "", "the full opening was asked for", en, leaf);
		return false;
	} else if (strcmp(type, "reshare-complaint") == 0) {
		apply_complaint(c, en, leaf);
	} else if (strcmp(type, "share-erased") == 0) {
		apply_erased(c, en);
	} else if (strcmp(type, "repair-split") == 0) {
		apply_repair_message(c, en, c->repair.split);
	} else if (strcmp(type, "repair-sum") == 0) {
		apply_repair_message(c, en, c->repair.sum);
	} else if (strcmp(type, "repair-failed") == 0 || strcmp(type, "repaired") == 0) {
		apply_repair_end(c, en, strcmp(type, "repaired") == 0);
	} else if (strncmp(type, "reshare-", 8) == 0 || strcmp(type, "reshared") == 0) {
		if (runs(c, en))
			apply_reshare_step(c, en, leaf, leaf_hash);
	} else {
		return false;
	}
	return true;
}
