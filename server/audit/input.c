/* Life and look-up of the audit's input; reading it from JSON is input_read.c. */
#include "server/audit/input.h"

#include <math.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

static const char *const state_words[AUDIT_STATE_COUNT] = {
    [AUDIT_LIVE] = "live",       [AUDIT_FAILED_DELIVERY] = "failed_delivery",
    [AUDIT_ABORTED] = "aborted", [AUDIT_VETOED] = "vetoed",
    [AUDIT_SKIPPED] = "skipped", [AUDIT_NULL] = "null",
};

const char *audit_state_word(enum audit_state s)
{
	CHECK((unsigned)s < AUDIT_STATE_COUNT);
	return state_words[s];
}

bool audit_state_actuated(enum audit_state s)
{
	return s == AUDIT_LIVE || s == AUDIT_FAILED_DELIVERY || s == AUDIT_ABORTED;
}

struct audit_input *audit_input_new(void)
{
	struct audit_input *in = QB_NEW(struct audit_input);
	in->settings.confidence = 0.95;
	in->settings.closing_gps = NAN;
	in->settings.match_base_s = 0.5;
	in->settings.match_sigma_factor = 3;
	in->settings.match_max_s = 5;
	in->settings.unknown_keys = json_array();
	return in;
}

static void names_free(char **names, size_t n)
{
	for (size_t i = 0; i < n; i++)
		qb_free(names[i]);
}

void audit_input_free(struct audit_input **in_out)
{
	struct audit_input *in = *in_out;
	*in_out = NULL;
	if (in == NULL)
		return;
	struct audit_settings *s = &in->settings;
	qb_free(s->name);
	names_free(s->pipelines, s->n_pipelines);
	names_free(s->parameters, s->n_parameters);
	names_free(s->log_parameters, s->n_log_parameters);
	for (size_t i = 0; i < s->n_band_at; i++)
		qb_free(s->band_at[i].covariate);
	segments_free(&s->observing);
	segments_free(&s->vetoes);
	json_decref(s->unknown_keys);
	json_decref(in->course);
	names_free(in->columns, in->n_columns);
	for (size_t i = 0; i < in->n_slots; i++) {
		qb_free(in->slots[i].slot_id);
		qb_free(in->slots[i].values);
	}
	for (size_t i = 0; i < in->n_claims; i++) {
		qb_free(in->claims[i].claim_id);
		qb_free(in->claims[i].revision_of);
		qb_free(in->claims[i].quantiles);
	}
	qb_free(in->slots);
	qb_free(in->claims);
	qb_free(in);
}

int audit_column(const struct audit_input *in, const char *name)
{
	for (size_t i = 0; i < in->n_columns; i++)
		if (strcmp(in->columns[i], name) == 0)
			return (int)i;
	return -1;
}

double audit_truth(const struct audit_input *in, const struct audit_slot *s, const char *name)
{
	if (strcmp(name, "arrival_gps") == 0)
		return s->arrival_gps;
	const int column = audit_column(in, name);
	for (size_t i = 0; column >= 0 && i < s->n_values; i++)
		if (s->values[i].column == (unsigned)column)
			return s->values[i].value;
	return NAN;
}

const struct audit_quantiles *audit_stated(const struct audit_input *in, const struct audit_claim *c, const char *name)
{
	const int column = audit_column(in, name);
	for (size_t i = 0; column >= 0 && i < c->n_quantiles; i++)
		if (c->quantiles[i].column == (unsigned)column)
			return &c->quantiles[i];
	return NULL;
}

bool audit_is_log(const struct audit_settings *s, const char *parameter)
{
	for (size_t i = 0; i < s->n_log_parameters; i++)
		if (strcmp(s->log_parameters[i], parameter) == 0)
			return true;
	return false;
}
