/* The table of families, and reading a source by it. */
#include "server/wave/source.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/clock.h"

#define MASS_RATIO_MAX 18.0 /* calibration of the merger model */

static const struct wave_parameter binary_parameters[] = {
    [CB_PRIMARY_MASS] = {"primary_mass_msun", 0.1, 1000, true, NAN, "heavier mass as seen at the station, redshifted"},
    [CB_SECONDARY_MASS] = {"secondary_mass_msun", 0.1, 1000, true, NAN, "lighter mass"},
    [CB_PRIMARY_SPIN] = {"primary_spin", -0.99, 0.99, false, 0, "along the orbital angular momentum, dimensionless"},
    [CB_SECONDARY_SPIN] = {"secondary_spin", -0.99, 0.99, false, 0, "the lighter body's"},
    [CB_DISTANCE] = {"distance_mpc", 1e-3, 1e6, true, 1, "luminosity distance"},
    [CB_INCLINATION] = {"inclination_rad", 0, 3.1415926535897936, false, 0, "0 is face-on"},
    [CB_PHASE] = {"phase_rad", -100, 100, false, 0,
                  "reference phase: at the peak (IMRPhenomD), at coalescence (TaylorF2)"},
    [CB_PRIMARY_TIDE] = {"primary_tidal_deformability", 0, 1e5, false, 0, "TaylorF2 only"},
    [CB_SECONDARY_TIDE] = {"secondary_tidal_deformability", 0, 1e5, false, 0, "TaylorF2 only"},
};
static const struct wave_parameter sine_gaussian_parameters[] = {
    [SG_FREQUENCY] = {"frequency_hz", 1, 8192, true, NAN, "central frequency"},
    [SG_QUALITY] = {"quality", 0.1, 1000, true, NAN, "number of cycles, tau = Q / (sqrt(2) pi f)"},
    [SG_HRSS] = {"hrss_per_sqrt_hz", 1e-30, 1e-15, true, 1e-22, "root-sum-square strain over both polarisations"},
    [SG_ELLIPTICITY] = {"ellipticity_rad", -1.5707963267948968, 1.5707963267948968, false, 0,
                        "0 linear, pi/4 circular"},
    [SG_PHASE] = {"phase_rad", -100, 100, false, 0, "phase at the centre"},
};
static const struct wave_parameter pulse_parameters[] = {
    [GP_WIDTH] = {"width_s", 1e-5, 1, true, NAN, "tau of exp(-t^2 / tau^2)"},
    [GP_HRSS] = {"hrss_per_sqrt_hz", 1e-30, 1e-15, true, 1e-22, "root-sum-square strain"},
};
static const char *const binary_models[] = {"IMRPhenomD", "TaylorF2", NULL};

static const struct wave_family_info families[WAVE_FAMILIES] = {
    [WAVE_COMPACT_BINARY] = {"compact-binary", binary_models, "distance_mpc", 9, binary_parameters,
                             "two compact bodies spiralling in, spins aligned"},
    [WAVE_SINE_GAUSSIAN] = {"sine-gaussian", NULL, "hrss_per_sqrt_hz", 5, sine_gaussian_parameters,
                            "a sine under a Gaussian, elliptically polarised"},
    [WAVE_GAUSSIAN_PULSE] = {"gaussian-pulse", NULL, "hrss_per_sqrt_hz", 2, pulse_parameters,
                             "a Gaussian bump, linearly polarised"},
};

const struct wave_family_info *wave_family_info(enum wave_family family)
{
	return &families[family];
}

bool wave_family_find(const char *word, enum wave_family *out)
{
	for (int i = 0; i < WAVE_FAMILIES; i++) {
		if (strcmp(families[i].name, word) == 0) {
			*out = (enum wave_family)i;
			return true;
		}
	}
	return false;
}

int wave_parameter_find(enum wave_family family, const char *key)
{
	for (int i = 0; i < families[family].n_parameters; i++) {
		if (strcmp(families[family].parameters[i].key, key) == 0)
			return i;
	}
	return -1;
}

const char *source_model_word(const struct wave_source *s)
{
	return s->model == WAVE_NO_MODEL ? "" : binary_models[s->model == WAVE_TAYLORF2];
}

