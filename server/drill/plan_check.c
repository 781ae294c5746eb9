/* The rules of a valid plan: each looks at one thing, none stops the others. */
#include "server/drill/plan_check.h"

#include <inttypes.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"

#define LEAST_CHANCE_OF_NONE 0.02

const struct yaml_node *check_node(const struct plan_checker *c, struct yaml_node *from, ...)
{
	struct yaml_node *n = from != NULL ? from : c->plan->doc->root;
	const char *key;
	va_list ap;
	va_start(ap, from);
	while ((key = va_arg(ap, const char *)) != NULL) {
		struct yaml_node *next = yaml_find(n, key);
		if (next == NULL)
			break;
		n = next;
	}
	va_end(ap);
	return n;
}

struct yaml_node *check_family_node(const struct plan_checker *c, int i)
{
	struct yaml_node *list = yaml_find(yaml_find(c->plan->doc->root, "drills"), "families");
	return list != NULL && i < list->n_members ? list->members[i] : c->plan->doc->root;
}

void check_add(struct plan_checker *c, enum plan_severity severity, const char *rule, const struct yaml_node *at,
               const char *mend, const char *fmt, ...)
{
	struct plan_findings *f = c->out;
	f->finding = qb_realloc(f->finding, (size_t)f->n + 1, sizeof f->finding[0]);
	struct plan_finding *x = &f->finding[f->n++];
	va_list ap;
	*x = (struct plan_finding){.severity = severity};
	f->n_refusals += severity == PLAN_REFUSAL;
	(void)snprintf(x->rule, sizeof x->rule, "%s", rule);
	(void)snprintf(x->mend, sizeof x->mend, "%s", mend);
	yaml_where(c->plan->doc, at, x->where, sizeof x->where);
	va_start(ap, fmt);
	(void)vsnprintf(x->what, sizeof x->what, fmt, ap);
	va_end(ap);
}

static double seconds(int64_t ns)
{
	return (double)ns / (double)NS_PER_S;
}

static void check_stretch(struct plan_checker *c)
{
	const struct slots *s = &c->plan->slots;
	int64_t n = slots_count(s);
	if (s->end_gps_ns <= s->start_gps_ns) {
		check_add(c, PLAN_REFUSAL, "stretch-order", check_node(c, NULL, "ends", NULL),
		          "set 'ends' after 'starts'", "the stretch ends before it starts");
		return;
	}
	if (n == 0 || (s->end_gps_ns - s->start_gps_ns) % s->slot_ns != 0)
		check_add(c, PLAN_REFUSAL, "slot-tiling", check_node(c, NULL, "slot", NULL),
		          "change the slot or 'ends' so that a whole number of slots fills the stretch",
		          "slots of %.10g s do not divide the stretch of %.10g s", seconds(s->slot_ns),
		          seconds(s->end_gps_ns - s->start_gps_ns));
	if (n > SLOTS_MAX)
		check_add(c, PLAN_REFUSAL, "slot-count", check_node(c, NULL, "slot", NULL),
		          "lengthen the slot or split the campaign",
		          "the stretch has %" PRId64 " slots; at most %" PRId64 " are accepted", n, SLOTS_MAX);
	if (s->slot_ns > 3600 * NS_PER_S)
		check_add(c, PLAN_WARNING, "slot-long", check_node(c, NULL, "slot", NULL), "use slots of 1 h or less",
		          "slots of %.10g s make foreknowledge and spot openings cost more", seconds(s->slot_ns));
	if (2 * s->guard_ns >= s->slot_ns)
		check_add(c, PLAN_REFUSAL, "guard-room", check_node(c, NULL, "drills", "guard", NULL),
		          "shorten the guard or lengthen the slot",
		          "two guards of %.10g s fill the whole slot of %.10g s", seconds(s->guard_ns),
		          seconds(s->slot_ns));
	if (s->lead_ns == 0)
		check_add(c, PLAN_REFUSAL, "lead-zero", check_node(c, NULL, "lead", NULL),
		          "give the drivers some seconds", "a lead of 0 leaves a driver no time to prepare its drive");
	if (s->lead_ns > s->slot_ns)
		check_add(c, PLAN_WARNING, "lead-long", check_node(c, NULL, "lead", NULL),
		          "keep the lead below one slot",
		          "a lead of %.10g s lets a driver know more than the next slot", seconds(s->lead_ns));
	if (c->plan->batch_ns > s->end_gps_ns - s->start_gps_ns)
		check_add(c, PLAN_WARNING, "batch-long", check_node(c, NULL, "batch", NULL),
		          "shorten the batch cadence",
		          "hidden entries would first enter the ledger after the campaign (every %.10g s)",
		          seconds(c->plan->batch_ns));
}

