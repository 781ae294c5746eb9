/* What custodians give for an opening: public partial openings for a full one, boxes and boxed answers for a spot. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/custody/batch.h"
#include "server/ops/internal.h"

#define STRETCH 256 /* records that are in memory at a time */

/* Records as the store gives them, in stretches that all processors work on. */
struct stretch {
	const struct campaign *c;
	const struct opening *op;
	struct batch_set set[CUSTODY_MAX]; /* of all records */
	size_t set_n[CUSTODY_MAX];         /* bytes */
	size_t n_sets, done;
	struct buf bytes[STRETCH];
	struct record rec[STRETCH];
	const struct record *at[STRETCH];
	size_t n;
	struct transcript *opened; /* NULL: the proofs are checked and nothing is opened */
};

static enum qb_status work_off(struct stretch *x, struct qb_error *e)
{
	struct batch b = {.group = &x->c->group, .record = x->at, .n = x->n};
	struct batch_set set[CUSTODY_MAX];
	struct buf *content = QB_NEW_ARRAY(struct buf, STRETCH);
	bool opens[STRETCH] = {false};
	enum qb_status st = QB_OK;
	memcpy(b.leaf, x->op->authority, 32);
	for (size_t i = 0; i < x->n_sets; i++) {
		if (x->set_n[i] < (x->done + x->n) * PARTIAL_BYTES)
			st = qb_fail(e, QB_FORMAT, "shares", NULL, "there are fewer partial openings than records");
		set[i] = (struct batch_set){x->set[i].i, x->set[i].partials + x->done * PARTIAL_BYTES};
	}
	if (st == QB_OK)
		st = x->opened != NULL ? batch_open(&b, set, x->n_sets, content, opens, NULL, e)
		                       : batch_check(&b, set, NULL, e);
	for (size_t r = 0; r < x->n; r++) {
		uint8_t hash[64];
		if (st == QB_OK && x->opened != NULL) {
			partial_content_hash(&content[r], opens[r], hash);
			transcript_field(x->opened, x->rec[r].id, 64);
			transcript_field(x->opened, hash, 64);
		}
		buf_wipe(&content[r]);
		buf_free(&x->bytes[r]);
	}
	qb_free(content);
	x->done += x->n;
	x->n = 0;
	return st;
}

static enum qb_status gather(void *state, const struct store_record *r, struct qb_error *e)
{
	struct stretch *x = state;
	buf_put(&x->bytes[x->n], r->record, r->record_n);
	x->at[x->n] = &x->rec[x->n];
	enum qb_status st = record_check(&x->c->group, x->bytes[x->n].data, r->record_n, &x->rec[x->n], e);
	x->n++;
	return st == QB_OK && x->n == STRETCH ? work_off(x, e) : st;
}

static enum qb_status all_records(struct ops *o, struct stretch *x, struct qb_error *e)
{
	enum qb_status st = store_records(o->store, x->c->id, 0, INT64_MAX, gather, x, e);
	if (st == QB_OK && x->n > 0)
		st = work_off(x, e);
	for (size_t r = 0; r < x->n; r++)
		buf_free(&x->bytes[r]);
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

static enum qb_status keep_shares(void *state, const char *custodian, const uint8_t *p, size_t n, struct qb_error *e)
{
	struct stretch *x = state;
	int i = custodian_index(x->c, custodian);
	(void)e;
	if (i < 0 || x->n_sets >= (size_t)x->c->k)
		return QB_OK;
	x->set_n[x->n_sets] = n;
	x->set[x->n_sets++] = (struct batch_set){(uint32_t)i + 1, qb_memdup(p, n)};
	return QB_OK;
}

/* Enough shares: combine every record, so that "opened" is said only of what really opens. */
static enum qb_status combine_all(struct txn *t, struct campaign *c, const struct opening *op, struct qb_error *e)
{
	struct transcript plaintexts;
	struct stretch *x = QB_NEW(struct stretch);
	uint8_t hash[64];
	*x = (struct stretch){.c = c, .op = op, .opened = &plaintexts};
	transcript_begin(&plaintexts, "quietbell/1/opening/plaintexts");
	enum qb_status st = store_shares(t->o->store, c->id, op->id, keep_shares, x, e);
	if (st == QB_OK)
		st = all_records(t->o, x, e);
	transcript_end(&plaintexts, hash);
	if (st == QB_OK) {
		json_t *extra = json_object();
		json_object_set_new(extra, "opening", json_hex_new(op->id, 16));
		json_object_set_new(extra, "plaintexts_hash", json_hex_new(hash, 64));
		st = txn_service_entry(t, "opened", c, "k custodians opened every record", extra, NULL, NULL, e);
	}
	for (size_t i = 0; i < x->n_sets; i++)
		qb_free((void *)(uintptr_t)x->set[i].partials);
	qb_free(x);
	return st;
}

/* As many proofs as there are records, each of them right. */
static enum qb_status check_shares(struct ops *o, const struct campaign *c, const struct opening *op, const char *name,
                                   const struct buf *b, const struct accepted *a, struct qb_error *e)
{
	struct stretch *x = QB_NEW(struct stretch);
	*x = (struct stretch){.c = c, .op = op, .n_sets = 1};
	x->set[0] = (struct batch_set){(uint32_t)custodian_index(c, name) + 1, b->data};
	x->set_n[0] = b->len;
	enum qb_status st = all_records(o, x, e);
	if (st == QB_OK &&
	    (b->len != x->done * PARTIAL_BYTES || wire_entry_int(&a->entry, "count") != (int64_t)x->done))
		st = qb_fail(e, QB_FORMAT, "shares", NULL, "%zu partial openings are needed, one for each record",
		             x->done);
	qb_free(x);
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
		st = check_shares(o, c, op, call->who->name, &b, a, e);
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
                                const struct ops_call *call, const struct accepted *a, struct qb_error *e)
{
	const json_t *boxes = json_object_get(call->body, "boxes");
	const size_t size = (size_t)op->n_positions * PARTIAL_BYTES + BOX_OVERHEAD_BYTES;
	struct transcript t;
	uint8_t hash[64], given[64];
	enum qb_status st = QB_OK;
	transcript_begin(&t, "quietbell/1/opening/boxes");
	if (!json_is_object(boxes) || json_object_size(boxes) != (size_t)c->n)
		return qb_fail(e, QB_FORMAT, "boxes", NULL, "one box for each custodian is needed");
	for (int i = 0; st == QB_OK && i < c->n; i++) {
		struct buf b = {0};
		const char *name = c->custodian[i].party->name;
		st = body_base64(boxes, name, size, &b, e);
		if (st == QB_OK && b.len != size)
			st = qb_fail(e, QB_FORMAT, "boxes", NULL, "each box has %zu bytes for this opening", size);
		transcript_field(&t, b.data, b.len);
		if (st == QB_OK)
			st = store_box_put(o->store, c->id, op->id, call->who->name, name, b.data, b.len, e);
		buf_free(&b);
	}
	transcript_end(&t, hash);
	wire_entry_hex(&a->entry, "boxes_hash", given, 64);
	if (st == QB_OK && memcmp(hash, given, 64) != 0)
		st = qb_fail(e, QB_CRYPTO, "entry: boxes_hash", NULL, "is not the hash of the boxes that were sent");
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
			st = put_boxes(o, c, op, call, a, e);
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
