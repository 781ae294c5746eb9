/* Reading a plan file: its sections in order, then every key that nobody asked for. */
#include "server/drill/plan.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/base/check.h"
#include "server/base/clock.h"
#include "server/drill/plan_read.h"

static const char *const phases[] = {"observing", "engineering", "rehearsal", NULL};
static const char *const duties[DUTIES] = {"custodian", "reviewer",     "operator", "liaison",
                                           "driver",    "spare driver", "analyst"};

const char *plan_phase_word(enum plan_phase p)
{
	CHECK(p <= PLAN_REHEARSAL);
	return phases[p];
}

const char *plan_duty_word(enum plan_duty d)
{
	CHECK(d < DUTIES);
	return duties[d];
}

const struct plan_person *plan_person(const struct drill_plan *plan, enum plan_duty duty, int i)
{
	for (int j = 0; j < plan->n_people; j++) {
		if (plan->person[j].duty == duty && i-- == 0)
			return &plan->person[j];
	}
	return NULL;
}

const struct plan_person *plan_person_named(const struct drill_plan *plan, const char *name)
{
	for (int j = 0; j < plan->n_people; j++) {
		if (strcmp(plan->person[j].name, name) == 0)
			return &plan->person[j];
	}
	return NULL;
}

int plan_station(const struct drill_plan *plan, const char *name)
{
	for (int i = 0; i < plan->network->n_stations; i++) {
		if (strcmp(plan->network->stations[i].name, name) == 0)
			return i;
	}
	return -1;
}

double plan_live_chance(const struct drill_plan *plan)
{
	int64_t n = slots_count(&plan->slots);
	return n > 0 ? fmin(1, plan->expected_live / (double)n) : 0;
}

double plan_chance_of_none(const struct drill_plan *plan)
{
	double q = plan_live_chance(plan), n = (double)slots_count(&plan->slots);
	double none = q < 1 ? exp(n * log1p(-q)) : 0;
	return plan->empty_chance + (1 - plan->empty_chance) * none;
}

void plan_free(struct drill_plan **plan)
{
	if (*plan == NULL)
		return;
	wave_network_free(&(*plan)->network);
	yaml_doc_free(&(*plan)->doc);
	qb_free(*plan);
	*plan = NULL;
}

static void read_time(struct plan_reader *r, struct yaml_node *root, const char *key, int64_t *out_ns)
{
	struct yaml_node *n = read_need(r, root, key, YAML_SCALAR);
	if (n != NULL)
		r->status = yaml_time(r->doc, n, out_ns, r->e);
}

static void read_stretch(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	read_name_needed(r, root, "campaign", plan->campaign);
	(void)read_need(r, root, "phase", YAML_SCALAR);
	plan->phase = (enum plan_phase)read_word(r, root, "phase", phases, 0);
	read_time(r, root, "starts", &plan->slots.start_gps_ns);
	read_time(r, root, "ends", &plan->slots.end_gps_ns);
	(void)read_need(r, root, "slot", YAML_SCALAR);
	read_duration(r, root, "slot", 0.1, 604800, &plan->slots.slot_ns);
	plan->slots.lead_ns = 120 * NS_PER_S;
	read_duration(r, root, "lead", 0, 86400, &plan->slots.lead_ns);
}

static struct plan_person *add_person(struct plan_reader *r, struct drill_plan *plan, enum plan_duty duty,
                                      struct yaml_node *n)
{
	struct plan_person *p = &plan->person[plan->n_people];
	if (r->status != QB_OK)
		return NULL;
	if (plan->n_people == PLAN_MAX_DUTIES) {
		read_refuse(r, n, QB_RANGE, "at most 512 people");
		return NULL;
	}
	p->duty = duty;
	p->line = n->line;
	read_name_of(r, n, p->name);
	plan->n_people++;
	return p;
}

