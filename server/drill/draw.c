/* The campaign's draw and the slot's draw, attempt by attempt. */
#include "server/drill/draw.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/base/clock.h"
#include "server/drill/draw_parts.h"

/* Places of the variates; see draw.h. */
enum { U_LIVE = 0, U_FAMILY = 1, U_ARRIVAL = 2, U_PLACE = 3, U_LOUD = 8, U_PARAMETER = 9 };
_Static_assert(U_PARAMETER + POPULATION_MAX <= DRAW_STRIDE, "an attempt's variates fit its stride");

bool draw_campaign_empty(const struct drill_plan *plan, const struct draw_uniforms *u)
{
	return u->uniform(u->state, 0) < plan->empty_chance;
}

static const struct plan_family *pick_family(const struct drill_plan *plan, double u)
{
	double sum = 0, so_far = 0;
	for (int i = 0; i < plan->n_families; i++)
		sum += plan->family[i].weight;
	for (int i = 0; i < plan->n_families - 1; i++) {
		so_far += plan->family[i].weight;
		if (u * sum < so_far)
			return &plan->family[i];
	}
	return &plan->family[plan->n_families - 1];
}

/* Uniform over the times that keep the whole drive inside the guards. */
static enum qb_status draw_arrival(struct draw_attempt *a, int64_t slot, double u, struct qb_error *e)
{
	int64_t from, to;
	double before, after;
	enum qb_status st = draw_drive_reach(a->plan, &a->source, &before, &after, e);
	if (st != QB_OK)
		return st;
	bool room = slots_window(&a->plan->slots, slot, &from, &to);
	from += (int64_t)ceil(before * (double)NS_PER_S);
	to -= (int64_t)ceil(after * (double)NS_PER_S);
	if (!room || from > to)
		return qb_fail(e, QB_RANGE, a->plan->campaign, "lengthen the slot or shorten the guard",
		               "a drive of family '%s' does not fit its slot", a->family->name);
	a->source.arrival_gps_ns = from + (int64_t)floor(u * (double)(to - from));
	return QB_OK;
}

/* One attempt: everything drawn and every station's drive computed. within: no limit is exceeded anywhere. */
static enum qb_status attempt(struct draw_attempt *a, int64_t slot, int number, const struct draw_uniforms *u,
                              struct drill_truth *t, bool *within, char limit[80], struct qb_error *e)
{
	const uint64_t base = (uint64_t)number * DRAW_STRIDE;
	double us[POPULATION_MAX];
	for (int i = 0; i < a->family->parameters.n; i++)
		us[i] = u->uniform(u->state, base + U_PARAMETER + (uint64_t)i);
	population_sample(&a->family->parameters, us, a->values);
	for (int i = 0; i < a->family->place.n; i++) {
		bool drawn = i <= PLACE_PHASE;
		a->place[i] = dist_sample(&a->family->place.p[i].dist, NULL,
		                          drawn ? u->uniform(u->state, base + U_PLACE + (uint64_t)i) : 0.5);
	}
	enum qb_status st = draw_fill(a, e);
	if (st == QB_OK)
		st = draw_arrival(a, slot, u->uniform(u->state, base + U_ARRIVAL), e);
	if (st == QB_OK)
		st = draw_loudness(a, u->uniform(u->state, base + U_LOUD), e);
	*within = true;
	t->n_stations = a->plan->network->n_stations;
	for (int i = 0; st == QB_OK && i < t->n_stations; i++) {
		bool ok = true;
		char which[80] = "";
		t->station[i].snr = a->station_snr[i];
		st = draw_station(a->plan, &a->source, i, &t->station[i], &ok, which, e);
		if (!ok && *within)
			(void)snprintf(limit, 80, "%s", which);
		*within = *within && ok;
	}
	return st;
}

enum qb_status draw_slot(const struct drill_plan *plan, bool empty, int64_t slot, const struct draw_uniforms *u,
                         struct drill_truth *out, struct qb_error *e)
{
	CHECK(slot >= 0 && slot < slots_count(&plan->slots) && plan->n_families > 0);
	bool live = u->uniform(u->state, U_LIVE) < plan_live_chance(plan);
	bool within = false;
	char limit[80] = "";
	struct draw_attempt a = {.plan = plan, .family = pick_family(plan, u->uniform(u->state, U_FAMILY))};
	*out = (struct drill_truth){.slot = slot,
	                            .slot_start_ns = slots_start(&plan->slots, slot),
	                            .slot_ns = plan->slots.slot_ns,
	                            .live = live && !empty,
	                            .source_frame = a.family->source_frame};
	out->gain = out->live ? 1 : 0;
	(void)snprintf(out->name, sizeof out->name, "%s", a.family->name);
	for (int i = 0; i <= plan->redraws && !within; i++) {
		enum qb_status st = attempt(&a, slot, i, u, out, &within, limit, e);
		if (st != QB_OK)
			return st;
		out->redraws = i;
	}
	if (!within)
		return qb_fail(e, QB_RANGE, plan->campaign, "draw quieter signals or allow a larger drive",
		               "family '%s' has no drive within the limits in %d redraws: %s", a.family->name,
		               plan->redraws, limit);
	out->source = a.source;
	out->redshift = a.redshift;
	out->network_snr = a.network_snr;
	out->has_weight = draw_weight(&a, &out->weight_mpc3);
	return QB_OK;
}
