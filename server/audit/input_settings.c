/*
 * The pre-registered settings of an audit from their JSON object: one table of keys, each with its reader, so that what
 * is understood, what is required and what is passed over can be seen in one place.
 */
#include "server/audit/input.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

double audit_number(const json_t *v)
{
	double x;
	if (json_is_number(v))
		return json_number_value(v);
	if (json_is_string(v) && text_double(json_string_value(v), &x))
		return x;
	return NAN;
}

typedef enum qb_status settings_reader(struct audit_settings *, const json_t *, const char *where, struct qb_error *);

static enum qb_status read_names(char **names, size_t *n, size_t max, const json_t *v, const char *where,
                                 struct qb_error *e)
{
	if (!json_is_array(v) || json_array_size(v) > max)
		return qb_fail(e, QB_FORMAT, where, NULL, "must be a list of at most %zu names", max);
	for (size_t i = 0; i < json_array_size(v); i++) {
		const char *s = json_string_value(json_array_get(v, i));
		if (s == NULL || !text_is_line(s, 64))
			return qb_fail(e, QB_FORMAT, where, NULL, "entry %zu is not a name", i);
		for (size_t k = 0; k < *n; k++)
			if (strcmp(names[k], s) == 0)
				return qb_fail(e, QB_FORMAT, where, "name each once", "%s is there twice", s);
		names[(*n)++] = qb_strdup(s);
	}
	return QB_OK;
}

static enum qb_status read_pipelines(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_names(s->pipelines, &s->n_pipelines, AUDIT_MAX_PIPELINES, v, where, e);
}

static enum qb_status read_parameters(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_names(s->parameters, &s->n_parameters, AUDIT_MAX_COLUMNS, v, where, e);
}

static enum qb_status read_log(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_names(s->log_parameters, &s->n_log_parameters, AUDIT_MAX_COLUMNS, v, where, e);
}

static enum qb_status read_range(const json_t *v, double min, double max, double *out, const char *where,
                                 struct qb_error *e)
{
	const double x = audit_number(v);
	if (!isfinite(x))
		return qb_fail(e, QB_FORMAT, where, NULL, "is not a finite number");
	if (x < min || x > max)
		return qb_fail(e, QB_RANGE, where, NULL, "is %.9g, accepted: %.9g to %.9g", x, min, max);
	*out = x;
	return QB_OK;
}

static enum qb_status read_name(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	if (!json_is_string(v) || !text_is_line(json_string_value(v), 128))
		return qb_fail(e, QB_FORMAT, where, NULL, "must be one line of 1 to 128 bytes");
	qb_free(s->name);
	s->name = qb_strdup(json_string_value(v));
	return QB_OK;
}

static enum qb_status read_confidence(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_range(v, 0.5, 0.999999, &s->confidence, where, e);
}

static enum qb_status read_closing(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_range(v, -1e12, 1e12, &s->closing_gps, where, e);
}

static enum qb_status read_base(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_range(v, 1e-6, 1e4, &s->match_base_s, where, e);
}

static enum qb_status read_factor(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_range(v, 0, 1e3, &s->match_sigma_factor, where, e);
}

static enum qb_status read_max(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_range(v, 1e-6, 1e4, &s->match_max_s, where, e);
}

static enum qb_status read_bins(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	if (!json_is_integer(v) || json_integer_value(v) < 1 || json_integer_value(v) > 1000)
		return qb_fail(e, QB_RANGE, where, NULL, "must be a whole number, 1 to 1000");
	s->n_bins = (size_t)json_integer_value(v);
	return QB_OK;
}

