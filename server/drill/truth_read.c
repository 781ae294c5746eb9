/* Reading truth records back, comparing two, and what the audit takes from one. */
#include "server/drill/truth.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/drill/signal.h"

#define WHAT "truth record"

static enum qb_status get_name(const json_t *j, const char *key, char *out, size_t size, struct qb_error *e)
{
	const char *s;
	enum qb_status st = json_str(j, key, WHAT, &s, e);
	if (st != QB_OK)
		return st;
	if (!text_is_name(s) || strlen(s) >= size)
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has a '%s' that is not a name", key);
	(void)snprintf(out, size, "%s", s);
	return QB_OK;
}

/* One of two words; *first tells which. */
static enum qb_status get_either(const json_t *j, const char *key, const char *a, const char *b, bool *first,
                                 struct qb_error *e)
{
	const char *s;
	enum qb_status st = json_str(j, key, WHAT, &s, e);
	if (st != QB_OK)
		return st;
	*first = strcmp(s, a) == 0;
	if (!*first && strcmp(s, b) != 0)
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has a '%s' that is neither '%s' nor '%s'", key, a, b);
	return QB_OK;
}

static enum qb_status get_gps(const json_t *j, const char *key, int64_t *out, struct qb_error *e)
{
	if (!json_is_string(json_object_get(j, key)))
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has no time '%s' as a decimal string", key);
	return json_gps(j, key, WHAT, out, e);
}

static enum qb_status get_station(const json_t *j, struct truth_station *s, struct qb_error *e)
{
	static const char *const keys[] = {"station",        "snr",          "peak_strain",   "peak_drive_counts",
	                                   "drive_from_gps", "drive_to_gps", "recipe_hashes", NULL};
	enum qb_status st = json_only(j, keys, WHAT, e);
	if (st == QB_OK)
		st = get_name(j, "station", s->name, sizeof s->name, e);
	if (st == QB_OK)
		st = json_num(j, "snr", WHAT, &s->snr, e);
	if (st == QB_OK)
		st = json_num(j, "peak_strain", WHAT, &s->peak_strain, e);
	if (st == QB_OK)
		st = json_num(j, "peak_drive_counts", WHAT, &s->peak_drive_counts, e);
	if (st == QB_OK)
		st = get_gps(j, "drive_from_gps", &s->drive_from_ns, e);
	if (st == QB_OK)
		st = get_gps(j, "drive_to_gps", &s->drive_to_ns, e);
	if (st != QB_OK)
		return st;
	const json_t *hashes = json_object_get(j, "recipe_hashes");
	if (!json_is_array(hashes) || json_array_size(hashes) != TRUTH_PLACES)
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has no list of %d recipe hashes", TRUTH_PLACES);
	for (size_t i = 0; i < TRUTH_PLACES; i++) {
		const char *hex = json_string_value(json_array_get(hashes, i));
		if (hex == NULL || strlen(hex) != 128 || !hex_decode(s->recipe_hash[i], 64, hex))
			return qb_fail(e, QB_FORMAT, WHAT, NULL, "has a recipe hash that is not 128 digits");
	}
	return QB_OK;
}

static enum qb_status get_source(const json_t *j, struct wave_source *s, struct qb_error *e)
{
	char family[64], model[64];
	const char *text;
	enum qb_status st = get_name(j, "family", family, sizeof family, e);
	if (st == QB_OK)
		st = json_str(j, "model", WHAT, &text, e);
	if (st != QB_OK)
		return st;
	if (*text != '\0' && !text_is_line(text, sizeof model - 1))
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has a 'model' that is not one line");
	(void)snprintf(model, sizeof model, "%s", text);
	st = signal_init(s, family, model, WHAT, e);
	if (st != QB_OK)
		return st;
	const json_t *parameters = json_object_get(j, "parameters");
	if (!json_is_object(parameters) || json_object_size(parameters) != (size_t)signal_parameter_count(s))
		return qb_fail(e, QB_FORMAT, WHAT, NULL, "has not exactly the parameters of its family");
	for (int i = 0; i < signal_parameter_count(s); i++) {
		double v;
		st = json_num(parameters, signal_parameter_key(s, i), WHAT, &v, e);
		if (st != QB_OK)
			return st;
		signal_parameter_put(s, i, v);
	}
	st = json_num(j, "right_ascension_rad", WHAT, &s->right_ascension_rad, e);
	if (st == QB_OK)
		st = json_num(j, "declination_rad", WHAT, &s->declination_rad, e);
	if (st == QB_OK)
		st = json_num(j, "polarization_rad", WHAT, &s->polarization_rad, e);
	if (st == QB_OK)
		st = json_num(j, "lowest_frequency_hz", WHAT, &s->lowest_frequency_hz, e);
	if (st == QB_OK)
		st = get_gps(j, "arrival_gps", &s->arrival_gps_ns, e);
	return st;
}

