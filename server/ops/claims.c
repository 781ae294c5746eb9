/* Sealed claims, withdrawals and milestones of analysts: stored as ciphertext, entered as hidden leaves. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

static enum qb_status check_pipeline(const struct campaign *c, const struct ops_call *call, const char *pipeline,
                                     struct qb_error *e)
{
	const struct plan_person *p;
	for (int i = 0; (p = plan_person(c->plan, DUTY_ANALYST, i)) != NULL; i++) {
		if (strcmp(p->of, pipeline) == 0 && strcmp(p->name, call->who->name) == 0)
			return QB_OK;
	}
	return qb_fail(e, QB_REFUSED, "claim: pipeline", NULL, "'%s' is not the analyst of pipeline '%s'",
	               call->who->name, pipeline);
}

enum qb_status case_claim(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                          struct qb_error *e)
{
	struct accepted a;
	struct buf b = {0};
	struct record rec;
	enum qb_status st = submit_open(c, e);
	if (st != QB_OK || (st = accept_entry(o, call, c, &a, e)) != QB_OK)
		return st;
	st = check_pipeline(c, call, wire_entry_text(&a.entry, "pipeline"), e);
	if (st == QB_OK)
		st = body_base64(call->body, "record", RECORD_BYTES_MAX, &b, e);
	if (st == QB_OK)
		st = submit_check(o, c, call, &a, RECORD_CLAIM, &b, &rec, e);
	if (st == QB_OK)
		st = submit_take(o, c, call, &a, &rec, reply, e);
	if (st == QB_OK)
		c->n_claims++;
	buf_free(&b);
	accepted_free(&a);
	return st;
}

/* What a party did with a claim of its own, whichever of its keys it had then. */
struct own_claim {
	struct ops *o;
	const char *name, *claim_hex;
	bool found, withdrawn;
};

static enum qb_status look_for_claim(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct own_claim *x = state;
	struct wire_entry en;
	char id[33];
	const struct view_party *author = view_party_by_id(&x->o->view, h->author);
	if (author == NULL || strcmp(author->name, x->name) != 0)
		return QB_OK;
	enum qb_status st = wire_entry_parse((const char *)h->entry, h->entry_n, &en, e);
	if (st != QB_OK)
		return st;
	hex_encode(id, h->commitment, 16);
	if (strcmp(en.type->type, "claim") == 0 && strcmp(id, x->claim_hex) == 0)
		x->found = true;
	if (strcmp(en.type->type, "claim-withdrawal") == 0 && strcmp(wire_entry_text(&en, "claim"), x->claim_hex) == 0)
		x->withdrawn = true;
	wire_entry_free(&en);
	return QB_OK;
}

static enum qb_status check_own_claim(struct ops *o, const struct campaign *c, const struct ops_call *call,
                                      const struct accepted *a, struct qb_error *e)
{
	struct own_claim x = {.o = o, .name = call->who->name, .claim_hex = call->match->parts[1]};
	enum qb_status st = store_hidden_all(o->store, c->id, look_for_claim, &x, e);
	if (st == QB_OK && (!x.found || strcmp(wire_entry_text(&a->entry, "claim"), x.claim_hex) != 0))
		st = qb_fail(e, QB_NOT_FOUND, "claim", "see quietbell claim list", "you have no claim '%s'",
		             x.claim_hex);
	if (st == QB_OK && x.withdrawn)
		st = qb_fail(e, QB_CONFLICT, "claim", NULL, "it was withdrawn before");
	return st;
}

enum qb_status case_claim_withdraw(struct ops *o, struct campaign *c, const struct ops_call *call,
                                   struct ops_reply *reply, struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = submit_open(c, e);
	if (st != QB_OK || (st = accept_entry(o, call, c, &a, e)) != QB_OK)
		return st;
	st = check_own_claim(o, c, call, &a, e);
	if (st == QB_OK)
		st = submit_take(o, c, call, &a, NULL, reply, e);
	accepted_free(&a);
	return st;
}

enum qb_status case_milestone(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                              struct qb_error *e)
{
	struct accepted a;
	struct buf b = {0};
	struct record rec;
	enum qb_status st = submit_open(c, e);
	if (st != QB_OK || (st = accept_entry(o, call, c, &a, e)) != QB_OK)
		return st;
	st = check_own_claim(o, c, call, &a, e);
	if (st == QB_OK)
		st = body_base64(call->body, "record", RECORD_BYTES_MAX, &b, e);
	if (st == QB_OK)
		st = submit_check(o, c, call, &a, RECORD_MILESTONE, &b, &rec, e);
	if (st == QB_OK)
		st = submit_take(o, c, call, &a, &rec, reply, e);
	buf_free(&b);
	accepted_free(&a);
	return st;
}

struct own {
	struct ops *o;
	const char *name;
	json_t *list;
};

static enum qb_status list_own(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct own *x = state;
	struct wire_entry en;
	const struct view_party *author = view_party_by_id(&x->o->view, h->author);
	if (author == NULL || strcmp(author->name, x->name) != 0)
		return QB_OK;
	enum qb_status st = wire_entry_parse((const char *)h->entry, h->entry_n, &en, e);
	if (st != QB_OK)
		return st;
	if (strcmp(en.type->type, "claim") == 0) {
		json_t *j = json_object();
		json_object_set_new(j, "id", json_hex_new(h->commitment, 16));
		json_object_set_new(j, "received_gps", json_gps_new(h->received_gps_ns));
		json_object_set_new(j, "sequence", json_integer(wire_entry_int(&en, "sequence")));
		json_object_set_new(j, "entered", json_boolean(h->seq >= 0));
		json_object_set_new(j, "withdrawn", json_false());
		json_array_append_new(x->list, j);
	} else if (strcmp(en.type->type, "claim-withdrawal") == 0) {
		size_t i;
		json_t *j;
		json_array_foreach(x->list, i, j)
		{
			if (strcmp(json_string_value(json_object_get(j, "id")), wire_entry_text(&en, "claim")) == 0)
				json_object_set_new(j, "withdrawn", json_true());
		}
	}
	wire_entry_free(&en);
	return QB_OK;
}

enum qb_status case_claims_list(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                                struct qb_error *e)
{
	struct own x = {o, call->who->name, json_array()};
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "claims", x.list);
	return store_hidden_all(o->store, c->id, list_own, &x, e);
}