/* The seed is 64 bits; JSON integers stop at 63, so that larger ones come as decimal strings. */
static enum qb_status read_seed(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	if (json_is_integer(v) && json_integer_value(v) >= 0) {
		s->seed = (uint64_t)json_integer_value(v);
		return QB_OK;
	}
	const char *text = json_string_value(v);
	uint64_t seed = 0;
	bool good = text != NULL && *text != '\0' && strlen(text) <= 20;
	for (const char *p = text; good && *p != '\0'; p++) {
		const unsigned digit = (unsigned)(*p - '0');
		good = digit <= 9 && seed <= (UINT64_MAX - digit) / 10;
		seed = seed * 10 + digit;
	}
	if (!good)
		return qb_fail(e, QB_FORMAT, where, NULL, "must be a whole number below 2^64");
	s->seed = seed;
	return QB_OK;
}

static enum qb_status read_thresholds(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	if (!json_is_array(v) || json_array_size(v) > AUDIT_MAX_THRESHOLDS)
		return qb_fail(e, QB_FORMAT, where, NULL, "must be a list of at most %d rates", AUDIT_MAX_THRESHOLDS);
	for (size_t i = 0; i < json_array_size(v); i++) {
		const enum qb_status st = read_range(json_array_get(v, i), 0, 1e12,
		                                     &s->far_thresholds_per_year[s->n_far_thresholds++], where, e);
		if (st != QB_OK)
			return st;
	}
	return QB_OK;
}

static enum qb_status read_segments(struct audit_segments *out, const json_t *v, const char *where, struct qb_error *e)
{
	if (!json_is_array(v) || json_array_size(v) > AUDIT_MAX_SEGMENTS)
		return qb_fail(e, QB_FORMAT, where, NULL, "must be a list of [start, end] pairs");
	for (size_t i = 0; i < json_array_size(v); i++) {
		const json_t *pair = json_array_get(v, i);
		const double start = audit_number(json_array_get(pair, 0)), end = audit_number(json_array_get(pair, 1));
		if (json_array_size(pair) != 2 || !isfinite(start) || !isfinite(end) || end < start)
			return qb_fail(e, QB_FORMAT, where, NULL, "entry %zu is not [start, end] with start <= end", i);
		segments_add(out, start, end);
	}
	segments_tidy(out);
	return QB_OK;
}

static enum qb_status read_observing(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_segments(&s->observing, v, where, e);
}

static enum qb_status read_vetoes(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	return read_segments(&s->vetoes, v, where, e);
}

static enum qb_status read_band(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	const char *name;
	json_t *at;
	if (!json_is_object(v) || json_object_size(v) > AUDIT_MAX_QUESTIONS)
		return qb_fail(e, QB_FORMAT, where, NULL, "must map covariates to values");
	json_object_foreach((json_t *)v, name, at)
	{
		double x;
		const enum qb_status st = read_range(at, -1e12, 1e12, &x, where, e);
		if (st != QB_OK)
			return st;
		s->band_at[s->n_band_at++] = (struct audit_band_point){qb_strdup(name), x};
	}
	return QB_OK;
}

static enum qb_status read_question(struct audit_settings *s, const json_t *q, const char *where, struct qb_error *e)
{
	const char *pipeline = NULL;
	struct audit_question *out = &s->questions[s->n_questions];
	enum qb_status st = json_str(q, "pipeline", where, &pipeline, e);
	if (st == QB_OK)
		st = read_range(json_object_get(q, "efficiency_at_network_snr"), 0, 1e6, &out->network_snr, where, e);
	if (st == QB_OK)
		st = read_range(json_object_get(q, "at_least"), 0, 1, &out->at_least, where, e);
	if (st != QB_OK)
		return st;
	out->pipeline = -1;
	for (size_t i = 0; i < s->n_pipelines; i++)
		if (strcmp(s->pipelines[i], pipeline) == 0)
			out->pipeline = (int)i;
	if (out->pipeline < 0 && strcmp(pipeline, "any") != 0)
		return qb_fail(e, QB_FORMAT, where, "name a pipeline of the plan, or any", "unknown pipeline %s",
		               pipeline);
	s->n_questions++;
	return QB_OK;
}

