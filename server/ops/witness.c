/*
 * Witness channels: what could tell live from null at a station. The plan lists those that are known; before an
 * observing campaign is sealed, somebody who looked at the station signs that these are all, and which of them are
 * masked.
 */
#include <string.h>

#include "server/ops/internal.h"

static bool has_name(const json_t *names, const char *name)
{
	size_t i;
	json_t *v;
	json_array_foreach(names, i, v)
	{
		if (strcmp(json_string_value(v), name) == 0)
			return true;
	}
	return false;
}

static enum qb_status check_statement(const struct campaign *c, const struct ops_call *call, const struct accepted *a,
                                      struct qb_error *e)
{
	const char *station = wire_entry_text(&a->entry, "station");
	const json_t *channels = wire_entry_json(&a->entry, "channels"), *masked = wire_entry_json(&a->entry, "masked");
	size_t i;
	json_t *v;
	int s = plan_station(c->plan, station);
	if (s < 0)
		return qb_fail(e, QB_NOT_FOUND, "station", "use a station of the plan", "'%s' is not in the network",
		               station);
	if (campaign_role(c, call->who) == ROLE_DRIVER && station_of_driver(c, call->who->name) != s)
		return qb_fail(e, QB_REFUSED, "station", NULL, "%s drives another station", call->who->name);
	json_array_foreach(masked, i, v)
	{
		if (!has_name(channels, json_string_value(v)))
			return qb_fail(e, QB_FORMAT, "masked", "list it under channels too",
			               "'%s' is no channel of the statement", json_string_value(v));
	}
	for (int w = 0; w < c->plan->n_witnesses; w++) {
		const struct plan_witness *p = &c->plan->witness[w];
		if (strcmp(p->station, station) != 0)
			continue;
		if (!has_name(channels, p->channel))
			return qb_fail(e, QB_REFUSED, "channels",
			               "list every channel of the plan, and what else was found",
			               "the plan's channel '%s' is missing", p->channel);
		if (p->masked && !has_name(masked, p->channel))
			return qb_fail(e, QB_REFUSED, "masked", "mask it, or draft a plan that says that it is not",
			               "the plan says that '%s' is masked", p->channel);
	}
	return QB_OK;
}

enum qb_status case_witness(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	st = check_statement(c, call, &a, e);
	if (st == QB_OK)
		st = enter_one(o, "witness-statement", call, &a, reply, e);
	accepted_free(&a);
	return st;
}
