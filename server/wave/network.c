/* Reading the network file, and the survey of its stations. */
#include "server/wave/network.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/yaml.h"
#include "server/wave/constants.h"
#include "server/wave/noise.h"

#define RAD (WAVE_PI / 180)

/* What the reading functions share. */
struct reading {
	struct yaml_doc *doc;
	network_fetch fetch;
	void *state;
	struct qb_error *e;
};

static enum qb_status number(struct reading *r, struct yaml_node *map, const char *key, double least, double largest,
                             double scale, double *out)
{
	struct yaml_node *v;
	enum qb_status st = yaml_need(r->doc, map, key, &v, r->e);
	if (st == QB_OK)
		st = yaml_double(r->doc, v, least, largest, out, r->e);
	*out *= scale;
	return st;
}

static enum qb_status number_or(struct reading *r, struct yaml_node *map, const char *key, double least, double largest,
                                double otherwise, double *out)
{
	struct yaml_node *v = yaml_find(map, key);
	*out = otherwise;
	return v != NULL ? yaml_double(r->doc, v, least, largest, out, r->e) : QB_OK;
}

static enum qb_status read_table(struct reading *r, struct yaml_node *v, struct wave_noise *out)
{
	const char *name;
	char where[240];
	struct buf b = {0};
	enum qb_status st = yaml_text(r->doc, v, 200, &name, r->e);
	yaml_where(r->doc, v, where, sizeof where);
	if (st == QB_OK && r->fetch == NULL)
		st = qb_fail(r->e, QB_NOT_FOUND, where, NULL, "no files can be named here");
	if (st == QB_OK)
		st = r->fetch(r->state, name, &b, r->e);
	if (st == QB_OK)
		st = noise_table_parse(b.data != NULL ? (const char *)b.data : "", name, out, r->e);
	buf_free(&b);
	return st;
}

static enum qb_status read_noise(struct reading *r, struct yaml_node *station, struct wave_noise *out)
{
	struct yaml_node *n, *curve, *table;
	const char *word;
	enum qb_status st = yaml_need(r->doc, station, "noise", &n, r->e);
	if (st == QB_OK)
		st = yaml_is(r->doc, n, YAML_MAP, r->e);
	if (st != QB_OK)
		return st;
	curve = yaml_find(n, "curve");
	table = yaml_find(n, "asd_file");
	if ((curve != NULL) == (table != NULL))
		return yaml_refuse(r->doc, n, QB_FORMAT, "either {curve: NAME} or {asd_file: FILE}", r->e);
	if (table != NULL)
		return read_table(r, table, out);
	if ((st = yaml_text(r->doc, curve, 60, &word, r->e)) == QB_OK && !noise_curve_find(word, &out->curve))
		st =
		    yaml_refuse(r->doc, curve, QB_FORMAT,
		                "advanced-broadband-b, advanced-broadband, third-generation, third-generation-b", r->e);
	return st;
}

static enum qb_status read_band(struct reading *r, struct yaml_node *a, struct wave_actuator *out)
{
	struct yaml_node *v;
	enum qb_status st = yaml_need(r->doc, a, "band_hz", &v, r->e);
	if (st == QB_OK && (v->kind != YAML_LIST || v->n_members != 4))
		st = yaml_refuse(r->doc, v, QB_FORMAT, "four frequencies, for example [12, 18, 1800, 2200]", r->e);
	for (int i = 0; st == QB_OK && i < 4; i++)
		st = yaml_double(r->doc, v->members[i], 0.01, 1e5, &out->band_hz[i], r->e);
	const double *b = out->band_hz;
	if (st == QB_OK && !(b[0] < b[1] && b[1] < b[2] && b[2] < b[3] && b[3] < 0.45 * out->rate_hz))
		st = yaml_refuse(r->doc, v, QB_RANGE, "four rising frequencies, the last below 0.45 of rate_hz", r->e);
	return st;
}

static enum qb_status read_validity(struct reading *r, struct yaml_node *a, struct wave_actuator *out)
{
	struct yaml_node *v, *x;
	const char *id;
	enum qb_status st = yaml_need(r->doc, a, "calibration_id", &v, r->e);
	if (st == QB_OK && (st = yaml_text(r->doc, v, 63, &id, r->e)) == QB_OK)
		(void)snprintf(out->calibration_id, sizeof out->calibration_id, "%s", id);
	if (st == QB_OK)
		st = yaml_need(r->doc, a, "valid", &v, r->e);
	if (st == QB_OK && (st = yaml_need(r->doc, v, "from", &x, r->e)) == QB_OK)
		st = yaml_time(r->doc, x, &out->valid_from_gps_ns, r->e);
	if (st == QB_OK && (st = yaml_need(r->doc, v, "to", &x, r->e)) == QB_OK)
		st = yaml_time(r->doc, x, &out->valid_to_gps_ns, r->e);
	if (st == QB_OK && out->valid_to_gps_ns <= out->valid_from_gps_ns)
		st = yaml_refuse(r->doc, x, QB_RANGE, "a time after 'from'", r->e);
	return st;
}