static void check_matching(struct plan_checker *c)
{
	const struct plan_audit *a = &c->plan->audit;
	double guard = seconds(c->plan->slots.guard_ns);
	if (2 * guard < 4 * a->match_max_s)
		check_add(c, PLAN_REFUSAL, "guard-matching", check_node(c, NULL, "drills", "guard", NULL),
		          "lengthen the guard or narrow audit.match_max_s",
		          "neighbouring drills could be %.10g s apart, less than 4 x match_max_s = %.10g s", 2 * guard,
		          4 * a->match_max_s);
	if (a->match_base_s > a->match_max_s)
		check_add(c, PLAN_REFUSAL, "match-window", check_node(c, NULL, "audit", "match_base_s", NULL),
		          "make match_max_s the larger", "match_base_s %.10g exceeds match_max_s %.10g",
		          a->match_base_s, a->match_max_s);
	for (int i = 0; i < a->log_parameters.n; i++) {
		bool found = false;
		for (int j = 0; j < a->parameters.n; j++)
			found = found || strcmp(a->log_parameters.name[i], a->parameters.name[j]) == 0;
		if (!found)
			check_add(c, PLAN_REFUSAL, "log-parameters",
			          check_node(c, NULL, "audit", "log_parameters", NULL),
			          "add it to audit.parameters or remove it", "'%s' is not among audit.parameters",
			          a->log_parameters.name[i]);
	}
}

/* The node where a person was named. */
static const struct yaml_node *person_node(const struct plan_checker *c, const struct plan_person *p)
{
	static const char *const keys[DUTIES] = {"custodians", "reviewers",     "operators", "liaisons",
	                                         "drivers",    "spare_drivers", "pipelines"};
	const struct yaml_node *list = check_node(c, NULL, "parties", keys[p->duty], NULL);
	for (int i = 0; i < list->n_members; i++) {
		const struct yaml_node *m = list->members[i];
		bool same_post = m->key == NULL || strcmp(m->key, p->of) == 0;
		if (same_post && m->line == p->line && m->kind == YAML_SCALAR && strcmp(m->text, p->name) == 0)
			return m;
	}
	return list;
}

static void check_people(struct plan_checker *c)
{
	const struct drill_plan *p = c->plan;
	for (int i = 0; i < p->n_people; i++) {
		for (int j = 0; j < i; j++) {
			if (strcmp(p->person[i].name, p->person[j].name) != 0)
				continue;
			check_add(c, PLAN_REFUSAL, "one-side", person_node(c, &p->person[i]), "name another person",
			          "'%s' is %s and %s; one person has one side", p->person[i].name,
			          plan_duty_word(p->person[j].duty), plan_duty_word(p->person[i].duty));
			break;
		}
	}
	const struct yaml_node *needed = check_node(c, NULL, "parties", "custodians_needed", NULL);
	if (p->custodians > 32)
		check_add(c, PLAN_REFUSAL, "custodians", check_node(c, NULL, "parties", "custodians", NULL),
		          "name 2 to 32", "%d custodians are too many", p->custodians);
	if (p->custodians_needed < 2)
		check_add(c, PLAN_REFUSAL, "custodians-needed", needed, "ask for at least 2 of 3",
		          "%d custodian could open every record alone", p->custodians_needed);
	if (p->custodians_needed > p->custodians - 1)
		check_add(c, PLAN_REFUSAL, "custodians-needed", needed, "name one more custodian or need one less",
		          "%d of %d custodians are needed: one lost key would lose the campaign", p->custodians_needed,
		          p->custodians);
	else if (p->custodians >= 5 && p->custodians_needed > p->custodians - 2)
		check_add(c, PLAN_WARNING, "custodians-margin", needed, "need two fewer than there are",
		          "%d of %d custodians are needed: only one key may be lost", p->custodians_needed,
		          p->custodians);
}

