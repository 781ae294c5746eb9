/*
 * Openings. A full one combines in public, after closing. A spot one is between the custodians: the service relays
 * boxes it can't read, and the asker gets boxed answers.
 */
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define RECORDS_PER_PAGE 500
#define SPOT_RECORDS_MAX 512

/* ---- the list of sealed records ---- */

struct listing {
	const struct campaign *c;
	const struct ops *o;
	json_t *list;
	int64_t next;
	bool with_bytes;
};

static enum qb_status add_record(void *state, const struct store_record *r, struct qb_error *e)
{
	struct listing *l = state;
	json_t *j = json_object();
	(void)e;
	json_object_set_new(j, "position", json_integer(r->position));
	json_object_set_new(j, "type", json_integer(r->type));
	json_object_set_new(j, "slot", json_integer(r->slot));
	if (*r->station != '\0')
		json_object_set_new(j, "station", json_string(r->station));
	const struct view_party *author = view_party_by_id(&l->o->view, r->author);
	json_object_set_new(j, "by", json_string(author != NULL ? author->name : "service"));
	json_object_set_new(j, "record_id", json_hex_new(r->record_id, 64));
	if (l->with_bytes) {
		char *text = base64_encode(r->record, r->record_n);
		json_object_set_new(j, "record", json_string(text));
		qb_free(text);
	}
	json_array_append_new(l->list, j);
	l->next = r->position + 1;
	return QB_OK;
}

enum qb_status case_records(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e)
{
	int64_t from, limit;
	if (c->state < C_CLOSED && campaign_role(c, call->who) != ROLE_CUSTODIAN)
		return qb_fail(e, QB_REFUSED, "records", "wait for the closing",
		               "before closing they go to custodians only");
	if (!query_int(call->query, "from", 0, INT64_MAX, 0, &from) ||
	    !query_int(call->query, "limit", 1, RECORDS_PER_PAGE, 200, &limit))
		return qb_fail(e, QB_RANGE, "query", "from=0.. and limit=1..500", "is out of range");
	struct listing l = {.c = c, .o = o, .list = json_array(), .next = from, .with_bytes = true};
	enum qb_status st = store_records(o->store, c->id, from, limit, add_record, &l, e);
	bool more = (int64_t)json_array_size(l.list) == limit;
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "records", l.list);
	json_object_set_new(reply->doc, "next", more ? json_integer(l.next) : json_null());
	return st;
}

/* ---- asking ---- */

struct opening *opening_add_spot(struct campaign *c, const struct wire_entry *en, const uint8_t commitment[static 64],
                                 const uint8_t asker[static 16], int64_t asked_ns)
{
	struct opening op = {.scope = SCOPE_SPOT,
	                     .seq = NO_SEQ,
	                     .asked_ns = asked_ns,
	                     .deadline_ns = wire_entry_gps(en, "deadline_gps")};
	memcpy(op.id, commitment, 16);
	memcpy(op.authority, commitment, 64);
	memcpy(op.asker, asker, 16);
	c->opening = qb_realloc(c->opening, (size_t)c->n_openings + 1, sizeof *c->opening);
	c->opening[c->n_openings++] = op;
	return &c->opening[c->n_openings - 1];
}

static void spot_key(const struct opening *op, char out[static 48])
{
	char hex[33];
	hex_encode(hex, op->id, 16);
	(void)snprintf(out, 48, "spot-%s", hex);
}

enum qb_status opening_reload_positions(struct ops *o, struct campaign *c, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < c->n_openings; i++) {
		struct opening *op = &c->opening[i];
		struct buf b = {0};
		json_t *list = NULL;
		char key[48];
		if (op->scope != SCOPE_SPOT)
			continue;
		spot_key(op, key);
		st = store_setting_get(o->store, key, &b, e);
		if (st == QB_OK)
			st = json_read((const char *)b.data, b.len, "spot positions", &list, e);
		op->n_positions = (int)json_array_size(list);
		op->positions = QB_NEW_ARRAY(int64_t, (size_t)op->n_positions);
		for (int j = 0; j < op->n_positions; j++)
			op->positions[j] = json_integer_value(json_array_get(list, (size_t)j));
		json_decref(list);
		buf_free(&b);
	}
	return st;
}

struct newest {
	const char *station;
	int64_t position;
};

static enum qb_status keep_newest(void *state, const struct store_record *r, struct qb_error *e)
{
	struct newest *n = state;
	(void)e;
	if (n->station == NULL || strcmp(n->station, r->station) == 0)
		n->position = r->position;
	return QB_OK;
}