static enum qb_status read_witness(struct reading *r, struct yaml_node *a, struct wave_actuator *out)
{
	struct yaml_node *w = yaml_find(a, "witness"), *v;
	const char *name;
	if (w == NULL)
		return QB_OK;
	enum qb_status st = yaml_need(r->doc, w, "channel", &v, r->e);
	if (st == QB_OK && (st = yaml_text(r->doc, v, 63, &name, r->e)) == QB_OK)
		(void)snprintf(out->witness_channel, sizeof out->witness_channel, "%s", name);
	if (st == QB_OK && (v = yaml_find(w, "noise")) != NULL)
		st = read_table(r, v, &out->witness_noise);
	return st;
}

static enum qb_status read_actuator(struct reading *r, struct yaml_node *station, struct wave_actuator *out)
{
	struct yaml_node *a = yaml_find(station, "actuator"), *v;
	const char *kind;
	int64_t i;
	if (a == NULL)
		return QB_OK;
	enum qb_status st = yaml_need(r->doc, a, "kind", &v, r->e);
	if (st == QB_OK)
		st = yaml_text(r->doc, v, 60, &kind, r->e);
	if (st == QB_OK && strcmp(kind, "pendulum-force") != 0)
		st = yaml_refuse(r->doc, v, QB_FORMAT, "pendulum-force", r->e);
	if (st == QB_OK)
		st = number(r, a, "mass_kg", 1e-3, 1e4, 1, &out->mass_kg);
	if (st == QB_OK)
		st = number(r, a, "pendulum_hz", 1e-3, 100, 1, &out->pendulum_hz);
	if (st == QB_OK)
		st = number(r, a, "quality", 0.5, 1e10, 1, &out->quality);
	if (st == QB_OK)
		st = number(r, a, "newton_per_volt", 1e-15, 1e3, 1, &out->newton_per_volt);
	if (st == QB_OK)
		st = number(r, a, "volt_per_count", 1e-9, 1e3, 1, &out->volt_per_count);
	if (st == QB_OK)
		st = number(r, a, "rate_hz", 64, 262144, 1, &out->rate_hz);
	if (st == QB_OK)
		st = number(r, a, "slew_counts_per_s", 1, 1e15, 1, &out->slew_counts_per_s);
	if (st == QB_OK && (st = yaml_need(r->doc, a, "converter_bits", &v, r->e)) == QB_OK &&
	    (st = yaml_int(r->doc, v, 8, 32, &i, r->e)) == QB_OK)
		out->converter_bits = (int)i;
	if (st == QB_OK)
		st = read_band(r, a, out);
	if (st == QB_OK)
		st = read_validity(r, a, out);
	out->sign = 1;
	if (st == QB_OK && (v = yaml_find(a, "sign")) != NULL && (st = yaml_int(r->doc, v, -1, 1, &i, r->e)) == QB_OK) {
		out->sign = (int)i;
		if (i == 0)
			st = yaml_refuse(r->doc, v, QB_RANGE, "1 or -1", r->e);
	}
	if (st == QB_OK)
		st = number_or(r, a, "amplitude_uncertainty", 0, 1, 0, &out->amplitude_uncertainty);
	if (st == QB_OK)
		st = number_or(r, a, "phase_uncertainty_rad", 0, 3, 0, &out->phase_uncertainty_rad);
	if (st == QB_OK)
		st = number_or(r, a, "time_uncertainty_s", 0, 1, 0, &out->time_uncertainty_s);
	if (st == QB_OK)
		st = read_witness(r, a, out);
	out->present = st == QB_OK;
	return st;
}

static enum qb_status read_station(struct reading *r, struct yaml_node *n, struct wave_station *s)
{
	struct yaml_node *v;
	const char *name;
	enum qb_status st = yaml_need(r->doc, n, "name", &v, r->e);
	if (st == QB_OK && (st = yaml_name(r->doc, v, &name, r->e)) == QB_OK)
		(void)snprintf(s->name, sizeof s->name, "%s", name);
	if (st == QB_OK)
		st = number(r, n, "latitude_deg", -90, 90, RAD, &s->latitude_rad);
	if (st == QB_OK)
		st = number(r, n, "longitude_deg", -180, 360, RAD, &s->longitude_rad);
	if (st == QB_OK)
		st = number(r, n, "height_m", -12000, 10000, 1, &s->height_m);
	if (st == QB_OK)
		st = number(r, n, "x_arm_azimuth_deg", -360, 360, RAD, &s->x_arm_azimuth_rad);
	if (st == QB_OK)
		st = number(r, n, "y_arm_azimuth_deg", -360, 360, RAD, &s->y_arm_azimuth_rad);
	if (st == QB_OK)
		st = number_or(r, n, "x_arm_tilt_rad", -0.1, 0.1, 0, &s->x_arm_tilt_rad);
	if (st == QB_OK)
		st = number_or(r, n, "y_arm_tilt_rad", -0.1, 0.1, 0, &s->y_arm_tilt_rad);
	if (st == QB_OK)
		st = number(r, n, "arm_length_m", 1, 1e5, 1, &s->arm_length_m);
	if (st == QB_OK)
		st = read_noise(r, n, &s->noise);
	if (st == QB_OK)
		st = read_actuator(r, n, &s->actuator);
	if (st == QB_OK)
		station_survey(s);
	return st;
}

