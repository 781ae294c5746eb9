/* Look-ups in the projection, and what follows from it: who must have signed a leaf, the certified group. */
#include "server/view/view.h"

#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/seed.h"

struct campaign *view_campaign(const struct view *v, const char *name_or_id)
{
	uint8_t id[16];
	bool is_id = strlen(name_or_id) == 32 && hex_decode(id, 16, name_or_id);
	for (int i = 0; i < v->n_campaigns; i++) {
		struct campaign *c = v->campaign[i];
		if (is_id ? memcmp(c->id, id, 16) == 0 : strcmp(c->name, name_or_id) == 0)
			return c;
	}
	return NULL;
}

const struct view_party *view_party_named(const struct view *v, const char *name)
{
	for (int i = 0; i < v->n_parties; i++) {
		if (strcmp(v->party[i]->name, name) == 0)
			return v->party[i];
	}
	return NULL;
}

int custodian_index(const struct campaign *c, const char *name)
{
	for (int i = 0; i < c->n; i++) {
		if (strcmp(c->custodian[i].party->name, name) == 0)
			return i;
	}
	return -1;
}

int station_of_driver(const struct campaign *c, const char *name)
{
	const struct plan_person *p;
	for (int i = 0; (p = plan_person(c->plan, DUTY_DRIVER, i)) != NULL; i++) {
		if (strcmp(p->name, name) == 0)
			return plan_station(c->plan, p->of);
	}
	return -1;
}

struct opening *opening_find(struct campaign *c, const char *id_hex)
{
	uint8_t id[16];
	if (strlen(id_hex) != 32 || !hex_decode(id, 16, id_hex))
		return NULL;
	for (int i = 0; i < c->n_openings; i++) {
		if (memcmp(c->opening[i].id, id, 16) == 0)
			return &c->opening[i];
	}
	return NULL;
}

enum wire_role campaign_role(const struct campaign *c, const struct view_party *p)
{
	static const enum wire_role of_duty[DUTIES] = {
	    [DUTY_CUSTODIAN] = ROLE_CUSTODIAN, [DUTY_REVIEWER] = ROLE_REVIEWER, [DUTY_OPERATOR] = ROLE_OPERATOR,
	    [DUTY_LIAISON] = ROLE_LIAISON,     [DUTY_DRIVER] = ROLE_DRIVER,     [DUTY_ANALYST] = ROLE_ANALYST};
	if (p->role == ROLE_ADMINISTRATOR || p->role == ROLE_AUDITOR)
		return p->role;
	const struct plan_person *person = plan_person_named(c->plan, p->name);
	if (person == NULL || of_duty[person->duty] != p->role)
		return ROLE_NONE;
	return p->role;
}

void campaign_output_statement(const struct campaign *c, int64_t first_slot, const uint8_t recipes_hash[static 64],
                               uint8_t out[static 64])
{
	static const uint8_t no_key[64];
	struct transcript t;
	seal_output_begin(&t, c->context.ctx, c->sealing_attempt, c->sealer_key);
	seal_output_record(&t, c->seed_record_id, no_key);
	for (int64_t i = first_slot; i < c->n_slots; i++)
		seal_output_record(&t, c->slot[i].record_id, c->slot[i].slot_key_commitment);
	seal_output_end(&t, recipes_hash, out);
}

int campaign_witness_missing(const struct campaign *c)
{
	for (int i = 0; i < c->plan->n_witnesses; i++) {
		int s = plan_station(c->plan, c->plan->witness[i].station);
		if (s >= 0 && c->witness_seq[s] == NO_SEQ)
			return s;
	}
	return -1;
}

const char *campaign_state_word(enum campaign_state s)
{
	static const char *const words[] = {"drafted", "certified", "rehearsed", "sealing",
	                                    "sealed",  "closed",    "opened"};
	return words[s];
}

enum qb_status view_author_key(const struct view *v, const struct entry *leaf, uint8_t key[static 32],
                               struct qb_error *e)
{
	struct wire_entry en;
	const struct view_party *p = view_party_acting(v, leaf->author);
	if (v->started && memcmp(leaf->author, v->service_id, 16) == 0) {
		memcpy(key, v->service_key, 32);
		return QB_OK;
	}
	if (p != NULL && leaf->kind == ENTRY_PUBLIC) {
		memcpy(key, p->signing_key, 32);
		return QB_OK;
	}
	if (leaf->kind == ENTRY_HIDDEN)
		return qb_fail(e, QB_CRYPTO, "ledger", NULL, "leaf %llu is hidden, but not the service's",
		               (unsigned long long)leaf->seq);
	enum qb_status st = wire_entry_parse((const char *)leaf->body, leaf->body_len, &en, e);
	if (st != QB_OK)
		return st;
	/* The first leaf names the service's key, an enrolment its own: both sign themselves. */
	if (!v->started && leaf->seq == 0 && strcmp(en.type->type, "service-start") == 0)
		wire_entry_hex(&en, "service_key", key, 32);
	else if (strcmp(en.type->type, "enrolment") == 0)
		wire_entry_hex(&en, "signing_key", key, 32);
	else
		st = qb_fail(e, QB_CRYPTO, "ledger", "do not trust this ledger",
		             "leaf %llu has an author who is not enrolled", (unsigned long long)leaf->seq);
	wire_entry_free(&en);
	return st;
}

enum qb_status campaign_certified_group(const struct campaign *c, struct custody_group *out, struct qb_error *e)
{
	struct deal *deals = QB_NEW_ARRAY(struct deal, (size_t)c->n);
	uint8_t signatures[CUSTODY_MAX][SIGN_BYTES];
	struct buf certificate = {0};
	enum qb_status st = QB_OK;
	if (!c->has_group || c->state < C_CERTIFIED)
		st =
		    qb_fail(e, QB_CONFLICT, "group key", "wait until every custodian has run quietbell campaign keygen",
		            "not all custodians have certified it");
	for (int i = 0; st == QB_OK && i < c->n; i++) {
		st = deal_parse(&c->context, c->custodian[i].deal, c->custodian[i].deal_n, &deals[i], e);
		memcpy(signatures[i], c->custodian[i].certificate_signature, SIGN_BYTES);
	}
	if (st == QB_OK) {
		keygen_certificate_encode(&c->group, (const uint8_t(*)[SIGN_BYTES])signatures, &certificate);
		st = keygen_certificate_verify(&c->context, deals, certificate.data, certificate.len, out, e);
	}
	buf_free(&certificate);
	qb_free(deals);
	return st;
}

void view_hidden_summary(const uint8_t (*commitments)[64], size_t n, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/ledger/hidden-all");
	for (size_t i = 0; i < n; i++)
		transcript_field(&t, commitments[i], 64);
	transcript_end(&t, out);
}

void campaign_controls(const struct campaign *c, struct states_hold **holds, struct states_stop **stops)
{
	*holds = QB_NEW_ARRAY(struct states_hold, (size_t)c->n_holds);
	*stops = QB_NEW_ARRAY(struct states_stop, (size_t)c->n_stops);
	for (int i = 0; i < c->n_holds; i++)
		(*holds)[i] = c->hold[i].hold;
	for (int i = 0; i < c->n_stops; i++)
		(*stops)[i] = c->stop[i].stop;
}

void view_free(struct view *v)
{
	for (int i = 0; i < v->n_campaigns; i++)
		campaign_free(&v->campaign[i]);
	for (int i = 0; i < v->n_parties; i++)
		qb_free(v->party[i]);
	qb_free(v->party);
	qb_free(v->campaign);
	*v = (struct view){0};
}
