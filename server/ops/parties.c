/* Who takes part: invitations by the administrator, enrolment with a code, and the lists. */
#include <stdio.h>
#include <string.h>

#include "server/base/text.h"
#include "server/ops/internal.h"

#define SERVICE_VERSION "1.0"

enum qb_status case_service(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e)
{
	struct buf head = {0};
	char utc[40];
	(void)c;
	(void)call;
	enum qb_status st = store_head_get(o->store, o->size, &head, e);
	if (st == QB_OK) {
		reply->http_status = 200;
		reply->doc = json_object();
		json_object_set_new(reply->doc, "version", json_string(SERVICE_VERSION));
		json_object_set_new(reply->doc, "service_key", json_hex_new(o->service_key, 32));
		json_object_set_new(reply->doc, "clock", json_string(o->rehearsal_clock ? "rehearsal" : "system"));
		json_object_set_new(reply->doc, "now_gps", json_gps_new(now_locked(o)));
		json_object_set_new(reply->doc, "now_utc", json_string(clock_utc_text(now_locked(o), utc, sizeof utc)));
		json_object_set_new(reply->doc, "head", json_string((const char *)head.data));
	}
	buf_free(&head);
	return st;
}

enum qb_status case_parties_list(struct ops *o, struct campaign *c, const struct ops_call *call,
                                 struct ops_reply *reply, struct qb_error *e)
{
	(void)c;
	(void)call;
	(void)e;
	json_t *list = json_array();
	for (int i = 0; i < o->view.n_parties; i++) {
		json_t *p = json_object();
		json_object_set_new(p, "name", json_string(o->view.party[i]->name));
		json_object_set_new(p, "role", json_string(wire_role_word(o->view.party[i]->role)));
		json_object_set_new(p, "signing_key", json_hex_new(o->view.party[i]->signing_key, 32));
		json_object_set_new(p, "exchange_key", json_hex_new(o->view.party[i]->exchange_key, 32));
		json_object_set_new(p, "person", json_string(o->view.party[i]->person));
		json_object_set_new(p, "retired", json_boolean(o->view.party[i]->retired));
		json_array_append_new(list, p);
	}
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "parties", list);
	return QB_OK;
}

struct looking {
	const uint8_t *code_hash;
	const char *name, *role;
	int64_t found, used; /* invitation; an enrolment that came after it */
};

static enum qb_status look_for_invitation(void *state, uint64_t seq, const uint8_t *frame, size_t n,
                                          const uint8_t leaf_hash[static 32], struct qb_error *e)
{
	struct looking *l = state;
	struct entry leaf;
	struct wire_entry en;
	uint8_t hash[64];
	(void)leaf_hash;
	enum qb_status st = entry_decode(frame, n, &leaf, e);
	if (st != QB_OK || leaf.kind != ENTRY_PUBLIC)
		return st;
	if ((st = wire_entry_parse((const char *)leaf.body, leaf.body_len, &en, e)) != QB_OK)
		return st;
	if (strcmp(en.type->type, "invitation") == 0) {
		wire_entry_hex(&en, "code_hash", hash, 64);
		if (same_bytes(hash, l->code_hash, 64) && strcmp(wire_entry_text(&en, "name"), l->name) == 0 &&
		    strcmp(wire_entry_text(&en, "role"), l->role) == 0)
			l->found = (int64_t)seq;
	} else if (strcmp(en.type->type, "enrolment") == 0 && strcmp(wire_entry_text(&en, "name"), l->name) == 0) {
		l->used = (int64_t)seq;
	}
	wire_entry_free(&en);
	return QB_OK;
}

static enum qb_status check_invitation(struct ops *o, const struct accepted *a, struct qb_error *e)
{
	enum wire_role role;
	const char *name = wire_entry_text(&a->entry, "name"), *word = wire_entry_text(&a->entry, "role");
	const struct view_party *p = view_party_named(&o->view, name);
	if (!wire_role_parse(word, &role) || role == ROLE_ADMINISTRATOR)
		return qb_fail(e, QB_REFUSED, "invitation: role",
		               "custodian, operator, driver, analyst, reviewer, liaison, auditor",
		               "'%s' is not a role that can be given", word);
	if (strcmp(name, "service") == 0)
		return qb_fail(e, QB_CONFLICT, "invitation: name", "choose another name", "'%s' is taken", name);
	/* A second invitation to the same role is how somebody who lost their keys comes back. */
	if (p != NULL && p->role != role)
		return qb_fail(e, QB_CONFLICT, "invitation: name", "choose another name",
		               "'%s' is enrolled already as %s", name, wire_role_word(p->role));
	return QB_OK;
}

