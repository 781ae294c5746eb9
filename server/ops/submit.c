/*
 * What everything sealed and hidden has in common (claims, milestones, guesses, incidents): one numbering for each
 * author, a record that is the author's own, a receipt, and the list of one's receipts.
 */
#include <string.h>

#include "server/base/text.h"
#include "server/ops/internal.h"

enum qb_status submit_open(const struct campaign *c, struct qb_error *e)
{
	if (c->state == C_SEALED)
		return QB_OK;
	return qb_fail(e, QB_CONFLICT, c->name, NULL,
	               c->state > C_SEALED
	                   ? "the analysis is closed: no claim, milestone, withdrawal, guess or incident "
	                     "is taken any more"
	                   : "the campaign is not sealed yet");
}

/* The receipts of one party, whichever of its keys it had then. */
struct own {
	struct ops *o;
	const char *name;
	int64_t highest; /* sequence number; -1: none */
	json_t *list;    /* NULL: only the number is wanted */
};

static enum qb_status look(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct own *x = state;
	struct wire_entry en;
	const struct view_party *author = view_party_by_id(&x->o->view, h->author);
	if (author == NULL || strcmp(author->name, x->name) != 0)
		return QB_OK;
	enum qb_status st = wire_entry_parse((const char *)h->entry, h->entry_n, &en, e);
	if (st != QB_OK)
		return st;
	const json_t *sequence = json_object_get(en.doc, "sequence"), *slot = json_object_get(en.doc, "slot");
	if (sequence != NULL && json_integer_value(sequence) > x->highest)
		x->highest = json_integer_value(sequence);
	if (x->list != NULL) {
		json_t *j = json_object();
		json_object_set_new(j, "id", json_hex_new(h->commitment, 16));
		json_object_set_new(j, "type", json_string(en.type->type));
		json_object_set_new(j, "received_gps", json_gps_new(h->received_gps_ns));
		json_object_set_new(j, "entered", json_boolean(h->seq >= 0));
		if (sequence != NULL)
			json_object_set_new(j, "sequence", json_integer(json_integer_value(sequence)));
		if (slot != NULL)
			json_object_set_new(j, "slot", json_integer(json_integer_value(slot)));
		json_array_append_new(x->list, j);
	}
	wire_entry_free(&en);
	return QB_OK;
}

enum qb_status submit_check(struct ops *o, const struct campaign *c, const struct ops_call *call,
                            const struct accepted *a, enum record_type type, const struct buf *b, struct record *rec,
                            struct qb_error *e)
{
	struct own x = {o, call->who->name, -1, NULL};
	int64_t sequence = wire_entry_int(&a->entry, "sequence");
	uint8_t id[64];
	enum qb_status st = record_check(&c->group, b->data, b->len, rec, e);
	if (st == QB_OK)
		st = record_expect(rec, type, (uint64_t)sequence, e);
	if (st == QB_OK && memcmp(rec->header.author, call->who->key_id, 16) != 0)
		st =
		    qb_fail(e, QB_CRYPTO, "record: author", "seal your own", "the record was sealed by another author");
	wire_entry_hex(&a->entry, "record_id", id, 64);
	if (st == QB_OK && memcmp(id, rec->id, 64) != 0)
		st = qb_fail(e, QB_CRYPTO, "entry: record_id", NULL, "is not the record that was sent");
	if (st == QB_OK)
		st = store_hidden_all(o->store, c->id, look, &x, e);
	if (st == QB_OK && sequence <= x.highest)
		st = qb_fail(e, QB_CONFLICT, "entry: sequence", "use the next number", "%lld was used before",
		             (long long)sequence);
	return st;
}

enum qb_status submit_take(struct ops *o, struct campaign *c, const struct ops_call *call, const struct accepted *a,
                           const struct record *rec, struct ops_reply *reply, struct qb_error *e)
{
	struct txn t;
	uint8_t commitment[64];
	enum qb_status st = txn_begin(&t, o, a->entry.type->type, e);
	if (st != QB_OK)
		return st;
	if (rec != NULL)
		st = put_sealed(o, c, rec, -1, "", e);
	if (st == QB_OK)
		st = hidden_take(&t, c, call, a, reply, commitment, e);
	if (st == QB_OK)
		st = txn_commit(&t, e);
	txn_end(&t);
	return st;
}

enum qb_status case_receipts(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                             struct qb_error *e)
{
	struct own x = {o, call->who->name, -1, json_array()};
	enum qb_status st = store_hidden_all(o->store, c->id, look, &x, e);
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "receipts", x.list);
	json_object_set_new(reply->doc, "next_sequence", json_integer(x.highest + 1));
	return st;
}