/* The truth of each slot that the interval touches, and each station's newest note there: fixed at the request. */
static enum qb_status spot_positions(struct ops *o, const struct campaign *c, int64_t from_ns, int64_t to_ns,
                                     json_t *out, struct qb_error *e)
{
	int64_t first, last;
	enum qb_status st = QB_OK;
	if (!slots_touched(&c->plan->slots, from_ns, to_ns, &first, &last))
		return qb_fail(e, QB_RANGE, "spot request", NULL, "the interval lies outside the campaign");
	if ((last - first + 1) * (1 + c->plan->network->n_stations) > SPOT_RECORDS_MAX)
		return qb_fail(e, QB_RANGE, "spot request", "ask about a shorter interval",
		               "it touches too many slots");
	for (int64_t n = first; st == QB_OK && n <= last; n++) {
		struct newest truth = {NULL, -1};
		st = store_records_of_slot(o->store, c->id, n, RECORD_SLOT, keep_newest, &truth, e);
		json_array_append_new(out, json_integer(truth.position));
		for (int i = 0; st == QB_OK && i < c->plan->network->n_stations; i++) {
			struct newest note = {c->plan->network->stations[i].name, -1};
			st = store_records_of_slot(o->store, c->id, n, RECORD_PLAY_NOTE, keep_newest, &note, e);
			if (note.position >= 0)
				json_array_append_new(out, json_integer(note.position));
		}
	}
	return st;
}

static int spots_asked(const struct campaign *c)
{
	int n = 0;
	for (int i = 0; i < c->n_openings; i++)
		n += c->opening[i].scope == SCOPE_SPOT;
	return n;
}

static enum qb_status ask_spot(struct ops *o, struct campaign *c, const struct ops_call *call, const struct accepted *a,
                               struct ops_reply *reply, struct qb_error *e)
{
	struct txn t;
	uint8_t commitment[64];
	char key[48];
	json_t *positions = json_array();
	int64_t from = wire_entry_gps(&a->entry, "from_gps"), to = wire_entry_gps(&a->entry, "to_gps");
	int quota = c->plan->alerts.given ? c->plan->alerts.spot_quota : 5;
	enum qb_status st = QB_OK;
	int64_t asked_ns = now_locked(o);
	if (c->state != C_SEALED)
		st = qb_fail(e, QB_CONFLICT, "spot request", NULL, "the campaign is %s", campaign_word(c));
	else if (from > to || from > now_locked(o))
		st = qb_fail(e, QB_RANGE, "spot request", "ask about time that has passed",
		             "the interval is empty or in the future");
	else if (spots_asked(c) >= quota)
		st = qb_fail(e, QB_REFUSED, "spot request", NULL, "the plan allows %d spot openings, all are used",
		             quota);
	if (st == QB_OK)
		st = campaign_spot_allowed(c, &a->entry, e);
	if (st == QB_OK && wire_entry_gps(&a->entry, "deadline_gps") <= now_locked(o))
		st = qb_fail(e, QB_RANGE, "spot request: deadline_gps", "give a later deadline", "has passed");
	if (st == QB_OK)
		st = spot_positions(o, c, from, to, positions, e);
	if (st == QB_OK && (st = txn_begin(&t, o, "spot-request", e)) == QB_OK) {
		asked_ns = t.now_ns;
		st = hidden_take(&t, c, call, a, reply, commitment, e);
		struct opening op;
		memcpy(op.id, commitment, 16);
		spot_key(&op, key);
		char *text = json_text(positions);
		if (st == QB_OK)
			st = store_setting_put(o->store, key, text, e);
		qb_free(text);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		txn_end(&t);
	}
	if (st == QB_OK) {
		struct opening *added = opening_add_spot(c, &a->entry, commitment, call->who->key_id, asked_ns);
		added->n_positions = (int)json_array_size(positions);
		added->positions = QB_NEW_ARRAY(int64_t, (size_t)added->n_positions);
		for (int j = 0; j < added->n_positions; j++)
			added->positions[j] = json_integer_value(json_array_get(positions, (size_t)j));
		json_object_set_new(reply->doc, "opening", json_hex_new(commitment, 16));
	}
	json_decref(positions);
	return st;
}

