/* The parts of a plan that the audit will read: alerts, witnesses, questions and the pre-registered audit section. */
#include "server/drill/plan_read.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/clock.h"

static void set_names(struct plan_names *out, const char *const *names, int n)
{
	out->n = n;
	for (int i = 0; i < n; i++)
		(void)snprintf(out->name[i], PLAN_NAME_MAX, "%s", names[i]);
}

static void defaults(struct plan_audit *a)
{
	static const char *const parameters[] = {"arrival_gps", "chirp_mass_msun", "distance_mpc", "effective_spin"};
	static const char *const logs[] = {"chirp_mass_msun", "distance_mpc"};
	*a = (struct plan_audit){
	    .match_base_s = 0.5,
	    .match_sigma_factor = 3,
	    .match_max_s = 5,
	    .confidence = 0.95,
	    .far_thresholds_per_year = {3, {1, 12, 100}},
	    .latency_marks_s = {4, {60, 600, 3600, 86400}},
	    .far_ceiling_per_year = 1000,
	    .time_volume_far_per_year = 1,
	    .n_time_shifts = 100,
	    .band_at_network_snr = NAN,
	    .band_at_distance_mpc = NAN,
	    .recognition_chirp_mass_relative = 0.5,
	    .recognition_sky_probability = 0.999,
	};
	set_names(&a->parameters, parameters, 4);
	set_names(&a->log_parameters, logs, 2);
}

static void read_steps(struct plan_reader *r, struct yaml_node *map, struct plan_audit *a)
{
	struct yaml_node *list = read_optional(r, map, "milestone_steps", YAML_LIST);
	if (list == NULL)
		return;
	if (list->n_members > PLAN_MAX_LIST) {
		read_refuse(r, list, QB_RANGE, "at most 32 entries");
		return;
	}
	for (int i = 0; i < list->n_members; i++) {
		struct yaml_node *pair = list->members[i];
		if (pair->kind != YAML_LIST || pair->n_members != 2) {
			read_refuse(r, pair, QB_FORMAT, "a pair [from, to] of milestone names");
			return;
		}
		read_name_of(r, pair->members[0], a->milestone_steps[i][0]);
		read_name_of(r, pair->members[1], a->milestone_steps[i][1]);
	}
	a->n_milestone_steps = list->n_members;
}

static void read_population(struct plan_reader *r, struct yaml_node *map, struct population *pop)
{
	struct yaml_node *list = read_optional(r, map, "population", YAML_MAP);
	if (list == NULL)
		return;
	if (list->n_members > POPULATION_MAX) {
		read_refuse(r, list, QB_RANGE, "at most 24 parameters");
		return;
	}
	for (int i = 0; i < list->n_members && r->status == QB_OK; i++) {
		struct yaml_node *m = list->members[i];
		struct population_parameter *p = &pop->p[i];
		m->used = true;
		p->line = m->line;
		if (strlen(m->key) >= sizeof p->key) {
			read_refuse(r, m, QB_FORMAT, "the key of a parameter");
			return;
		}
		(void)snprintf(p->key, sizeof p->key, "%s", m->key);
		r->status = dist_parse(r->doc, m, pop, &p->dist, r->e);
		if (r->status == QB_OK && p->dist.kind == DIST_FIXED)
			read_refuse(r, m, QB_RANGE, "a distribution with a density (not a single value)");
		pop->n++;
	}
}