static void check_stations(struct plan_checker *c)
{
	const struct drill_plan *p = c->plan;
	const struct yaml_node *drivers = check_node(c, NULL, "parties", "drivers", NULL);
	for (int s = 0; s < p->network->n_stations; s++) {
		const char *name = p->network->stations[s].name;
		bool found = false;
		for (int i = 0; i < p->n_people; i++)
			found = found || (p->person[i].duty == DUTY_DRIVER && strcmp(p->person[i].of, name) == 0);
		if (!found)
			check_add(c, PLAN_REFUSAL, "driver-missing", drivers, "add its driver",
			          "station '%s' of %s has no driver", name, p->network_file);
	}
	for (int i = 0; i < p->n_people; i++) {
		if ((p->person[i].duty == DUTY_DRIVER || p->person[i].duty == DUTY_SPARE) &&
		    plan_station(p, p->person[i].of) < 0)
			check_add(c, PLAN_REFUSAL, "driver-station", person_node(c, &p->person[i]),
			          "use a station of the network", "the station '%s' is not in %s", p->person[i].of,
			          p->network_file);
	}
	if (p->stations_needed > p->network->n_stations)
		check_add(c, PLAN_REFUSAL, "stations-needed", check_node(c, NULL, "stations_needed", NULL),
		          "need at most as many as there are", "%d stations are needed, the network has %d",
		          p->stations_needed, p->network->n_stations);
	for (int i = 0; i < p->n_witnesses; i++) {
		const struct plan_witness *w = &p->witness[i];
		const struct yaml_node *list = check_node(c, NULL, "witness_channels", NULL);
		if (plan_station(p, w->station) < 0)
			check_add(c, PLAN_REFUSAL, "witness-station", list->members[i], "use a station of the network",
			          "the station '%s' is not in %s", w->station, p->network_file);
		else if (!w->masked)
			check_add(c, PLAN_WARNING, "witness-masked", list->members[i], "mask it until the opening",
			          "channel '%s' of %s can tell live from null before the opening", w->channel,
			          w->station);
	}
}

static void check_calibrations(struct plan_checker *c)
{
	const struct drill_plan *p = c->plan;
	for (int s = 0; s < p->network->n_stations; s++) {
		const struct wave_station *w = &p->network->stations[s];
		if (!w->actuator.present)
			check_add(c, PLAN_REFUSAL, "actuator", check_node(c, NULL, "network", NULL),
			          "describe its actuator in the network file", "station '%s' of %s has no actuator",
			          w->name, p->network_file);
		else if (w->actuator.valid_from_gps_ns > p->slots.start_gps_ns ||
		         w->actuator.valid_to_gps_ns < p->slots.end_gps_ns)
			check_add(c, PLAN_REFUSAL, "calibration-valid", check_node(c, NULL, "network", NULL),
			          "use a calibration that covers the whole stretch",
			          "calibration '%s' of station '%s' is not valid over the whole campaign",
			          w->actuator.calibration_id, w->name);
	}
}

static void check_blindness(struct plan_checker *c)
{
	const struct drill_plan *p = c->plan;
	double none = plan_chance_of_none(p);
	int64_t n = slots_count(&p->slots);
	if (p->expected_live > (double)n)
		check_add(c, PLAN_REFUSAL, "expected-live", check_node(c, NULL, "drills", "expected_live", NULL),
		          "expect at most one a slot", "%.10g live slots are expected of %" PRId64, p->expected_live,
		          n);
	if (p->expected_live <= 0)
		check_add(c, PLAN_WARNING, "no-drills", check_node(c, NULL, "drills", "expected_live", NULL),
		          "expect some", "no slot will ever be live");
	if (none < LEAST_CHANCE_OF_NONE)
		check_add(c, p->phase == PLAN_OBSERVING ? PLAN_REFUSAL : PLAN_WARNING, "chance-of-none",
		          check_node(c, NULL, "drills", "empty_chance", NULL),
		          "raise empty_chance (0.1 is usual) so that zero is possible",
		          "the chance of no drill at all is %.2g, below %.2g: everybody knows that there are drills",
		          none, LEAST_CHANCE_OF_NONE);
}

