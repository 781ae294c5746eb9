/* Families of a plan: which signal, how loud, and from which distribution each parameter is drawn. */
#include "server/drill/plan_read.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/drill/signal.h"

/* Keys of a family entry that are not parameters of its signal. */
static const char *const own_keys[] = {"name",        "weight", "family",      "model", "frame",
                                       "orientation", "sky",    "network_snr", NULL};

/* Where it stands and how it is turned, in the order of their variates (draw.h); the last is never drawn. */
static const struct {
	const char *key;
	struct dist fallback;
	double least, largest;
} places[] = {
    {"right_ascension_rad", {DIST_UNIFORM, 0, 0, 0, {0, -1}, {2 * M_PI, -1}}, 0, 2 * M_PI},
    {"declination_rad", {DIST_LATITUDE, 0, 0, 0, {0, -1}, {0, -1}}, -M_PI_2, M_PI_2},
    {"inclination_rad", {DIST_POLAR, 0, 0, 0, {0, -1}, {0, -1}}, 0, M_PI},
    {"polarization_rad", {DIST_UNIFORM, 0, 0, 0, {0, -1}, {M_PI, -1}}, -2 * M_PI, 2 * M_PI},
    {"phase_rad", {DIST_UNIFORM, 0, 0, 0, {0, -1}, {2 * M_PI, -1}}, -2 * M_PI, 2 * M_PI},
    {"lowest_frequency_hz", {DIST_FIXED, 0, 0, 0, {20, -1}, {20, -1}}, 1, 1000},
};
#define PLACES (int)(sizeof places / sizeof places[0])

static bool among(const char *key, const char *const *keys)
{
	for (int i = 0; keys[i] != NULL; i++) {
		if (strcmp(key, keys[i]) == 0)
			return true;
	}
	return false;
}

/* A distribution at node n whose every value lies in the range; QB_RANGE otherwise. */
static void read_dist(struct plan_reader *r, struct yaml_node *n, const struct population *earlier, double least,
                      double largest, struct dist *out)
{
	double lo, hi;
	char accepted[100];
	if (r->status != QB_OK || n == NULL)
		return;
	n->used = true;
	r->status = dist_parse(r->doc, n, earlier, out, r->e);
	if (r->status != QB_OK)
		return;
	dist_extremes(earlier, out, &lo, &hi);
	if (lo >= least && hi <= largest)
		return;
	(void)snprintf(accepted, sizeof accepted, "values from %.10g to %.10g (drawn: %.10g to %.10g)", least, largest,
	               lo, hi);
	read_refuse(r, n, QB_RANGE, accepted);
}

static void read_places(struct plan_reader *r, struct yaml_node *m, struct plan_family *f)
{
	static const struct population none = {0};
	static const char *const isotropic[] = {"isotropic", NULL};
	(void)read_word(r, m, "orientation", isotropic, 0);
	(void)read_word(r, m, "sky", isotropic, 0);
	f->place.n = PLACES;
	for (int i = 0; i < PLACES; i++) {
		struct population_parameter *p = &f->place.p[i];
		(void)snprintf(p->key, sizeof p->key, "%s", places[i].key);
		p->dist = places[i].fallback;
		p->line = m->line;
		read_dist(r, read_find(r, m, places[i].key), &none, places[i].least, places[i].largest, &p->dist);
	}
	struct yaml_node *low = read_find(r, m, "lowest_frequency_hz");
	if (low != NULL && f->place.p[PLACES - 1].dist.kind != DIST_FIXED)
		read_refuse(r, low, QB_RANGE, "one number, from 1 to 1000 Hz");
}

/* By network SNR, or by the scale itself: exactly one of the two. */
static void read_loudness(struct plan_reader *r, struct yaml_node *m, struct plan_family *f)
{
	static const struct population none = {0};
	struct yaml_node *snr = read_find(r, m, "network_snr"), *scale = read_find(r, m, f->scale);
	char accepted[120];
	if (r->status != QB_OK)
		return;
	if ((snr == NULL) == (scale == NULL)) {
		(void)snprintf(accepted, sizeof accepted, "a family with either network_snr or %s", f->scale);
		read_refuse(r, m, QB_FORMAT, accepted);
		return;
	}
	f->loudness = snr != NULL ? LOUD_BY_SNR : LOUD_BY_SCALE;
	if (snr != NULL)
		read_dist(r, snr, &none, 1e-3, 1e5, &f->loud);
	else if (strcmp(f->scale, "distance_mpc") == 0)
		read_dist(r, scale, &none, 1e-6, 1e6, &f->loud);
	else
		read_dist(r, scale, &none, 1e-30, 1e-15, &f->loud);
}

