/* Campaigns: drafting from a plan, the list, and the state object that clients poll. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

static enum qb_status fetch_file(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	const char *text = json_string_value(json_object_get((const json_t *)state, name));
	if (text == NULL)
		return qb_fail(e, QB_NOT_FOUND, name, "send it with the plan", "the plan names this file");
	buf_text(out, text);
	return QB_OK;
}

static enum qb_status check_people(struct ops *o, const struct drill_plan *plan, struct qb_error *e)
{
	for (int i = 0; i < plan->n_people; i++) {
		const struct plan_person *p = &plan->person[i];
		const struct view_party *party = view_party_named(&o->view, p->name);
		const char *role = p->duty == DUTY_SPARE ? wire_role_word(ROLE_DRIVER) : plan_duty_word(p->duty);
		if (party == NULL || party->retired || strcmp(wire_role_word(party->role), role) != 0)
			return qb_fail(e, QB_REFUSED, "plan: parties",
			               "invite and enrol every person in the role of the plan first",
			               "'%s' is not enrolled as %s", p->name, role);
	}
	return people_check_plan(o, plan, e);
}

static enum qb_status check_plan(struct ops *o, const struct accepted *a, struct qb_error *e)
{
	struct drill_plan *plan = NULL;
	struct plan_findings findings = {0};
	const char *text = wire_entry_text(&a->entry, "plan");
	enum qb_status st =
	    plan_parse(text, strlen(text), "plan", fetch_file, (void *)wire_entry_json(&a->entry, "files"), &plan, e);
	if (st == QB_OK)
		st = plan_check(plan, &findings, e);
	plan_findings_free(&findings);
	if (st == QB_OK && o->rehearsal_clock && plan->phase != PLAN_REHEARSAL)
		st = qb_fail(e, QB_REFUSED, "plan: phase",
		             "write phase: rehearsal, or use a service with the system clock",
		             "this service runs on a rehearsal clock");
	if (st == QB_OK && view_campaign(&o->view, plan->campaign) != NULL)
		st = qb_fail(e, QB_CONFLICT, "plan: campaign", "choose another name",
		             "a campaign '%s' was drafted before", plan->campaign);
	if (st == QB_OK)
		st = check_people(o, plan, e);
	if (st == QB_OK && plan->slots.start_gps_ns <= now_locked(o))
		st = qb_fail(e, QB_REFUSED, "plan: starts", "choose a later stretch", "the stretch has begun already");
	plan_free(&plan);
	return st;
}

enum qb_status case_draft(struct ops *o, struct campaign *none, const struct ops_call *call, struct ops_reply *reply,
                          struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, none, &a, e);
	if (st != QB_OK)
		return st;
	st = check_plan(o, &a, e);
	if (st == QB_OK)
		st = enter_one(o, "draft", call, &a, reply, e);
	if (st == QB_OK) {
		const struct campaign *c = o->view.campaign[o->view.n_campaigns - 1];
		json_object_set_new(reply->doc, "id", json_hex_new(c->id, 16));
		json_object_set_new(reply->doc, "name", json_string(c->name));
	}
	accepted_free(&a);
	return st;
}

enum qb_status case_campaigns_list(struct ops *o, struct campaign *none, const struct ops_call *call,
                                   struct ops_reply *reply, struct qb_error *e)
{
	(void)none;
	(void)call;
	(void)e;
	json_t *list = json_array();
	for (int i = 0; i < o->view.n_campaigns; i++) {
		const struct campaign *c = o->view.campaign[i];
		json_t *j = json_object();
		json_object_set_new(j, "id", json_hex_new(c->id, 16));
		json_object_set_new(j, "name", json_string(c->name));
		json_object_set_new(j, "state", json_string(campaign_word(c)));
		json_object_set_new(j, "phase", json_string(plan_phase_word(c->plan->phase)));
		json_array_append_new(list, j);
	}
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "campaigns", list);
	return QB_OK;
}

static json_t *seq_or_null(int64_t seq)
{
	return seq == NO_SEQ ? json_null() : json_integer(seq);
}

static void put_custodians(json_t *doc, const struct campaign *c)
{
	json_t *people = json_array(), *deals = json_array(), *certs = json_array(), *rehearsals = json_array(),
	       *commitments = json_array(), *contributions = json_array();
	for (int i = 0; i < c->n; i++) {
		const struct custodian *cu = &c->custodian[i];
		json_t *p = json_object();
		json_object_set_new(p, "name", json_string(cu->party->name));
		json_object_set_new(p, "signing_key", json_hex_new(cu->party->signing_key, 32));
		json_object_set_new(p, "exchange_key", json_hex_new(cu->party->exchange_key, 32));
		json_object_set_new(p, "index", json_integer(i + 1));
		json_array_append_new(people, p);
		json_array_append_new(deals, seq_or_null(cu->deal_seq));
		json_array_append_new(certs, seq_or_null(cu->certify_seq));
		json_object_set_new(p, "missed_rehearsals", json_integer(campaign_missed(c, i)));
		json_array_append_new(rehearsals, seq_or_null(cu->rehearsal_seq));
		json_array_append_new(commitments, seq_or_null(cu->commitment_seq));
		json_array_append_new(contributions, seq_or_null(cu->contribution_seq));
	}
	json_object_set_new(doc, "custodians", people);
	json_object_set_new(doc, "deals", deals);
	json_object_set_new(doc, "certificates", certs);
	json_object_set_new(doc, "rehearsals", rehearsals);
	json_object_set_new(doc, "commitments", commitments);
	json_object_set_new(doc, "contributions", contributions);
}

static void put_counts(json_t *doc, const struct campaign *c)
{
	json_t *stations = json_array(), *prekeys = json_object(), *counts = json_object(), *openings = json_array();
	json_int_t reports = 0;
	for (int64_t i = 0; i < c->n_slots; i++)
		reports += __builtin_popcount(c->slot[i].reported);
	for (int i = 0; i < c->plan->network->n_stations; i++) {
		const char *name = c->plan->network->stations[i].name;
		json_array_append_new(stations, json_string(name));
		json_object_set_new(prekeys, name, json_boolean(c->prekeys[i][RECIPE_MAIN]));
	}
	for (int i = 0; i < c->n_openings; i++) {
		if (c->opening[i].scope == SCOPE_FULL)
			json_array_append_new(openings, json_hex_new(c->opening[i].id, 16));
	}
	json_object_set_new(counts, "holds", json_integer(c->n_holds));
	json_object_set_new(counts, "stops", json_integer(c->n_stops));
	json_object_set_new(counts, "reports", json_integer(reports));
	json_object_set_new(doc, "stations", stations);
	json_object_set_new(doc, "prekeys", prekeys);
	json_object_set_new(doc, "counts", counts);
	json_object_set_new(doc, "openings", openings);
}

/* Attempts that ended without effect, who was left out, and who has still to erase. */
static void put_failures(json_t *doc, const struct campaign *c)
{
	json_t *owed = json_array();
	for (int i = 0; i < c->n_owed; i++) {
		json_t *j = json_object();
		json_object_set_new(j, "name", json_string(c->owed[i].party->name));
		json_object_set_new(j, "epoch", json_integer((json_int_t)c->owed[i].epoch));
		json_array_append_new(owed, j);
	}
	json_object_set_new(doc, "failed_attempts", campaign_failures(c));
	json_object_set_new(doc, "erasures_owed", owed);
}