enum qb_status case_opening_request(struct ops *o, struct campaign *c, const struct ops_call *call,
                                    struct ops_reply *reply, struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	if (strcmp(a.entry.type->type, "spot-request") == 0) {
		st = ask_spot(o, c, call, &a, reply, e);
	} else {
		if (c->state != C_CLOSED)
			st = qb_fail(e, QB_CONFLICT, "opening", "close the analysis first", "the campaign is %s",
			             campaign_word(c));
		else if (wire_entry_gps(&a.entry, "reveal_gps") > wire_entry_gps(&a.entry, "deadline_gps"))
			st = qb_fail(e, QB_RANGE, "opening: reveal_gps", "reveal before the deadline",
			             "is after the deadline");
		if (st == QB_OK)
			st = enter_one(o, "opening-request", call, &a, reply, e);
		if (st == QB_OK)
			json_object_set_new(reply->doc, "opening", json_hex_new(c->opening[c->n_openings - 1].id, 16));
	}
	accepted_free(&a);
	return st;
}

/* ---- seeing ---- */

/* The asker may have replaced his keys since. */
static bool asked_by(const struct opening *op, const struct view_party *who)
{
	bool same = memcmp(op->asker, who->key_id, 16) == 0;
	for (int i = 0; i < who->n_past; i++)
		same = same || memcmp(op->asker, who->past[i].key_id, 16) == 0;
	return same;
}

static bool may_see(const struct campaign *c, const struct opening *op, const struct view_party *who)
{
	return op->scope == SCOPE_FULL || custodian_index(c, who->name) >= 0 || asked_by(op, who);
}

enum qb_status opening_add_name(void *state, const char *name, const uint8_t *p, size_t n, struct qb_error *e)
{
	(void)p;
	(void)n;
	(void)e;
	json_array_append_new(state, json_string(name));
	return QB_OK;
}

static enum qb_status add_box(void *state, const char *sender, const uint8_t *p, size_t n, struct qb_error *e)
{
	char *text = base64_encode(p, n);
	(void)e;
	json_object_set_new(state, sender, json_string(text));
	qb_free(text);
	return QB_OK;
}

/* When the answers of a spot came, and which of them was the last that was needed. */
struct answer_times {
	char id[33];
	int needed, n;
	int64_t answered_ns; /* of the k-th */
};

static enum qb_status find_answers(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct answer_times *t = state;
	struct wire_entry en;
	enum qb_status st = wire_entry_parse((const char *)h->entry, h->entry_n, &en, e);
	if (st != QB_OK)
		return st;
	if (strcmp(en.type->type, "spot-answer") == 0 && strcmp(wire_entry_text(&en, "opening"), t->id) == 0 &&
	    ++t->n == t->needed)
		t->answered_ns = h->received_gps_ns;
	wire_entry_free(&en);
	return QB_OK;
}

/* Who is called by the rota, who gave, who refused. */
static void put_rota(struct ops *o, const struct campaign *c, const struct opening *op, json_t *j)
{
	int order[CUSTODY_MAX];
	int called = opening_rota(c, op->id, op->scope, op->asked_ns, op->deadline_ns, now_locked(o), order);
	json_t *list = json_array(), *next = json_array();
	for (int i = 0; i < c->n; i++)
		json_array_append_new(i < called ? list : next, json_string(c->custodian[order[i]].party->name));
	json_object_set_new(j, "called", list);
	json_object_set_new(j, "next", next);
}

static enum qb_status opening_state(struct ops *o, const struct campaign *c, const struct opening *op, json_t *j,
                                    struct qb_error *e)
{
	json_t *shares = json_array(), *answers = json_array(), *refused = json_array();
	struct answer_times t = {.needed = c->k};
	bool spot = op->scope == SCOPE_SPOT;
	enum qb_status st = spot ? store_boxes(o->store, c->id, op->id, TO_ALL, opening_add_name, shares, e)
	                         : store_shares(o->store, c->id, op->id, opening_add_name, shares, e);
	if (st == QB_OK && spot)
		st = store_boxes(o->store, c->id, op->id, TO_ASKER, opening_add_name, answers, e);
	if (st == QB_OK)
		st = store_boxes(o->store, c->id, op->id, REFUSED, opening_add_name, refused, e);
	hex_encode(t.id, op->id, 16);
	if (st == QB_OK && (int)json_array_size(answers) >= c->k)
		st = store_hidden_all(o->store, c->id, find_answers, &t, e);
	bool answered = (int)json_array_size(answers) >= c->k, late = now_locked(o) > op->deadline_ns;
	json_object_set_new(j, "opening", json_hex_new(op->id, 16));
	json_object_set_new(j, "scope", json_string(spot ? "spot" : "full"));
	json_object_set_new(j, "state",
	                    json_string(op->opened ? "opened"
	                                : answered ? "answered"
	                                : late     ? "late"
	                                           : "waiting"));
	json_object_set_new(j, "asked_gps", json_gps_new(op->asked_ns));
	json_object_set_new(j, "deadline_gps", json_gps_new(op->deadline_ns));
	json_object_set_new(j, "reveal_gps", spot ? json_null() : json_gps_new(op->reveal_ns));
	json_object_set_new(j, "answered_gps", answered && t.n >= c->k ? json_gps_new(t.answered_ns) : json_null());
	json_object_set_new(j, "shares", shares);
	json_object_set_new(j, "refused", refused);
	put_rota(o, c, op, j);
	json_decref(answers);
	return st;
}