static enum qb_status read_questions(struct audit_settings *s, const json_t *v, const char *where, struct qb_error *e)
{
	if (!json_is_array(v) || json_array_size(v) > AUDIT_MAX_QUESTIONS)
		return qb_fail(e, QB_FORMAT, where, NULL, "must be a list of at most %d questions",
		               AUDIT_MAX_QUESTIONS);
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < json_array_size(v); i++)
		st = read_question(s, json_array_get(v, i), where, e);
	return st;
}

/* In this order, since questions name pipelines. */
static const struct {
	const char *key;
	settings_reader *read;
	bool required;
} settings_keys[] = {
    {"name", read_name, false},
    {"pipelines", read_pipelines, true},
    {"closing_gps", read_closing, true},
    {"observing_segments_gps", read_observing, true},
    {"veto_segments_gps", read_vetoes, false},
    {"confidence", read_confidence, false},
    {"audit_seed", read_seed, false},
    {"match_base_s", read_base, false},
    {"match_sigma_factor", read_factor, false},
    {"match_max_s", read_max, false},
    {"parameters", read_parameters, false},
    {"log_parameters", read_log, false},
    {"far_thresholds_per_year", read_thresholds, false},
    {"n_bins", read_bins, false},
    {"band_at", read_band, false},
    {"questions", read_questions, false},
};

/* Keys of the folder whose blocks this version of the audit does not compute; they are accepted without a remark. */
static const char *const settings_later[] = {
    "far_ceiling_per_year",
    "time_volume_far_per_year",
    "n_time_shifts",
    "population",
    "latency_marks_s",
    "milestone_steps",
    "observables",
    "recognition",
    "cosmology",
    "delivery",
};

static bool key_is_known(const char *key)
{
	for (size_t i = 0; i < sizeof settings_keys / sizeof settings_keys[0]; i++)
		if (strcmp(settings_keys[i].key, key) == 0)
			return true;
	for (size_t i = 0; i < sizeof settings_later / sizeof settings_later[0]; i++)
		if (strcmp(settings_later[i], key) == 0)
			return true;
	return false;
}

enum qb_status audit_input_settings(struct audit_input *in, const json_t *doc, const char *what, struct qb_error *e)
{
	if (!json_is_object(doc))
		return qb_fail(e, QB_FORMAT, what, NULL, "is not a JSON object");
	struct audit_settings *s = &in->settings;
	if (s->n_pipelines > 0)
		return qb_fail(e, QB_FORMAT, what, NULL, "settings were given twice");
	for (size_t i = 0; i < sizeof settings_keys / sizeof settings_keys[0]; i++) {
		char where[160];
		(void)snprintf(where, sizeof where, "%s: %s", what, settings_keys[i].key);
		const json_t *v = json_object_get(doc, settings_keys[i].key);
		if (v == NULL && settings_keys[i].required)
			return qb_fail(e, QB_FORMAT, where, "add it", "is missing");
		const enum qb_status st = v == NULL ? QB_OK : settings_keys[i].read(s, v, where, e);
		if (st != QB_OK)
			return st;
	}
	if (s->n_pipelines == 0)
		return qb_fail(e, QB_FORMAT, what, "name at least one pipeline", "pipelines is empty");
	if (s->match_max_s < s->match_base_s)
		return qb_fail(e, QB_RANGE, what, NULL, "match_max_s is below match_base_s");
	const char *key;
	json_t *v;
	json_object_foreach((json_t *)doc, key, v) if (!key_is_known(key))
	    json_array_append_new(s->unknown_keys, json_string(key));
	return QB_OK;
}

enum qb_status audit_input_settings_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                         struct qb_error *e)
{
	json_t *doc = NULL;
	enum qb_status st = json_read(text, n, what, &doc, e);
	if (st == QB_OK)
		st = audit_input_settings(in, doc, what, e);
	json_decref(doc);
	return st;
}
