/* What custodians give for an opening: public partial openings for a full one, boxes and boxed answers for a spot. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/ops/internal.h"

struct checking {
	const struct campaign *c;
	const struct opening *op;
	const uint8_t *shares;
	size_t at, n; /* partials */
	uint32_t index;
};

static enum qb_status check_one(void *state, const struct store_record *r, struct qb_error *e)
{
	struct checking *x = state;
	struct record rec;
	struct partial p;
	struct partial_authority auth = {.purpose = partial_full_purpose((enum record_type)r->type)};
	memcpy(auth.hash, x->op->authority, 32);
	if (x->at >= x->n)
		return qb_fail(e, QB_FORMAT, "shares", NULL, "there are fewer partial openings than records");
	enum qb_status st = record_check(&x->c->group, r->record, r->record_n, &rec, e);
	if (st == QB_OK)
		st = partial_check(&x->c->group, &rec, &auth, x->shares + x->at * PARTIAL_BYTES, PARTIAL_BYTES, &p, e);
	if (st == QB_OK && p.i != x->index)
		st = qb_fail(e, QB_CRYPTO, "shares", NULL, "a partial opening is another custodian's");
	x->at++;
	return st;
}

/* Once each: what a custodian gave stands, and the same again would count for nothing. */
static enum qb_status given_before(const json_t *names, const char *name, struct qb_error *e)
{
	size_t i;
	json_t *v;
	json_array_foreach(names, i, v)
	{
		if (strcmp(json_string_value(v), name) == 0)
			return qb_fail(e, QB_CONFLICT, "opening", "wait for the other custodians", "%s gave before",
			               name);
	}
	return QB_OK;
}

struct share_set {
	uint8_t *shares;
	size_t n;
};
struct combining {
	const struct campaign *c;
	const struct opening *op;
	struct share_set set[CUSTODY_MAX];
	int n_sets;
	size_t at;
	struct transcript *t;
};

static enum qb_status keep_shares(void *state, const char *custodian, const uint8_t *p, size_t n, struct qb_error *e)
{
	struct combining *x = state;
	(void)custodian;
	(void)e;
	if (x->n_sets < x->c->k)
		x->set[x->n_sets++] = (struct share_set){qb_memdup(p, n), n};
	return QB_OK;
}

static enum qb_status combine_one(void *state, const struct store_record *r, struct qb_error *e)
{
	struct combining *x = state;
	struct record rec;
	struct partial p[CUSTODY_MAX];
	struct buf content = {0};
	uint8_t hash[64];
	bool opens = false;
	struct partial_authority auth = {.purpose = partial_full_purpose((enum record_type)r->type)};
	memcpy(auth.hash, x->op->authority, 32);
	enum qb_status st = record_check(&x->c->group, r->record, r->record_n, &rec, e);
	for (int i = 0; st == QB_OK && i < x->n_sets; i++)
		st = partial_check(&x->c->group, &rec, &auth, x->set[i].shares + x->at * PARTIAL_BYTES, PARTIAL_BYTES,
		                   &p[i], e);
	if (st == QB_OK)
		st = partial_open_filed(&x->c->group, &rec, p, (size_t)x->n_sets, &content, &opens, e);
	if (st == QB_OK) {
		partial_content_hash(&content, opens, hash);
		transcript_field(x->t, rec.id, 64);
		transcript_field(x->t, hash, 64);
	}
	buf_wipe(&content);
	x->at++;
	return st;
}

/* Enough shares: combine every record, so that "opened" is said only of what really opens. */
static enum qb_status combine_all(struct txn *t, struct campaign *c, const struct opening *op, struct qb_error *e)
{
	struct transcript plaintexts;
	struct combining x = {.c = c, .op = op, .t = &plaintexts};
	uint8_t hash[64];
	transcript_begin(&plaintexts, "quietbell/1/opening/plaintexts");
	enum qb_status st = store_shares(t->o->store, c->id, op->id, keep_shares, &x, e);
	if (st == QB_OK)
		st = store_records(t->o->store, c->id, 0, INT64_MAX, combine_one, &x, e);
	transcript_end(&plaintexts, hash);
	if (st == QB_OK) {
		json_t *extra = json_object();
		json_object_set_new(extra, "opening", json_hex_new(op->id, 16));
		json_object_set_new(extra, "plaintexts_hash", json_hex_new(hash, 64));
		st = txn_service_entry(t, "opened", c, "k custodians opened every record", extra, NULL, NULL, e);
	}
	for (int i = 0; i < x.n_sets; i++)
		qb_free(x.set[i].shares);
	return st;
}

