/* From a matched route to its use case: the role check of every route, in one place, by the table. Default deny. */
#include <string.h>

#include "server/ops/internal.h"

static use_case *const cases[R_COUNT] = {
    [R_SERVICE] = case_service,
    [R_PARTIES_GET] = case_parties_list,
    [R_PARTIES_POST] = case_parties_post,
    [R_CAMPAIGNS_GET] = case_campaigns_list,
    [R_CAMPAIGNS_POST] = case_draft,
    [R_CAMPAIGN] = case_campaign,
    [R_KEYGEN] = case_keygen,
    [R_SEAL] = case_seal,
    [R_SEALER] = case_sealer,
    [R_SEALER_COLLECT] = case_sealer_collect,
    [R_SEALER_DELIVER] = case_sealer_deliver,
    [R_CONTRIBUTIONS] = case_contribution,
    [R_REHEARSALS] = case_rehearsal,
    [R_RECORDS] = case_records,
    [R_SLOTS] = case_slots,
    [R_SLOT] = case_slot,
    [R_HOLDS] = case_hold,
    [R_HOLD_LIFT] = case_hold_lift,
    [R_STOPS] = case_stop,
    [R_STOP_LIFT] = case_stop_lift,
    [R_SEGMENTS] = case_segments,
    [R_WITNESSES] = case_witness,
    [R_PREKEYS] = case_prekeys,
    [R_RECIPE] = case_recipe,
    [R_RECIPE_KEY] = case_recipe_key,
    [R_NOTES] = case_note,
    [R_REPORT] = case_report,
    [R_CLAIMS_POST] = case_claim,
    [R_CLAIMS_GET] = case_claims_list,
    [R_CLAIM_WITHDRAW] = case_claim_withdraw,
    [R_CLAIM_MILESTONES] = case_milestone,
    [R_GUESSES] = case_guess,
    [R_INCIDENTS] = case_incident,
    [R_RECEIPTS] = case_receipts,
    [R_CLOSE] = case_close,
    [R_ABANDON] = case_abandon,
    [R_SIGNATURES] = case_sign,
    [R_OPENINGS_POST] = case_opening_request,
    [R_OPENINGS_GET] = case_openings_list,
    [R_OPENING] = case_opening,
    [R_OPENING_SHARES] = case_opening_shares,
    [R_BUNDLE] = case_bundle,
    [R_HEAD] = case_head,
    [R_ENTRIES] = case_entries,
    [R_INCLUSION] = case_inclusion,
    [R_CONSISTENCY] = case_consistency,
    [R_COSIGNATURES] = case_cosign,
    [R_CLOCK] = case_clock,
};

static enum qb_status check_role(struct ops *o, const struct ops_call *call, const struct campaign *c,
                                 struct qb_error *e)
{
	const struct wire_route *r = call->match->route;
	enum wire_role role = call->who == NULL ? ROLE_NONE : call->who->role;
	(void)o;
	if (call->who != NULL && c != NULL && (role = campaign_role(c, call->who)) == ROLE_NONE)
		return qb_fail(e, QB_REFUSED, NULL, NULL, "%s has no part in this campaign", call->who->name);
	/* Who is to take office, or has left it and must still say that the share is erased, has that part alone. */
	bool office = r->id != R_KEYGEN && r->id != R_REHEARSALS && r->id != R_CAMPAIGN && r->id != R_SEALER;
	if (c != NULL && role == ROLE_CUSTODIAN && office && custodian_index(c, call->who->name) < 0)
		return qb_fail(e, QB_REFUSED, NULL, NULL, "%s is not a custodian in office", call->who->name);
	if ((r->roles & ROLE_BIT(role)) == 0)
		return qb_fail(e, QB_REFUSED, NULL, NULL, "the role '%s' may not do this", wire_role_word(role));
	return QB_OK;
}

static enum qb_status run(struct ops *o, const struct ops_call *call, struct ops_reply *reply, struct qb_error *e)
{
	const struct wire_route *r = call->match->route;
	struct campaign *c = NULL;
	enum qb_status st;
	if (r->in_campaign) {
		/* Without a part in any campaign nobody learns whether this one exists. */
		if (call->who == NULL || (r->roles & ROLE_BIT(call->who->role)) == 0)
			return check_role(o, call, NULL, e);
		c = view_campaign(&o->view, call->match->parts[0]);
		if (c == NULL)
			return qb_fail(e, QB_NOT_FOUND, NULL, "see quietbell campaign list",
			               "there is no such campaign");
	}
	if ((st = check_role(o, call, c, e)) != QB_OK)
		return st;
	if (c != NULL && campaign_over(c) && c->state < C_SEALED && strcmp(r->method, "POST") == 0)
		return qb_fail(e, QB_CONFLICT, c->name, "draft a new plan", "was abandoned by %s: %.200s", c->ended_by,
		               c->ended_why);
	if (c != NULL && (st = campaign_due(o, c, e)) != QB_OK)
		return st;
	return cases[r->id](o, c, call, reply, e);
}

enum qb_status ops_dispatch(struct ops *o, const struct ops_call *call, struct ops_reply *reply, struct qb_error *e)
{
	*reply = (struct ops_reply){0};
	if (call->match->route->id >= R_COUNT || cases[call->match->route->id] == NULL)
		return qb_fail(e, QB_NOT_FOUND, NULL, NULL, "there is nothing here");
	pthread_mutex_lock(&o->lock);
	enum qb_status st = run(o, call, reply, e);
	pthread_mutex_unlock(&o->lock);
	if (st != QB_OK) {
		json_decref(reply->doc);
		reply->doc = NULL;
		buf_free(&reply->bytes);
	}
	return st;
}