enum qb_status source_init(struct wave_source *s, const char *family, const char *model, const char *what,
                           struct qb_error *e)
{
	*s = (struct wave_source){.lowest_frequency_hz = 20};
	if (!wave_family_find(family, &s->family))
		return qb_fail(e, QB_FORMAT, what, NULL,
		               "unknown family '%.40s'; accepted: compact-binary, sine-gaussian, gaussian-pulse",
		               family);
	const struct wave_family_info *f = &families[s->family];
	for (int i = 0; i < f->n_parameters; i++)
		s->p[i] = f->parameters[i].fallback;
	if (f->models == NULL) {
		if (model != NULL && *model != '\0')
			return qb_fail(e, QB_FORMAT, what, "leave the model out", "family '%s' has no models", family);
		return QB_OK;
	}
	if (model == NULL || strcmp(model, "IMRPhenomD") == 0)
		s->model = WAVE_IMRPHENOMD;
	else if (strcmp(model, "TaylorF2") == 0)
		s->model = WAVE_TAYLORF2;
	else
		return qb_fail(e, QB_FORMAT, what, NULL, "unknown model '%.40s'; accepted: IMRPhenomD, TaylorF2",
		               model);
	return QB_OK;
}

static enum qb_status check_binary(const struct wave_source *s, const char *what, struct qb_error *e)
{
	const double *p = s->p;
	if (p[CB_SECONDARY_MASS] > p[CB_PRIMARY_MASS])
		return qb_fail(e, QB_RANGE, what, "exchange the two bodies",
		               "secondary_mass_msun is above primary_mass_msun");
	if (s->model != WAVE_IMRPHENOMD)
		return QB_OK;
	if (p[CB_PRIMARY_MASS] > MASS_RATIO_MAX * p[CB_SECONDARY_MASS] * (1 + 1e-9))
		return qb_fail(e, QB_RANGE, what, "use masses closer to each other",
		               "the mass ratio is %.4g; IMRPhenomD is valid to %g",
		               p[CB_PRIMARY_MASS] / p[CB_SECONDARY_MASS], MASS_RATIO_MAX);
	if (p[CB_PRIMARY_TIDE] != 0 || p[CB_SECONDARY_TIDE] != 0)
		return qb_fail(e, QB_RANGE, what, "use TaylorF2", "IMRPhenomD has no tidal deformability");
	return QB_OK;
}

static enum qb_status check_one(const char *what, const char *key, double v, double least, double largest,
                                struct qb_error *e)
{
	char where[200];
	if (v >= least && v <= largest)
		return QB_OK;
	(void)snprintf(where, sizeof where, "%.120s: %s", what, key);
	return qb_fail(e, QB_RANGE, where, NULL, "is %.10g; accepted: %.6g to %.6g", v, least, largest);
}

enum qb_status source_check(const struct wave_source *s, const char *what, struct qb_error *e)
{
	const struct wave_family_info *f = &families[s->family];
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < f->n_parameters; i++)
		st =
		    check_one(what, f->parameters[i].key, s->p[i], f->parameters[i].least, f->parameters[i].largest, e);
	if (st == QB_OK)
		st = check_one(what, "right_ascension_rad", s->right_ascension_rad, -7, 7, e);
	if (st == QB_OK)
		st = check_one(what, "declination_rad", s->declination_rad, -1.5707963267948968, 1.5707963267948968, e);
	if (st == QB_OK)
		st = check_one(what, "polarization_rad", s->polarization_rad, -100, 100, e);
	if (st == QB_OK)
		st = check_one(what, "lowest_frequency_hz", s->lowest_frequency_hz, 1, 1000, e);
	if (st == QB_OK && s->family == WAVE_COMPACT_BINARY)
		st = check_binary(s, what, e);
	return st;
}

/* The lighter body first is accepted in a file: the bodies are exchanged, with spins and tides. */
static void order_bodies(struct wave_source *s)
{
	static const int pairs[3][2] = {{CB_PRIMARY_MASS, CB_SECONDARY_MASS},
	                                {CB_PRIMARY_SPIN, CB_SECONDARY_SPIN},
	                                {CB_PRIMARY_TIDE, CB_SECONDARY_TIDE}};
	if (s->family != WAVE_COMPACT_BINARY || s->p[CB_PRIMARY_MASS] >= s->p[CB_SECONDARY_MASS])
		return;
	for (int i = 0; i < 3; i++) {
		double swap = s->p[pairs[i][0]];
		s->p[pairs[i][0]] = s->p[pairs[i][1]];
		s->p[pairs[i][1]] = swap;
	}
}