static void read_people(struct plan_reader *r, struct yaml_node *parties, const char *key, enum plan_duty duty,
                        bool needed, struct drill_plan *plan)
{
	struct yaml_node *list =
	    needed ? read_need(r, parties, key, YAML_LIST) : read_optional(r, parties, key, YAML_LIST);
	if (list == NULL)
		return;
	if ((needed && list->n_members < 1) || list->n_members > PLAN_MAX_PEOPLE)
		read_refuse(r, list, QB_RANGE, "1 to 64 people");
	for (int i = 0; i < list->n_members; i++)
		(void)add_person(r, plan, duty, list->members[i]);
}

/* {station: person} or {pipeline: person}. */
static void read_posts(struct plan_reader *r, struct yaml_node *parties, const char *key, enum plan_duty duty,
                       bool needed, struct drill_plan *plan)
{
	struct yaml_node *map =
	    needed ? read_need(r, parties, key, YAML_MAP) : read_optional(r, parties, key, YAML_MAP);
	if (map == NULL)
		return;
	if (map->n_members < 1 || map->n_members > PLAN_MAX_PEOPLE)
		read_refuse(r, map, QB_RANGE, "1 to 64 entries");
	for (int i = 0; i < map->n_members && r->status == QB_OK; i++) {
		struct yaml_node *m = map->members[i];
		struct plan_person *p = add_person(r, plan, duty, m);
		m->used = true;
		if (p == NULL)
			return;
		if (strlen(m->key) >= sizeof p->of ||
		    m->key[strspn(m->key, "abcdefghijklmnopqrstuvwxyz0123456789-")] != '\0')
			read_refuse(r, m, QB_FORMAT, "a station or pipeline name as the key");
		(void)snprintf(p->of, sizeof p->of, "%.63s", m->key);
	}
}

static void read_parties(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	struct yaml_node *m = read_need(r, root, "parties", YAML_MAP);
	read_people(r, m, "custodians", DUTY_CUSTODIAN, true, plan);
	plan->custodians = plan->n_people;
	read_int_needed(r, m, "custodians_needed", 1, 32, &plan->custodians_needed);
	read_people(r, m, "reviewers", DUTY_REVIEWER, true, plan);
	read_people(r, m, "operators", DUTY_OPERATOR, true, plan);
	read_people(r, m, "liaisons", DUTY_LIAISON, false, plan);
	read_posts(r, m, "drivers", DUTY_DRIVER, true, plan);
	read_posts(r, m, "spare_drivers", DUTY_SPARE, false, plan);
	read_posts(r, m, "pipelines", DUTY_ANALYST, true, plan);
}

static void read_drills(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	struct yaml_node *m = read_need(r, root, "drills", YAML_MAP);
	read_double_needed(r, m, "expected_live", 0, 1e6, &plan->expected_live);
	plan->empty_chance = 0.1;
	read_double(r, m, "empty_chance", 0, 1, &plan->empty_chance);
	(void)read_need(r, m, "guard", YAML_SCALAR);
	read_duration(r, m, "guard", 0, 86400, &plan->slots.guard_ns);
	plan_read_families(r, m, plan);
}

static void read_bands(struct plan_reader *r, struct yaml_node *limits, struct drill_plan *plan)
{
	struct yaml_node *list = read_optional(r, limits, "excluded_bands_hz", YAML_LIST);
	if (list == NULL)
		return;
	if (list->n_members > PLAN_MAX_LIST)
		read_refuse(r, list, QB_RANGE, "at most 32 bands");
	for (int i = 0; i < list->n_members && r->status == QB_OK; i++) {
		struct yaml_node *pair = list->members[i];
		double *band = plan->excluded_bands_hz[i];
		if (pair->kind != YAML_LIST || pair->n_members != 2) {
			read_refuse(r, pair, QB_FORMAT, "a pair [from, to] in Hz");
			return;
		}
		read_double_of(r, pair->members[0], 0, 1e6, &band[0]);
		read_double_of(r, pair->members[1], 0, 1e6, &band[1]);
		if (r->status == QB_OK && !(band[0] < band[1]))
			read_refuse(r, pair->members[1], QB_RANGE, "a frequency above the band's first");
		plan->n_excluded_bands = i + 1;
	}
}