static void read_section(struct plan_reader *r, struct yaml_node *root, struct plan_audit *a)
{
	defaults(a);
	struct yaml_node *m = read_optional(r, root, "audit", YAML_MAP);
	if (m == NULL)
		return;
	read_double(r, m, "match_base_s", 0, 3600, &a->match_base_s);
	read_double(r, m, "match_sigma_factor", 0, 100, &a->match_sigma_factor);
	read_double(r, m, "match_max_s", 1e-3, 3600, &a->match_max_s);
	read_double(r, m, "confidence", 0.5, 0.9999, &a->confidence);
	read_numbers(r, m, "far_thresholds_per_year", 1e-9, 1e9, &a->far_thresholds_per_year);
	read_double(r, m, "far_ceiling_per_year", 1e-9, 1e9, &a->far_ceiling_per_year);
	read_keys(r, m, "parameters", &a->parameters);
	read_keys(r, m, "log_parameters", &a->log_parameters);
	read_steps(r, m, a);
	read_int(r, m, "n_bins", 1, 1000, &a->n_bins);
	read_int(r, m, "n_time_shifts", 1, 100000, &a->n_time_shifts);
	struct yaml_node *band = read_optional(r, m, "band_at", YAML_MAP);
	read_double(r, band, "network_snr", 1e-3, 1e6, &a->band_at_network_snr);
	read_double(r, band, "distance_mpc", 1e-6, 1e6, &a->band_at_distance_mpc);
	read_numbers(r, m, "latency_marks_s", 1e-3, 1e9, &a->latency_marks_s);
	read_double(r, m, "time_volume_far_per_year", 1e-9, 1e9, &a->time_volume_far_per_year);
	read_population(r, m, &a->population);
	struct yaml_node *rec = read_optional(r, m, "recognition", YAML_MAP);
	read_double(r, rec, "chirp_mass_relative", 1e-3, 100, &a->recognition_chirp_mass_relative);
	read_double(r, rec, "sky_probability", 0.5, 1, &a->recognition_sky_probability);
}

static void read_alerts(struct plan_reader *r, struct yaml_node *root, struct plan_alerts *a)
{
	static const char *const thens[] = {"release-with-warning", "keep-held", NULL};
	struct yaml_node *m = read_optional(r, root, "alerts", YAML_MAP);
	*a = (struct plan_alerts){.given = m != NULL,
	                          .no_answer_after_ns = 900 * NS_PER_S,
	                          .call_next_after_ns = 300 * NS_PER_S,
	                          .spot_quota = 5};
	if (m == NULL)
		return;
	read_names(r, m, "held_for_answer", &a->held_for_answer);
	read_bool(r, m, "partners_told", &a->partners_told);
	read_duration(r, m, "no_answer_after", 1, 604800, &a->no_answer_after_ns);
	read_duration(r, m, "call_next_after", 1, 604800, &a->call_next_after_ns);
	a->then = (enum plan_then)read_word(r, m, "then", thens, PLAN_RELEASE_WITH_WARNING);
	read_int(r, m, "spot_quota", 0, 10000, &a->spot_quota);
	read_names(r, m, "recipients", &a->recipients);
}

static void read_witnesses(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	struct yaml_node *list = read_optional(r, root, "witness_channels", YAML_LIST);
	if (list != NULL && list->n_members > PLAN_MAX_LIST)
		read_refuse(r, list, QB_RANGE, "at most 32 entries");
	for (int i = 0; list != NULL && i < list->n_members && r->status == QB_OK; i++) {
		struct plan_witness *w = &plan->witness[plan->n_witnesses++];
		struct yaml_node *m = list->members[i];
		w->line = m->line;
		r->status = yaml_is(r->doc, m, YAML_MAP, r->e);
		read_name_needed(r, m, "station", w->station);
		read_name_needed(r, m, "channel", w->channel);
		read_names(r, m, "readers", &w->readers);
		read_bool(r, m, "masked", &w->masked);
	}
}

static void read_questions(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	struct yaml_node *list = read_optional(r, root, "questions", YAML_LIST);
	if (list != NULL && list->n_members > PLAN_MAX_LIST)
		read_refuse(r, list, QB_RANGE, "at most 32 entries");
	for (int i = 0; list != NULL && i < list->n_members && r->status == QB_OK; i++) {
		struct plan_question *q = &plan->question[plan->n_questions++];
		struct yaml_node *m = list->members[i];
		q->line = m->line;
		r->status = yaml_is(r->doc, m, YAML_MAP, r->e);
		read_name_needed(r, m, "pipeline", q->pipeline);
		read_double_needed(r, m, "efficiency_at_network_snr", 1e-3, 1e6, &q->efficiency_at_network_snr);
		read_double_needed(r, m, "at_least", 0, 1, &q->at_least);
	}
}

void plan_read_audit(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	read_alerts(r, root, &plan->alerts);
	read_witnesses(r, root, plan);
	read_questions(r, root, plan);
	read_section(r, root, &plan->audit);
}