static enum qb_status get_slot(const json_t *j, struct drill_truth *t, struct qb_error *e)
{
	int64_t v = 0;
	enum qb_status st = json_int(j, "version", WHAT, TRUTH_VERSION, TRUTH_VERSION, &v, e);
	if (st == QB_OK)
		st = json_int(j, "conventions", WHAT, TRUTH_CONVENTIONS, TRUTH_CONVENTIONS, &v, e);
	if (st == QB_OK)
		st = json_int(j, "slot", WHAT, 0, INT64_C(1000000), &t->slot, e);
	if (st == QB_OK)
		st = get_gps(j, "slot_start_gps", &t->slot_start_ns, e);
	if (st == QB_OK)
		st = get_gps(j, "slot_s", &t->slot_ns, e);
	if (st == QB_OK)
		st = get_either(j, "assignment", "live", "null", &t->live, e);
	if (st == QB_OK)
		st = json_num(j, "gain", WHAT, &t->gain, e);
	if (st == QB_OK)
		st = get_name(j, "name", t->name, sizeof t->name, e);
	if (st == QB_OK)
		st = get_either(j, "frame", "source", "station", &t->source_frame, e);
	if (st == QB_OK)
		st = json_num(j, "redshift", WHAT, &t->redshift, e);
	if (st == QB_OK)
		st = json_int(j, "redraws", WHAT, 0, 1000000, &v, e);
	t->redraws = (int)v;
	if (st == QB_OK)
		st = json_num(j, "network_snr", WHAT, &t->network_snr, e);
	t->has_weight = !json_is_null(json_object_get(j, "weight_mpc3"));
	if (st == QB_OK && t->has_weight)
		st = json_num(j, "weight_mpc3", WHAT, &t->weight_mpc3, e);
	return st;
}

enum qb_status truth_decode(const void *p, size_t n, struct drill_truth *out, struct qb_error *e)
{
	static const char *const keys[] = {"version",
	                                   "conventions",
	                                   "slot",
	                                   "slot_start_gps",
	                                   "slot_s",
	                                   "assignment",
	                                   "gain",
	                                   "name",
	                                   "family",
	                                   "model",
	                                   "parameters",
	                                   "right_ascension_rad",
	                                   "declination_rad",
	                                   "polarization_rad",
	                                   "lowest_frequency_hz",
	                                   "arrival_gps",
	                                   "frame",
	                                   "redshift",
	                                   "redraws",
	                                   "network_snr",
	                                   "weight_mpc3",
	                                   "stations",
	                                   NULL};
	json_t *j = NULL;
	*out = (struct drill_truth){0};
	enum qb_status st = n > TRUTH_BYTES ? qb_fail(e, QB_FORMAT, WHAT, NULL, "is too long") : QB_OK;
	if (st == QB_OK)
		st = json_read(p, n, WHAT, &j, e);
	if (st == QB_OK)
		st = json_only(j, keys, WHAT, e);
	if (st == QB_OK && json_object_size(j) != sizeof keys / sizeof keys[0] - 1)
		st = qb_fail(e, QB_FORMAT, WHAT, NULL, "lacks a key");
	if (st == QB_OK)
		st = get_slot(j, out, e);
	if (st == QB_OK)
		st = get_source(j, &out->source, e);
	const json_t *stations = json_object_get(j, "stations");
	if (st == QB_OK && (!json_is_array(stations) || json_array_size(stations) > TRUTH_MAX_STATIONS))
		st = qb_fail(e, QB_FORMAT, WHAT, NULL, "has no list of at most %d stations", TRUTH_MAX_STATIONS);
	for (size_t i = 0; st == QB_OK && i < json_array_size(stations); i++)
		st = get_station(json_array_get(stations, i), &out->station[out->n_stations++], e);
	if (st == QB_OK)
		st = truth_check(out, e);
	json_decref(j);
	return st;
}