static void read_sealer_host(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	struct yaml_node *n = read_find(r, root, "sealer_host");
	if (n == NULL)
		return;
	if (n->kind != YAML_SCALAR || strlen(n->text) != 64 || !hex_decode(plan->sealer_host, 32, n->text))
		read_refuse(r, n, QB_FORMAT, "64 hexadecimal digits, from quietbelld sealer-host");
	plan->has_sealer_host = true;
}

static void read_rules(struct plan_reader *r, struct yaml_node *root, struct drill_plan *plan)
{
	read_int_needed(r, root, "stations_needed", 1, WAVE_MAX_STATIONS, &plan->stations_needed);
	read_sealer_host(r, root, plan);
	plan->batch_ns = 600 * NS_PER_S;
	read_duration(r, root, "batch", 1, 86400, &plan->batch_ns);
	plan->acceptance_ns = 30 * 86400 * NS_PER_S;
	read_duration(r, root, "acceptance", 60, 31557600, &plan->acceptance_ns);
	plan->rehearsals_ns = 30 * 86400 * NS_PER_S;
	read_duration(r, root, "rehearsals", 3600, 31557600, &plan->rehearsals_ns);
	plan->hubble_km_per_s_per_mpc = 67.74;
	plan->matter_density = 0.3075;
	struct yaml_node *m = read_optional(r, root, "cosmology", YAML_MAP);
	read_double(r, m, "hubble_km_per_s_per_mpc", 20, 200, &plan->hubble_km_per_s_per_mpc);
	read_double(r, m, "matter_density", 0, 1, &plan->matter_density);
	plan->redraws = 100;
	read_int(r, root, "redraws", 0, 10000, &plan->redraws);
	plan->delivery_amplitude = 0.05;
	plan->delivery_time_s = 0.0005;
	plan->delivery_phase_rad = 0.1;
	m = read_optional(r, root, "delivery", YAML_MAP);
	read_double(r, m, "amplitude", 1e-6, 10, &plan->delivery_amplitude);
	read_double(r, m, "time_s", 1e-9, 10, &plan->delivery_time_s);
	read_double(r, m, "phase_rad", 1e-6, 3.14159265, &plan->delivery_phase_rad);
	plan->largest_drive = 0.8;
	m = read_optional(r, root, "limits", YAML_MAP);
	read_double(r, m, "largest_drive", 1e-6, 1, &plan->largest_drive);
	read_bands(r, m, plan);
}

static void read_network(struct plan_reader *r, struct yaml_node *root, plan_fetch fetch, void *state,
                         struct drill_plan *plan)
{
	struct yaml_node *n = read_need(r, root, "network", YAML_SCALAR);
	const char *name = NULL;
	struct buf text = {0};
	if (n != NULL)
		r->status = yaml_text(r->doc, n, sizeof plan->network_file - 1, &name, r->e);
	if (r->status != QB_OK)
		return;
	(void)snprintf(plan->network_file, sizeof plan->network_file, "%s", name);
	r->status = fetch(state, name, &text, r->e);
	if (r->status == QB_OK)
		r->status = network_parse((const char *)text.data, text.len, name, fetch, state, &plan->network, r->e);
	buf_free(&text);
}

enum qb_status plan_parse(const char *text, size_t n, const char *file, plan_fetch fetch, void *state,
                          struct drill_plan **out, struct qb_error *e)
{
	struct drill_plan *plan = QB_NEW(struct drill_plan);
	struct plan_reader r = {.e = e, .status = yaml_parse(text, n, file, &plan->doc, e)};
	r.doc = plan->doc;
	if (r.status == QB_OK) {
		struct yaml_node *root = plan->doc->root;
		r.status = yaml_is(r.doc, root, YAML_MAP, e);
		read_stretch(&r, root, plan);
		read_network(&r, root, fetch, state, plan);
		read_parties(&r, root, plan);
		read_drills(&r, root, plan);
		read_rules(&r, root, plan);
		plan_read_audit(&r, root, plan);
		if (r.status == QB_OK)
			r.status = yaml_all_used(r.doc, root, e);
	}
	if (r.status != QB_OK)
		plan_free(&plan);
	*out = plan;
	return r.status;
}
