/* The register, out of the projection of a verified ledger. */
#include "client/cli/register.h"

#include <stdio.h>

#include "server/base/clock.h"
#include "server/base/text.h"

static json_t *ending(const struct campaign *k)
{
	json_t *j = json_object();
	json_object_set_new(j, "how", json_string(campaign_ending_word(k->ending)));
	json_object_set_new(j, "by", json_string(k->ended_by));
	json_object_set_new(j, "why", json_string(k->ended_why));
	json_object_set_new(j, "gps", json_real((double)k->ended_ns / 1e9));
	return j;
}

json_t *register_of(const struct view *v)
{
	json_t *list = json_array();
	for (int i = 0; i < v->n_campaigns; i++) {
		const struct campaign *k = v->campaign[i];
		char utc[40];
		json_t *j = json_object();
		json_object_set_new(j, "name", json_string(k->name));
		json_object_set_new(j, "id", json_hex_new(k->id, 16));
		json_object_set_new(j, "state", json_string(campaign_word(k)));
		json_object_set_new(j, "phase", json_string(plan_phase_word(k->plan->phase)));
		json_object_set_new(j, "drafted_utc", json_string(clock_utc_text(k->drafted_ns, utc, sizeof utc)));
		json_object_set_new(j, "drafted_gps", json_real((double)k->drafted_ns / 1e9));
		json_object_set_new(j, "drafted_by", json_string(k->drafted_by));
		json_object_set_new(j, "slots", json_integer(k->n_slots));
		json_object_set_new(j, "key_attempt", json_integer((json_int_t)k->attempt));
		json_object_set_new(j, "sealing_attempt", json_integer((json_int_t)k->sealing_attempt));
		json_object_set_new(j, "ended", k->ending == ENDING_NONE ? json_null() : ending(k));
		json_array_append_new(list, j);
	}
	return list;
}

static json_t *names_of(const struct custodian *list, int n)
{
	json_t *names = json_array();
	for (int i = 0; i < n; i++)
		json_array_append_new(names, json_string(list[i].party->name));
	return names;
}

json_t *register_custody(const struct campaign *k)
{
	json_t *j = json_object(), *absent = json_array(), *owed = json_array();
	int n;
	const struct custodian *drawers = campaign_drawers(k, &n);
	json_object_set_new(j, "needed", json_integer(k->k));
	json_object_set_new(j, "custodians", names_of(k->custodian, k->n));
	json_object_set_new(j, "drew", names_of(drawers, n));
	json_object_set_new(j, "resharings", json_integer((json_int_t)k->epoch - 1));
	json_object_set_new(j, "sealing_attempt", json_integer((json_int_t)k->sealing_attempt));
	json_object_set_new(j, "margin", k->canary_seq != NO_SEQ ? json_integer(campaign_margin(k)) : json_null());
	json_object_set_new(j, "rehearsed_gps",
	                    k->canary_seq != NO_SEQ ? json_real((double)k->canary_ns / 1e9) : json_null());
	for (int i = 0; i < k->n; i++) {
		if (campaign_missed(k, i) > 0) {
			json_t *x = json_object();
			json_object_set_new(x, "name", json_string(k->custodian[i].party->name));
			json_object_set_new(x, "rehearsals", json_integer(campaign_missed(k, i)));
			json_array_append_new(absent, x);
		}
	}
	for (int i = 0; i < k->n_owed; i++)
		json_array_append_new(owed, json_string(k->owed[i].party->name));
	json_object_set_new(j, "missed", absent);
	json_object_set_new(j, "erasures_owed", owed);
	json_object_set_new(j, "failures", campaign_failures(k));
	return j;
}