/* One comparison after another; the first that fails is reported. */
struct comparing {
	double tolerance;
	enum qb_status status;
	struct qb_error *e;
	const char *of; /* "" or the station */
};

static void differ(struct comparing *c, const char *name, const char *a, const char *b)
{
	c->status = qb_fail(c->e, QB_NO, WHAT, NULL, "%s%s%s is %s in the record and %s from the seed", c->of,
	                    *c->of != '\0' ? ": " : "", name, a, b);
}

static void same_text(struct comparing *c, const char *name, const char *a, const char *b)
{
	if (c->status == QB_OK && strcmp(a, b) != 0)
		differ(c, name, a, b);
}

static void same_int(struct comparing *c, const char *name, int64_t a, int64_t b)
{
	char ta[32], tb[32];
	(void)snprintf(ta, sizeof ta, "%" PRId64, a);
	(void)snprintf(tb, sizeof tb, "%" PRId64, b);
	same_text(c, name, ta, tb);
}

/* Angles near zero and spins have no scale of their own: the tolerance is absolute below `scale`. */
static void close_to(struct comparing *c, const char *name, double a, double b, double scale)
{
	char ta[40], tb[40];
	if (c->status != QB_OK || fabs(a - b) <= c->tolerance * fmax(scale, fmax(fabs(a), fabs(b))))
		return;
	(void)snprintf(ta, sizeof ta, "%.17g", a);
	(void)snprintf(tb, sizeof tb, "%.17g", b);
	differ(c, name, ta, tb);
}

static void same_time(struct comparing *c, const char *name, int64_t a, int64_t b)
{
	char ta[32], tb[32];
	if (c->status == QB_OK && fabs((double)(a - b)) > c->tolerance * (double)NS_PER_S)
		differ(c, name, clock_gps_text(a, ta, sizeof ta), clock_gps_text(b, tb, sizeof tb));
}

static void compare_sources(struct comparing *c, const struct wave_source *a, const struct wave_source *b)
{
	same_text(c, "family", signal_family_name(a), signal_family_name(b));
	same_text(c, "model", source_model_word(a), source_model_word(b));
	for (int i = 0; c->status == QB_OK && i < signal_parameter_count(a); i++) {
		const char *key = signal_parameter_key(a, i);
		bool scaled = strstr(key, "_rad") == NULL && strstr(key, "_spin") == NULL;
		close_to(c, key, signal_parameter_value(a, i), signal_parameter_value(b, i), scaled ? 0 : 1);
	}
	close_to(c, "right_ascension_rad", a->right_ascension_rad, b->right_ascension_rad, 1);
	close_to(c, "declination_rad", a->declination_rad, b->declination_rad, 1);
	close_to(c, "polarization_rad", a->polarization_rad, b->polarization_rad, 1);
	close_to(c, "lowest_frequency_hz", a->lowest_frequency_hz, b->lowest_frequency_hz, 0);
	same_time(c, "arrival_gps", a->arrival_gps_ns, b->arrival_gps_ns);
}