static enum qb_status check_enrolment(struct ops *o, const struct ops_call *call, const struct accepted *a,
                                      struct qb_error *e)
{
	const char *code, *name = wire_entry_text(&a->entry, "name");
	struct party_public keys;
	uint8_t hash[64];
	struct transcript t;
	enum qb_status st = json_str(call->body, "code", "request", &code, e);
	if (st != QB_OK)
		return st;
	wire_entry_hex(&a->entry, "signing_key", keys.sign, 32);
	wire_entry_hex(&a->entry, "exchange_key", keys.exchange, 32);
	if ((st = party_public_check(&keys, name, e)) != QB_OK)
		return st;
	if (!same_bytes(keys.sign, call->who->signing_key, 32))
		return qb_fail(e, QB_CRYPTO, "enrolment: signing_key", NULL, "is not the key that signed the request");
	if (view_party_by_id(&o->view, call->who->key_id) != NULL)
		return qb_fail(e, QB_CONFLICT, "enrolment", "make new keys with quietbell key new",
		               "the key is, or was, enrolled already");
	const struct view_party *same = view_party_named(&o->view, name);
	if (same != NULL && (same->n_past == VIEW_KEYS_MAX || view_keys_in_use(&o->view, same)))
		return qb_fail(e, QB_CONFLICT, "enrolment", "let the key generation end first",
		               "the keys of %s can't be replaced now", name);
	transcript_begin(&t, "quietbell/1/party/code");
	transcript_text(&t, code);
	transcript_end(&t, hash);
	struct looking l = {hash, name, wire_entry_text(&a->entry, "role"), NO_SEQ, NO_SEQ};
	st = store_leaves(o->store, 0, UINT64_MAX, look_for_invitation, &l, e);
	if (st == QB_OK && l.found == NO_SEQ)
		st = qb_fail(e, QB_REFUSED, "enrolment: code", "ask the administrator for an invitation",
		             "no invitation fits this code, name and role");
	if (st == QB_OK && l.used > l.found)
		st = qb_fail(e, QB_CONFLICT, "enrolment: code", "ask the administrator for another invitation",
		             "this code was used before");
	if (st == QB_OK && l.found != wire_entry_int(&a->entry, "invitation") &&
	    wire_entry_int(&a->entry, "invitation") != -1)
		st = qb_fail(e, QB_REFUSED, "enrolment: invitation", NULL, "is not the entry of this code");
	return st;
}

enum qb_status case_parties_post(struct ops *o, struct campaign *c, const struct ops_call *call,
                                 struct ops_reply *reply, struct qb_error *e)
{
	struct accepted a;
	struct view_party newcomer;
	struct ops_call self = *call;
	/* An enrolling party is not known yet: the api verified the request with the key in the entry. */
	enum qb_status st = QB_OK;
	if (call->who == NULL)
		return qb_fail(e, QB_CRYPTO, NULL, "sign the request", "the request is not signed");
	if (view_party_acting(&o->view, call->who->key_id) == NULL) {
		newcomer = *call->who;
		struct qb_error ignored = {0};
		struct wire_entry en;
		const char *text;
		if ((st = json_str(call->body, "entry", "request", &text, e)) != QB_OK)
			return st;
		if (wire_entry_parse(text, strlen(text), &en, &ignored) == QB_OK) {
			if (strcmp(en.type->type, "enrolment") == 0) {
				(void)snprintf(newcomer.name, sizeof newcomer.name, "%s", wire_entry_text(&en, "name"));
				(void)wire_role_parse(wire_entry_text(&en, "role"), &newcomer.role);
			}
			wire_entry_free(&en);
		}
		self.who = &newcomer;
	}
	if ((st = accept_entry(o, &self, c, &a, e)) != QB_OK)
		return st;
	if (strcmp(a.entry.type->type, "invitation") == 0)
		st = check_invitation(o, &a, e);
	else if (strcmp(a.entry.type->type, "enrolment") == 0)
		st = check_enrolment(o, &self, &a, e);
	else
		st = people_check(o, &self, &a, e);
	if (st == QB_OK)
		st = enter_one(o, "party", &self, &a, reply, e);
	accepted_free(&a);
	return st;
}