static void read_parameters(struct plan_reader *r, struct yaml_node *m, enum wave_family family, struct plan_family *f)
{
	const struct wave_family_info *w = wave_family_info(family);
	for (int i = 0; i < m->n_members && r->status == QB_OK; i++) {
		struct yaml_node *n = m->members[i];
		int at = wave_parameter_find(family, n->key);
		if (among(n->key, own_keys) || population_find(&f->place, n->key) >= 0 || strcmp(n->key, f->scale) == 0)
			continue;
		if (at < 0)
			continue; /* nobody asks for it: refused as an unknown key */
		struct population_parameter *x = &f->parameters.p[f->parameters.n];
		if (f->parameters.n == POPULATION_MAX) {
			read_refuse(r, m, QB_RANGE, "at most 24 parameters");
			return;
		}
		(void)snprintf(x->key, sizeof x->key, "%s", n->key);
		x->line = n->line;
		read_dist(r, n, &f->parameters, w->parameters[at].least, w->parameters[at].largest, &x->dist);
		f->parameters.n++;
	}
	for (int i = 0; i < w->n_parameters && r->status == QB_OK; i++) {
		const struct wave_parameter *p = &w->parameters[i];
		bool elsewhere = population_find(&f->place, p->key) >= 0 || strcmp(p->key, f->scale) == 0 ||
		                 strcmp(p->key, "ellipticity_rad") == 0;
		struct yaml_node *unused;
		if (p->required && !elsewhere && population_find(&f->parameters, p->key) < 0)
			r->status = yaml_need(r->doc, m, p->key, &unused, r->e);
	}
}

static void read_family(struct plan_reader *r, struct yaml_node *m, struct plan_family *f)
{
	static const char *const frames[] = {"station", "source", NULL};
	struct yaml_node *n;
	r->status = yaml_is(r->doc, m, YAML_MAP, r->e);
	f->line = m->line;
	f->weight = 1;
	read_name_needed(r, m, "name", f->name);
	read_double(r, m, "weight", 1e-6, 1e6, &f->weight);
	n = read_need(r, m, "family", YAML_SCALAR);
	if (n == NULL)
		return;
	enum wave_family family;
	if (!wave_family_find(n->text, &family)) {
		char words[200];
		read_refuse(r, n, QB_FORMAT, signal_family_words(words, sizeof words));
		return;
	}
	const struct wave_family_info *w = wave_family_info(family);
	(void)snprintf(f->family, sizeof f->family, "%s", w->name);
	int model = w->models != NULL ? read_word(r, m, "model", w->models, 0) : 0;
	(void)snprintf(f->model, sizeof f->model, "%s", w->models != NULL ? w->models[model] : "");
	(void)snprintf(f->scale, sizeof f->scale, "%s", w->scale);
	f->source_frame = read_word(r, m, "frame", frames, 0) == 1;
	if (f->source_frame && !signal_has_masses(family))
		read_refuse(r, read_find(r, m, "frame"), QB_RANGE, "station for a family without masses");
	read_places(r, m, f);
	read_loudness(r, m, f);
	if (r->status == QB_OK)
		read_parameters(r, m, family, f);
}

void plan_read_families(struct plan_reader *r, struct yaml_node *drills, struct drill_plan *plan)
{
	struct yaml_node *list = read_need(r, drills, "families", YAML_LIST);
	if (list == NULL)
		return;
	if (list->n_members < 1 || list->n_members > PLAN_MAX_FAMILIES) {
		read_refuse(r, list, QB_RANGE, "1 to 16 families");
		return;
	}
	for (int i = 0; i < list->n_members && r->status == QB_OK; i++)
		read_family(r, list->members[i], &plan->family[plan->n_families++]);
}