static enum qb_status read_network(struct reading *r, struct wave_network *net)
{
	struct yaml_node *v;
	const char *name;
	enum qb_status st = yaml_need(r->doc, r->doc->root, "network", &v, r->e);
	if (st == QB_OK && (st = yaml_name(r->doc, v, &name, r->e)) == QB_OK)
		(void)snprintf(net->name, sizeof net->name, "%s", name);
	if (st == QB_OK)
		st = yaml_need(r->doc, r->doc->root, "stations", &v, r->e);
	if (st == QB_OK && (v->kind != YAML_LIST || v->n_members < 1 || v->n_members > WAVE_MAX_STATIONS))
		st = yaml_refuse(r->doc, v, QB_FORMAT, "a list of 1 to 8 stations", r->e);
	for (int i = 0; st == QB_OK && i < v->n_members; i++) {
		net->n_stations = i + 1;
		st = read_station(r, v->members[i], &net->stations[i]);
		for (int j = 0; st == QB_OK && j < i; j++) {
			if (strcmp(net->stations[j].name, net->stations[i].name) == 0)
				st = yaml_refuse(r->doc, yaml_find(v->members[i], "name"), QB_FORMAT,
				                 "a name that no other station has", r->e);
		}
	}
	return st == QB_OK ? yaml_all_used(r->doc, r->doc->root, r->e) : st;
}

enum qb_status network_parse(const char *text, size_t n, const char *file, network_fetch fetch, void *state,
                             struct wave_network **out, struct qb_error *e)
{
	struct reading r = {.fetch = fetch, .state = state, .e = e};
	struct wave_network *net = QB_NEW(struct wave_network);
	enum qb_status st = yaml_parse(text, n, file, &r.doc, e);
	if (st == QB_OK)
		st = read_network(&r, net);
	yaml_doc_free(&r.doc);
	if (st != QB_OK)
		wave_network_free(&net);
	*out = net;
	return st;
}

void wave_network_free(struct wave_network **network)
{
	if (*network == NULL)
		return;
	for (int i = 0; i < (*network)->n_stations; i++) {
		noise_free(&(*network)->stations[i].noise);
		noise_free(&(*network)->stations[i].actuator.witness_noise);
	}
	qb_free(*network);
	*network = NULL;
}

int network_station(const struct wave_network *network, const char *name)
{
	for (int i = 0; i < network->n_stations; i++) {
		if (strcmp(network->stations[i].name, name) == 0)
			return i;
	}
	return -1;
}

static void arm(const struct wave_station *s, double azimuth, double tilt, double out[3])
{
	double sl = sin(s->latitude_rad), cl = cos(s->latitude_rad), sp = sin(s->longitude_rad),
	       cp = cos(s->longitude_rad);
	const double east[3] = {-sp, cp, 0}, north[3] = {-sl * cp, -sl * sp, cl}, up[3] = {cl * cp, cl * sp, sl};
	for (int i = 0; i < 3; i++)
		out[i] = cos(tilt) * (cos(azimuth) * north[i] + sin(azimuth) * east[i]) + sin(tilt) * up[i];
}

void station_survey(struct wave_station *s)
{
	const double a = 6378137, f = 1 / 298.257223563, e2 = f * (2 - f);
	double sl = sin(s->latitude_rad), cl = cos(s->latitude_rad), n = a / sqrt(1 - e2 * sl * sl);
	s->position_m[0] = (n + s->height_m) * cl * cos(s->longitude_rad);
	s->position_m[1] = (n + s->height_m) * cl * sin(s->longitude_rad);
	s->position_m[2] = (n * (1 - e2) + s->height_m) * sl;
	arm(s, s->x_arm_azimuth_rad, s->x_arm_tilt_rad, s->x_arm);
	arm(s, s->y_arm_azimuth_rad, s->y_arm_tilt_rad, s->y_arm);
}

double station_light_time_s(const struct wave_station *a, const struct wave_station *b)
{
	double sum = 0;
	for (int i = 0; i < 3; i++)
		sum += (a->position_m[i] - b->position_m[i]) * (a->position_m[i] - b->position_m[i]);
	return sqrt(sum) / WAVE_C_M_PER_S;
}