enum qb_status truth_compare(const struct drill_truth *sealed, const struct drill_truth *again, double tolerance,
                             struct qb_error *e)
{
	const struct drill_truth *a = sealed, *b = again;
	struct comparing c = {tolerance, QB_OK, e, ""};
	same_int(&c, "slot", a->slot, b->slot);
	same_int(&c, "slot_start", a->slot_start_ns, b->slot_start_ns);
	same_int(&c, "slot_ns", a->slot_ns, b->slot_ns);
	same_text(&c, "assignment", a->live ? "live" : "null", b->live ? "live" : "null");
	close_to(&c, "gain", a->gain, b->gain, 0);
	same_text(&c, "name", a->name, b->name);
	same_int(&c, "redraws", a->redraws, b->redraws);
	same_text(&c, "frame", a->source_frame ? "source" : "station", b->source_frame ? "source" : "station");
	compare_sources(&c, &a->source, &b->source);
	close_to(&c, "redshift", a->redshift, b->redshift, 0);
	close_to(&c, "network_snr", a->network_snr, b->network_snr, 0);
	same_int(&c, "weight", a->has_weight, b->has_weight);
	close_to(&c, "weight_mpc3", a->weight_mpc3, b->weight_mpc3, 0);
	same_int(&c, "stations", a->n_stations, b->n_stations);
	for (int i = 0; c.status == QB_OK && i < a->n_stations; i++) {
		const struct truth_station *x = &a->station[i], *y = &b->station[i];
		same_text(&c, "station", x->name, y->name);
		c.of = x->name;
		close_to(&c, "snr", x->snr, y->snr, 0);
		close_to(&c, "peak_strain", x->peak_strain, y->peak_strain, 0);
		close_to(&c, "peak_drive_counts", x->peak_drive_counts, y->peak_drive_counts, 0);
		same_time(&c, "drive_from_gps", x->drive_from_ns, y->drive_from_ns);
		same_time(&c, "drive_to_gps", x->drive_to_ns, y->drive_to_ns);
	}
	return c.status;
}

void truth_slot_id(int64_t slot, char out[static 32])
{
	(void)snprintf(out, 32, "slot-%06" PRId64, slot);
}

json_t *truth_audit_json(const struct drill_truth *t)
{
	char name[32];
	json_t *j = json_object();
	truth_slot_id(t->slot, name);
	json_object_set_new(j, "slot_id", json_string(name));
	json_object_set_new(j, "planned_gps", json_gps_new(t->slot_start_ns));
	json_object_set_new(j, "assignment", json_string(t->live ? "live" : "null"));
	json_object_set_new(j, "arrival_gps", json_gps_new(t->source.arrival_gps_ns));
	if (!t->live)
		return j;
	json_object_set_new(j, "network_snr", json_real(t->network_snr));
	json_object_set_new(j, "family", json_string(signal_family_name(&t->source)));
	json_object_set_new(j, "name", json_string(t->name));
	for (int i = 0; i < signal_parameter_count(&t->source); i++)
		json_object_set_new(j, signal_parameter_key(&t->source, i),
		                    json_real(signal_parameter_value(&t->source, i)));
	if (signal_has_masses(t->source.family)) {
		json_object_set_new(j, "chirp_mass_msun", json_real(source_chirp_mass_msun(&t->source)));
		json_object_set_new(j, "effective_spin", json_real(source_effective_spin(&t->source)));
	}
	json_object_set_new(j, "right_ascension_rad", json_real(t->source.right_ascension_rad));
	json_object_set_new(j, "declination_rad", json_real(t->source.declination_rad));
	if (t->has_weight)
		json_object_set_new(j, "weight_mpc3", json_real(t->weight_mpc3));
	json_t *stations = json_object();
	for (int i = 0; i < t->n_stations; i++)
		json_object_set_new(stations, t->station[i].name, json_real(t->station[i].snr));
	json_object_set_new(j, "stations", stations);
	return j;
}

void truth_drive_interval(const struct drill_truth *t, int64_t *from_ns, int64_t *to_ns)
{
	*from_ns = INT64_MAX;
	*to_ns = INT64_MIN;
	for (int i = 0; i < t->n_stations; i++) {
		*from_ns = t->station[i].drive_from_ns < *from_ns ? t->station[i].drive_from_ns : *from_ns;
		*to_ns = t->station[i].drive_to_ns > *to_ns ? t->station[i].drive_to_ns : *to_ns;
	}
}