enum qb_status case_campaign(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                             struct qb_error *e)
{
	(void)o;
	(void)call;
	(void)e;
	json_t *d = json_object();
	json_object_set_new(d, "id", json_hex_new(c->id, 16));
	json_object_set_new(d, "name", json_string(c->name));
	json_object_set_new(d, "phase", json_string(plan_phase_word(c->plan->phase)));
	json_object_set_new(d, "state", json_string(campaign_word(c)));
	json_object_set_new(d, "rehearsal", json_boolean(c->rehearsal_clock || c->plan->phase == PLAN_REHEARSAL));
	json_object_set_new(d, "slots", json_integer(c->n_slots));
	json_object_set_new(d, "starts_gps", json_gps_new(c->plan->slots.start_gps_ns));
	json_object_set_new(d, "ends_gps", json_gps_new(c->plan->slots.end_gps_ns));
	json_object_set_new(d, "slot_s", json_real((double)c->plan->slots.slot_ns / 1e9));
	json_object_set_new(d, "lead_s", json_real((double)c->plan->slots.lead_ns / 1e9));
	json_object_set_new(d, "plan", json_integer(c->plan_seq));
	json_object_set_new(d, "attempt", json_integer((json_int_t)c->attempt));
	json_object_set_new(d, "epoch", json_integer((json_int_t)c->epoch));
	json_object_set_new(d, "margin", c->canary_seq == NO_SEQ ? json_null() : json_integer(campaign_margin(c)));
	json_object_set_new(d, "reshare",
	                    c->reshare.under_way ? json_integer((json_int_t)c->reshare_attempt) : json_null());
	json_object_set_new(d, "repair",
	                    c->repair.under_way ? json_integer((json_int_t)c->repair_attempt) : json_null());
	put_failures(d, c);
	json_object_set_new(d, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
	json_object_set_new(d, "needed", json_integer(c->k));
	put_custodians(d, c);
	json_object_set_new(d, "canary", seq_or_null(c->canary_seq));
	json_object_set_new(d, "sealing", seq_or_null(c->sealing_seq));
	json_object_set_new(d, "sealed", seq_or_null(c->sealed_seq));
	json_object_set_new(d, "closing", seq_or_null(c->closing_seq));
	json_object_set_new(d, "ending",
	                    c->ending == ENDING_NONE ? json_null() : json_string(campaign_ending_word(c->ending)));
	json_object_set_new(d, "group_key", c->has_group ? json_hex_new(c->group.s, 32) : json_null());
	json_object_set_new(d, "transcript", c->has_group ? json_hex_new(c->group.th, 64) : json_null());
	json_object_set_new(d, "claims", c->state >= C_CLOSED ? json_integer(c->n_claims) : json_null());
	put_counts(d, c);
	reply->http_status = 200;
	reply->doc = d;
	return QB_OK;
}
