/* The rules about families: names, conditional bounds, room in the slot, the audit's target population. */
#include <stdio.h>
#include <string.h>

#include "server/base/clock.h"
#include "server/drill/draw.h"
#include "server/drill/plan_check.h"

/* A conditional bound must leave something whatever the earlier parameter is. */
static void check_conditions(struct plan_checker *c, int i)
{
	const struct population *pop = &c->plan->family[i].parameters;
	for (int j = 0; j < pop->n; j++) {
		const struct dist *d = &pop->p[j].dist;
		double low = d->from.value, high = d->to.value, unused;
		if (d->from.parameter < 0 && d->to.parameter < 0)
			continue;
		if (d->from.parameter >= 0)
			dist_extremes(pop, &pop->p[d->from.parameter].dist, &unused, &low);
		if (d->to.parameter >= 0)
			dist_extremes(pop, &pop->p[d->to.parameter].dist, &high, &unused);
		if (low > high)
			check_add(c, PLAN_REFUSAL, "conditional-bound",
			          check_node(c, check_family_node(c, i), pop->p[j].key, NULL),
			          "make the bounds meet for every value of the earlier parameter",
			          "'%s' of family '%s' can be left without room: from %.10g, to %.10g", pop->p[j].key,
			          c->plan->family[i].name, low, high);
	}
}

static enum qb_status check_fit(struct plan_checker *c, int i, struct qb_error *e)
{
	const struct plan_family *f = &c->plan->family[i];
	const struct slots *s = &c->plan->slots;
	double before, after, room = (double)(s->slot_ns - 2 * s->guard_ns) / (double)NS_PER_S;
	enum qb_status st = draw_longest_drive(c->plan, f, &before, &after, e);
	if (st == QB_OK && before + after > room)
		check_add(c, PLAN_REFUSAL, "family-fits", check_family_node(c, i),
		          "lengthen the slot, shorten the guard, or draw shorter signals",
		          "the longest drive of family '%s' takes %.4g s, a slot less its guards has %.4g s", f->name,
		          before + after, room);
	return st;
}

/* The weight of the time-volume needs every parameter of the target population in the family's own draw. */
static void check_target(struct plan_checker *c)
{
	const struct population *target = &c->plan->audit.population;
	const struct yaml_node *at = check_node(c, NULL, "audit", "population", NULL);
	int weighted = 0;
	for (int i = 0; i < c->plan->n_families; i++)
		weighted += draw_family_has_weight(c->plan, &c->plan->family[i]);
	if (target->n > 0 && weighted == 0)
		check_add(c, PLAN_REFUSAL, "target-population", at,
		          "name only parameters that a family with a distance draws",
		          "no family draws all the parameters of audit.population");
	for (int i = 0; i < c->plan->n_families && target->n > 0; i++) {
		const struct plan_family *f = &c->plan->family[i];
		if (!draw_family_has_weight(c->plan, f))
			continue;
		for (int j = 0; j < target->n; j++) {
			double lo, hi, from, to;
			int k = population_find(&f->parameters, target->p[j].key);
			dist_extremes(target, &target->p[j].dist, &from, &to);
			dist_extremes(&f->parameters, &f->parameters.p[k].dist, &lo, &hi);
			if (from < lo || to > hi)
				check_add(
				    c, PLAN_WARNING, "target-covered",
				    check_node(c, NULL, "audit", "population", target->p[j].key, NULL),
				    "draw from the whole range of the target",
				    "'%s' of the target reaches from %.10g to %.10g, family '%s' only from %.10g to "
				    "%.10g: the time-volume will be of that part",
				    target->p[j].key, from, to, f->name, lo, hi);
		}
	}
}

enum qb_status plan_check_families(struct plan_checker *c, struct qb_error *e)
{
	const struct drill_plan *p = c->plan;
	enum qb_status st = QB_OK;
	for (int i = 0; i < p->n_families && st == QB_OK; i++) {
		for (int j = 0; j < i; j++) {
			if (strcmp(p->family[i].name, p->family[j].name) == 0)
				check_add(c, PLAN_REFUSAL, "family-name", check_family_node(c, i), "name it otherwise",
				          "two families are called '%s'", p->family[i].name);
		}
		check_conditions(c, i);
		st = check_fit(c, i, e);
	}
	check_target(c);
	return st;
}