enum qb_status case_openings_list(struct ops *o, struct campaign *c, const struct ops_call *call,
                                  struct ops_reply *reply, struct qb_error *e)
{
	json_t *list = json_array();
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < c->n_openings; i++) {
		if (!may_see(c, &c->opening[i], call->who))
			continue;
		json_t *j = json_object();
		st = opening_state(o, c, &c->opening[i], j, e);
		json_array_append_new(list, j);
	}
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "openings", list);
	return st;
}

struct finding {
	const struct opening *op;
	json_t *j;
};

static enum qb_status put_request(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct finding *f = state;
	(void)e;
	if (memcmp(h->commitment, f->op->authority, 64) != 0)
		return QB_OK;
	char *text = qb_memdup(h->entry, h->entry_n);
	json_t *receipt = json_object();
	json_object_set_new(f->j, "entry", json_string(text));
	json_object_set_new(f->j, "signature", json_hex_new(h->signature, 64));
	json_object_set_new(f->j, "nonce", json_hex_new(h->nonce, 32));
	json_object_set_new(receipt, "commitment", json_hex_new(h->commitment, 64));
	json_object_set_new(receipt, "received_gps", json_gps_new(h->received_gps_ns));
	json_object_set_new(receipt, "batch_due_gps", json_gps_new(h->due_gps_ns));
	json_object_set_new(receipt, "promise", json_hex_new(h->promise, 64));
	json_object_set_new(f->j, "receipt", receipt);
	qb_free(text);
	return QB_OK;
}

/* Record types that a full opening opens, in the order of positions. */
static enum qb_status openable(struct ops *o, const struct campaign *c, const struct opening *op, store_record_fn *fn,
                               void *state, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	if (op->scope == SCOPE_FULL)
		return store_records(o->store, c->id, 0, INT64_MAX, fn, state, e);
	for (int i = 0; st == QB_OK && i < op->n_positions; i++)
		st = store_records(o->store, c->id, op->positions[i], 1, fn, state, e);
	return st;
}

enum qb_status case_opening(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e)
{
	struct opening *op = opening_find(c, call->match->parts[1]);
	if (op == NULL || !may_see(c, op, call->who))
		return qb_fail(e, QB_NOT_FOUND, "opening", "see quietbell opening list", "there is no such opening");
	json_t *j = json_object(), *boxes = json_object(), *answers = json_object(), *retractions = json_object();
	struct listing l = {.c = c, .o = o, .list = json_array()};
	struct finding f = {op, j};
	enum qb_status st = opening_state(o, c, op, j, e);
	if (st == QB_OK && op->scope == SCOPE_SPOT)
		st = store_hidden_all(o->store, c->id, put_request, &f, e);
	else if (st == QB_OK)
		json_object_set_new(j, "seq", json_integer(op->seq));
	if (st == QB_OK)
		st = openable(o, c, op, add_record, &l, e);
	if (st == QB_OK)
		st = store_boxes(o->store, c->id, op->id, call->who->name, add_box, boxes, e);
	if (st == QB_OK && asked_by(op, call->who))
		st = store_boxes(o->store, c->id, op->id, TO_ASKER, add_box, answers, e);
	if (st == QB_OK && asked_by(op, call->who))
		st = store_boxes(o->store, c->id, op->id, TO_RETRACT, add_box, retractions, e);
	json_object_set_new(j, "retractions", retractions);
	json_object_set_new(j, "records", l.list);
	json_object_set_new(j, "boxes", boxes);
	json_object_set_new(j, "answers", answers);
	reply->http_status = 200;
	reply->doc = j;
	return st;
}
