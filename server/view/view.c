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
	const struct plan_person *p = plan_person_named(c->plan, name);
	return p != NULL && (p->duty == DUTY_DRIVER || p->duty == DUTY_SPARE) ? plan_station(c->plan, p->of) : -1;
}

enum recipe_place place_of_driver(const struct campaign *c, const char *name)
{
	const struct plan_person *p = plan_person_named(c->plan, name);
	return p != NULL && p->duty == DUTY_SPARE ? RECIPE_SPARE : RECIPE_MAIN;
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
	    [DUTY_LIAISON] = ROLE_LIAISON,     [DUTY_DRIVER] = ROLE_DRIVER,     [DUTY_SPARE] = ROLE_DRIVER,
	    [DUTY_ANALYST] = ROLE_ANALYST};
	if (p->role == ROLE_ADMINISTRATOR || p->role == ROLE_AUDITOR)
		return p->role;
	if (p->role == ROLE_CUSTODIAN) {
		bool part = custodian_index(c, p->name) >= 0 || reshare_member(c, p->name) >= 0 ||
		            campaign_owes(c, p->name) != NULL;
		return part ? ROLE_CUSTODIAN : ROLE_NONE;
	}
	const struct plan_person *person = plan_person_named(c->plan, p->name);
	if (person == NULL || of_duty[person->duty] != p->role)
		return ROLE_NONE;
	return p->role;
}

enum wire_role campaign_role_then(const struct campaign *c, const struct view_party *p, int64_t at_ns)
{
	if (p->role != ROLE_CUSTODIAN)
		return campaign_role(c, p);
	for (int i = 0; i < c->n_terms; i++) {
		if (c->term[i].party == p && c->term[i].from_ns <= at_ns && at_ns <= c->term[i].to_ns)
			return ROLE_CUSTODIAN;
	}
	return ROLE_NONE;
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

int opening_rota(const struct campaign *c, const uint8_t id[static 16], enum opening_scope scope, int64_t asked_ns,
                 int64_t deadline_ns, int64_t now_ns, int order[CUSTODY_MAX])
{
	int start = id[0] % c->n;
	int64_t step =
	    scope == SCOPE_SPOT ? c->plan->alerts.call_next_after_ns : (deadline_ns - asked_ns) / (c->n - c->k + 1);
	for (int i = 0; i < c->n; i++)
		order[i] = (start + i) % c->n;
	int64_t more = step > 0 && now_ns > asked_ns ? (now_ns - asked_ns) / step : 0;
	return more > c->n - c->k ? c->n : c->k + (int)more;
}

enum qb_status campaign_spot_allowed(const struct campaign *c, const struct wire_entry *en, struct qb_error *e)
{
	const struct plan_names *may = &c->plan->alerts.recipients;
	size_t i;
	json_t *v;
	if (strcmp(en->why, "-") == 0)
		return qb_fail(e, QB_REFUSED, "spot request: why", "give --reason", "a spot request needs a reason");
	json_array_foreach(wire_entry_json(en, "recipients"), i, v)
	{
		bool named = !c->plan->alerts.given || may->n == 0;
		for (int j = 0; j < may->n; j++)
			named = named || strcmp(may->name[j], json_string_value(v)) == 0;
		if (!named)
			return qb_fail(e, QB_REFUSED, "spot request: recipients",
			               "name recipients of the plan's alerts section",
			               "'%.60s' may not learn the answer by the plan", json_string_value(v));
	}
	return QB_OK;
}

const struct custodian *campaign_drawers(const struct campaign *c, int *n)
{
	*n = c->epoch == 1 ? c->n : c->n_founders;
	return c->epoch == 1 ? c->custodian : c->founder;
}

uint64_t campaign_next_canary(const struct campaign *c)
{
	return c->attempt + (uint64_t)c->n_canaries;
}

const char *campaign_word(const struct campaign *c)
{
	if (c->ending == ENDING_ABANDONED && c->state < C_SEALED)
		return "abandoned";
	return c->stalled ? "stalled" : campaign_state_word(c->state);
}

bool campaign_over(const struct campaign *c)
{
	return c->state == C_OPENED || (c->ending == ENDING_ABANDONED && c->state < C_SEALED);
}

bool campaign_reached(const struct campaign *c, int64_t slot)
{
	return c->ending == ENDING_NONE || c->slot[slot].freeze_seq != NO_SEQ;
}

const char *campaign_ending_word(enum campaign_ending ending)
{
	return ending == ENDING_EARLY ? "closed early" : ending == ENDING_ABANDONED ? "abandoned" : "";
}

bool campaign_full_opening(const struct campaign *c)
{
	for (int i = 0; i < c->n_openings; i++) {
		if (c->opening[i].scope == SCOPE_FULL)
			return true;
	}
	return false;
}

static enum qb_status later_group(const struct epoch_proof *p, struct custody_group *g, struct qb_error *e)
{
	struct deal *deals = QB_NEW_ARRAY(struct deal, g->k);
	enum qb_status st = QB_OK;
	const struct custody_group *old = &p->context.old;
	if (old->epoch != g->epoch || old->n != g->n || old->k != g->k || memcmp(old->th, g->th, 64) != 0 ||
	    memcmp(old->s, g->s, POINT_BYTES) != 0 || memcmp(old->y, g->y, g->n * sizeof g->y[0]) != 0)
		st = qb_fail(e, QB_CRYPTO, "group key", "do not trust this ledger",
		             "a resharing does not follow from the group before it");
	for (uint32_t i = 0; st == QB_OK && i < g->k; i++)
		st = reshare_parse(&p->context, p->proof.deal[i].data, p->proof.deal[i].len, &deals[i], e);
	if (st == QB_OK)
		st = reshare_certificate_verify(&p->context, deals, p->proof.certificate.data, p->proof.certificate.len,
		                                g, e);
	qb_free(deals);
	return st;
}

enum qb_status campaign_certified_group(const struct campaign *c, struct custody_group *out, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	if (c->founding.certificate.len == 0 || c->state < C_CERTIFIED)
		return qb_fail(e, QB_CONFLICT, "group key",
		               "wait until every custodian has run quietbell campaign keygen",
		               "not all custodians have certified it");
	struct deal *deals = QB_NEW_ARRAY(struct deal, (size_t)c->n_founders);
	for (int i = 0; st == QB_OK && i < c->n_founders; i++)
		st = deal_parse(&c->context, c->founding.deal[i].data, c->founding.deal[i].len, &deals[i], e);
	if (st == QB_OK)
		st = keygen_certificate_verify(&c->context, deals, c->founding.certificate.data,
		                               c->founding.certificate.len, out, e);
	for (uint64_t i = 0; st == QB_OK && i + 1 < c->epoch; i++)
		st = later_group(&c->later[i], out, e);
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