static void check_alerts(struct plan_checker *c)
{
	if (c->plan->phase == PLAN_OBSERVING && !c->plan->has_sealer_host)
		check_add(c, PLAN_WARNING, "sealer-host", check_node(c, NULL, NULL), "name one with sealer_host",
		          "the sealer will run on the service's own machine, whose administrator could watch it");
	const struct plan_alerts *a = &c->plan->alerts;
	const struct yaml_node *at = check_node(c, NULL, "alerts", NULL);
	if (c->plan->phase == PLAN_OBSERVING && !a->given)
		check_add(c, PLAN_REFUSAL, "alerts", at, "say what is held for an answer, and who may learn it",
		          "'alerts' is missing, and the phase is observing");
	else if (c->plan->phase == PLAN_OBSERVING && !a->partners_told)
		check_add(c, PLAN_WARNING, "partners-told", at, "tell them that drills happen",
		          "partners who act on alerts have not been told of drills");
	for (int i = 0; i < a->recipients.n; i++) {
		const struct plan_person *p = plan_person_named(c->plan, a->recipients.name[i]);
		const struct yaml_node *list = check_node(c, NULL, "alerts", "recipients", NULL);
		if (p == NULL)
			check_add(c, PLAN_REFUSAL, "recipients", list->members[i], "name a party of this plan",
			          "'%s' is not among the parties", a->recipients.name[i]);
		else if (p->duty == DUTY_ANALYST)
			check_add(c, PLAN_WARNING, "recipients", list->members[i], "prefer a liaison",
			          "'%s' analyses; what they do after an answer is set aside", p->name);
	}
}

static void check_questions(struct plan_checker *c)
{
	for (int i = 0; i < c->plan->n_questions; i++) {
		const char *name = c->plan->question[i].pipeline;
		bool found = strcmp(name, "any") == 0;
		for (int j = 0; j < c->plan->n_people; j++)
			found = found ||
			        (c->plan->person[j].duty == DUTY_ANALYST && strcmp(c->plan->person[j].of, name) == 0);
		if (!found)
			check_add(c, PLAN_REFUSAL, "question-pipeline",
			          check_node(c, NULL, "questions", NULL)->members[i],
			          "use a pipeline of the plan, or any", "the pipeline '%s' is not in the plan", name);
	}
}

enum qb_status plan_check(const struct drill_plan *plan, struct plan_findings *out, struct qb_error *e)
{
	struct plan_checker c = {plan, out};
	*out = (struct plan_findings){0};
	check_stretch(&c);
	check_matching(&c);
	check_people(&c);
	check_stations(&c);
	check_calibrations(&c);
	check_blindness(&c);
	check_alerts(&c);
	check_questions(&c);
	enum qb_status st = plan_check_families(&c, e);
	if (st != QB_OK || out->n_refusals == 0)
		return st;
	for (int i = 0; i < out->n; i++) {
		const struct plan_finding *f = &out->finding[i];
		if (f->severity == PLAN_REFUSAL)
			return qb_fail(e, QB_NO, f->where, f->mend, "%s%s", f->what,
			               out->n_refusals > 1 ? " (and other rules are broken)" : "");
	}
	return QB_OK;
}

void plan_findings_free(struct plan_findings *f)
{
	qb_free(f->finding);
	*f = (struct plan_findings){0};
}

const char *plan_finding_line(const struct plan_finding *f, char *out, size_t size)
{
	(void)snprintf(out, size, "%s: %s (%s); %s", f->severity == PLAN_REFUSAL ? "refusal" : "warning", f->what,
	               f->where, f->mend);
	return out;
}