static enum qb_status read_parameters(const struct yaml_doc *doc, struct yaml_node *node, bool sky,
                                      struct wave_source *out, struct qb_error *e)
{
	const struct wave_family_info *f = &families[out->family];
	for (int i = 0; i < f->n_parameters; i++) {
		const struct wave_parameter *p = &f->parameters[i];
		struct yaml_node *v = yaml_find(node, p->key);
		enum qb_status st = QB_OK;
		/* an entry of a search bank has no loudness of its own */
		bool needed = p->required && (sky || strcmp(p->key, f->scale) != 0);
		if (v == NULL && needed)
			st = yaml_need(doc, node, p->key, &v, e);
		else if (v != NULL)
			st = yaml_double(doc, v, p->least, p->largest, &out->p[i], e);
		if (st != QB_OK)
			return st;
	}
	return QB_OK;
}

static enum qb_status read_sky(const struct yaml_doc *doc, struct yaml_node *node, struct wave_source *out,
                               struct qb_error *e)
{
	struct yaml_node *v;
	enum qb_status st = yaml_need(doc, node, "right_ascension_rad", &v, e);
	if (st == QB_OK)
		st = yaml_double(doc, v, 0, 6.2831853071795872, &out->right_ascension_rad, e);
	if (st == QB_OK)
		st = yaml_need(doc, node, "declination_rad", &v, e);
	if (st == QB_OK)
		st = yaml_double(doc, v, -1.5707963267948968, 1.5707963267948968, &out->declination_rad, e);
	if (st == QB_OK && (v = yaml_find(node, "polarization_rad")) != NULL)
		st = yaml_double(doc, v, -100, 100, &out->polarization_rad, e);
	if (st == QB_OK)
		st = yaml_need(doc, node, "arrival_gps", &v, e);
	if (st == QB_OK)
		st = yaml_time(doc, v, &out->arrival_gps_ns, e);
	return st;
}

enum qb_status source_read_node(const struct yaml_doc *doc, struct yaml_node *node, bool sky, struct wave_source *out,
                                struct qb_error *e)
{
	struct yaml_node *v;
	const char *family, *model = NULL;
	char where[240];
	enum qb_status st = yaml_need(doc, node, "family", &v, e);
	if (st == QB_OK)
		st = yaml_text(doc, v, 60, &family, e);
	if (st == QB_OK) {
		yaml_where(doc, v, where, sizeof where);
		if ((v = yaml_find(node, "model")) != NULL)
			st = yaml_text(doc, v, 60, &model, e);
	}
	if (st == QB_OK)
		st = source_init(out, family, model, where, e);
	if (st == QB_OK)
		st = read_parameters(doc, node, sky, out, e);
	if (st == QB_OK && sky)
		st = read_sky(doc, node, out, e);
	if (st == QB_OK && (v = yaml_find(node, "lowest_frequency_hz")) != NULL)
		st = yaml_double(doc, v, 1, 1000, &out->lowest_frequency_hz, e);
	if (st == QB_OK)
		st = yaml_all_used(doc, node, e);
	if (st == QB_OK) {
		order_bodies(out);
		yaml_where(doc, node, where, sizeof where);
		st = source_check(out, where, e);
	}
	return st;
}

enum qb_status source_parse(const char *text, size_t n, const char *file, struct wave_source *out, struct qb_error *e)
{
	struct yaml_doc *doc;
	enum qb_status st = yaml_parse(text, n, file, &doc, e);
	if (st == QB_OK)
		st = yaml_is(doc, doc->root, YAML_MAP, e);
	if (st == QB_OK)
		st = source_read_node(doc, doc->root, true, out, e);
	yaml_doc_free(&doc);
	return st;
}

double source_chirp_mass_msun(const struct wave_source *s)
{
	double m1 = s->p[CB_PRIMARY_MASS], m2 = s->p[CB_SECONDARY_MASS];
	return s->family == WAVE_COMPACT_BINARY ? pow(m1 * m2, 0.6) / pow(m1 + m2, 0.2) : 0;
}

double source_effective_spin(const struct wave_source *s)
{
	double m1 = s->p[CB_PRIMARY_MASS], m2 = s->p[CB_SECONDARY_MASS];
	return s->family == WAVE_COMPACT_BINARY
	           ? (m1 * s->p[CB_PRIMARY_SPIN] + m2 * s->p[CB_SECONDARY_SPIN]) / (m1 + m2)
	           : 0;
}