static enum qb_status give_full(struct ops *o, struct campaign *c, struct opening *op, const struct ops_call *call,
                                const struct accepted *a, struct ops_reply *reply, struct qb_error *e)
{
	struct buf b = {0};
	struct txn t;
	uint8_t hash[64], given[64], leaf[32];
	int64_t seq;
	json_t *names = json_array();
	enum qb_status st = body_base64(call->body, "shares", (size_t)24 << 20, &b, e);
	struct checking x = {
	    c, op, b.data, 0, b.len / PARTIAL_BYTES, (uint32_t)custodian_index(c, call->who->name) + 1};
	if (st == QB_OK && op->opened)
		st = qb_fail(e, QB_CONFLICT, "opening", NULL, "it is open already");
	if (st == QB_OK && now_locked(o) < op->reveal_ns) {
		reply->until_gps_ns = op->reveal_ns;
		st = qb_fail(e, QB_CONFLICT, "opening", "hand them over at the time to reveal",
		             "shares are taken from the time to reveal on");
	}
	if (st == QB_OK)
		st = store_shares(o->store, c->id, op->id, opening_add_name, names, e);
	if (st == QB_OK)
		st = given_before(names, call->who->name, e);
	if (st == QB_OK) {
		blake2b_512(hash, b.data, b.len);
		wire_entry_hex(&a->entry, "shares_hash", given, 64);
		if (memcmp(hash, given, 64) != 0)
			st = qb_fail(e, QB_CRYPTO, "entry: shares_hash", NULL,
			             "is not the hash of the shares that were sent");
	}
	if (st == QB_OK)
		st = store_records(o->store, c->id, 0, INT64_MAX, check_one, &x, e);
	if (st == QB_OK &&
	    (b.len % PARTIAL_BYTES != 0 || x.at != x.n || wire_entry_int(&a->entry, "count") != (int64_t)x.n))
		st =
		    qb_fail(e, QB_FORMAT, "shares", NULL, "%zu partial openings are needed, one for each record", x.at);
	if (st == QB_OK && (st = txn_begin(&t, o, "opening-shares", e)) == QB_OK) {
		st = store_shares_put(o->store, c->id, op->id, call->who->name, b.data, b.len, e);
		if (st == QB_OK)
			st = txn_entry(&t, call->who->key_id, a->text, a->signature, &seq, leaf, e);
		if (st == QB_OK && (int)json_array_size(names) + 1 >= c->k)
			st = combine_all(&t, c, op, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	json_decref(names);
	buf_free(&b);
	return st;
}

/* Boxes for the other custodians: every one of them must get one, of equal size, so that the relay learns nothing. */
static enum qb_status put_boxes(struct ops *o, const struct campaign *c, const struct opening *op,
                                const struct ops_call *call, struct qb_error *e)
{
	const json_t *boxes = json_object_get(call->body, "boxes");
	enum qb_status st = QB_OK;
	if (!json_is_object(boxes) || json_object_size(boxes) != (size_t)c->n)
		return qb_fail(e, QB_FORMAT, "boxes", NULL, "one box for each custodian is needed");
	for (int i = 0; st == QB_OK && i < c->n; i++) {
		struct buf b = {0};
		const char *name = c->custodian[i].party->name;
		st = body_base64(boxes, name, (size_t)1 << 20, &b, e);
		if (st == QB_OK)
			st = store_box_put(o->store, c->id, op->id, call->who->name, name, b.data, b.len, e);
		buf_free(&b);
	}
	if (st == QB_OK)
		st = store_box_put(o->store, c->id, op->id, call->who->name, TO_ALL, "", 0, e);
	return st;
}

static enum qb_status spot_given_before(struct ops *o, const struct campaign *c, const struct opening *op,
                                        const char *name, const char *to, struct qb_error *e)
{
	json_t *names = json_array();
	enum qb_status st = store_boxes(o->store, c->id, op->id, to, opening_add_name, names, e);
	if (st == QB_OK)
		st = given_before(names, name, e);
	json_decref(names);
	return st;
}

/* What each hidden entry of a spot carries, and until when it is taken. */
static const struct {
	const char *type, *receiver; /* NULL: boxes to every custodian */
	bool box, until_deadline;
} spot_steps[] = {
    {"spot-shares", NULL, false, true},
    {"spot-answer", TO_ASKER, true, true},
    {"spot-refusal", REFUSED, false, true},
    {"spot-retraction", TO_RETRACT, true, false},
};

static enum qb_status give_spot(struct ops *o, struct campaign *c, struct opening *op, const struct ops_call *call,
                                const struct accepted *a, struct ops_reply *reply, struct qb_error *e)
{
	struct txn t;
	struct buf b = {0};
	uint8_t commitment[64];
	size_t s = 0;
	while (strcmp(spot_steps[s].type, a->entry.type->type) != 0) {
		if (++s == sizeof spot_steps / sizeof spot_steps[0])
			return qb_fail(e, QB_REFUSED, "entry", NULL, "does not belong to a spot opening");
	}
	if (c->state != C_SEALED)
		return qb_fail(e, QB_CONFLICT, "spot opening", NULL, "the campaign is %s", campaign_word(c));
	if (spot_steps[s].until_deadline && now_locked(o) > op->deadline_ns)
		return qb_fail(e, QB_CONFLICT, "spot opening", "tell the asker by telephone",
		               "its deadline has passed; what comes now is of no use");
	const char *to = spot_steps[s].receiver != NULL ? spot_steps[s].receiver : TO_ALL;
	enum qb_status st = spot_given_before(o, c, op, call->who->name, to, e);
	if (st == QB_OK && spot_steps[s].box)
		st = body_base64(call->body, "box", 4096, &b, e);
	if (st == QB_OK && (st = txn_begin(&t, o, a->entry.type->type, e)) == QB_OK) {
		if (spot_steps[s].receiver != NULL)
			st = store_box_put(o->store, c->id, op->id, call->who->name, spot_steps[s].receiver, b.data,
			                   b.len, e);
		else
			st = put_boxes(o, c, op, call, e);
		if (st == QB_OK)
			st = hidden_take(&t, c, call, a, reply, commitment, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		txn_end(&t);
	}
	buf_free(&b);
	return st;
}

/* A public refusal of the full opening. */
static enum qb_status refuse_full(struct ops *o, struct campaign *c, struct opening *op, const struct ops_call *call,
                                  const struct accepted *a, struct ops_reply *reply, struct qb_error *e)
{
	struct txn t;
	uint8_t leaf[32];
	int64_t seq;
	enum qb_status st = op->opened ? qb_fail(e, QB_CONFLICT, "opening", NULL, "it is open already") : QB_OK;
	if (st == QB_OK && (st = txn_begin(&t, o, "opening-refusal", e)) == QB_OK) {
		st = store_box_put(o->store, c->id, op->id, call->who->name, REFUSED, "", 0, e);
		if (st == QB_OK)
			st = txn_entry(&t, call->who->key_id, a->text, a->signature, &seq, leaf, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	return st;
}

enum qb_status case_opening_shares(struct ops *o, struct campaign *c, const struct ops_call *call,
                                   struct ops_reply *reply, struct qb_error *e)
{
	struct accepted a;
	struct opening *op = opening_find(c, call->match->parts[1]);
	if (op == NULL)
		return qb_fail(e, QB_NOT_FOUND, "opening", "see quietbell opening list", "there is no such opening");
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	bool refusal = strcmp(a.entry.type->type, "opening-refusal") == 0;
	bool full = refusal || strcmp(a.entry.type->type, "opening-shares") == 0;
	if (strcmp(wire_entry_text(&a.entry, "opening"), call->match->parts[1]) != 0)
		st = qb_fail(e, QB_REFUSED, "entry: opening", NULL, "is not the opening of the path");
	else if (full != (op->scope == SCOPE_FULL))
		st = qb_fail(e, QB_REFUSED, "entry", NULL, "this is a %s opening",
		             op->scope == SCOPE_FULL ? "full" : "spot");
	else if (refusal)
		st = refuse_full(o, c, op, call, &a, reply, e);
	else
		st = full ? give_full(o, c, op, call, &a, reply, e) : give_spot(o, c, op, call, &a, reply, e);
	accepted_free(&a);
	return st;
}
