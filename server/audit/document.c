/* Runs the audit and assembles its document; helpers that keep NaN out of JSON live here too. */
#include "server/audit/document.h"

#include <math.h>

#include "server/audit/audit.h"
#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"

json_t *document_real(double x)
{
	return isfinite(x) ? json_real(x) : json_null();
}

json_t *document_count(size_t n)
{
	return json_integer((json_int_t)n);
}

json_t *document_pair(double lower, double upper)
{
	json_t *a = json_array();
	json_array_append_new(a, document_real(lower));
	json_array_append_new(a, document_real(upper));
	return a;
}

void document_set(json_t *obj, const char *key, json_t *value)
{
	CHECK(json_object_set_new(obj, key, value) == 0);
}

void document_efficiency(json_t *obj, const struct audit_efficiency *eff)
{
	const bool any = eff->of > 0;
	document_set(obj, "found", document_count(eff->found));
	document_set(obj, "estimate", document_real(eff->estimate));
	document_set(obj, "clopper_pearson",
	             any ? document_pair(eff->clopper_pearson.lower, eff->clopper_pearson.upper) : json_null());
	document_set(obj, "wilson", any ? document_pair(eff->wilson.lower, eff->wilson.upper) : json_null());
}

static json_t *settings_used(const struct audit_settings *s)
{
	json_t *o = json_object(), *thresholds = json_array(), *pipelines = json_array();
	document_set(o, "confidence", document_real(s->confidence));
	document_set(o, "closing_gps", document_real(s->closing_gps));
	if (s->seed <= INT64_MAX) {
		document_set(o, "audit_seed", json_integer((json_int_t)s->seed));
	} else {
		char *text = text_printf("%llu", (unsigned long long)s->seed);
		document_set(o, "audit_seed", json_string(text));
		qb_free(text);
	}
	document_set(o, "match_base_s", document_real(s->match_base_s));
	document_set(o, "match_sigma_factor", document_real(s->match_sigma_factor));
	document_set(o, "match_max_s", document_real(s->match_max_s));
	for (size_t i = 0; i < s->n_far_thresholds; i++)
		json_array_append_new(thresholds, document_real(s->far_thresholds_per_year[i]));
	for (size_t i = 0; i < s->n_pipelines; i++)
		json_array_append_new(pipelines, json_string(s->pipelines[i]));
	document_set(o, "far_thresholds_per_year", thresholds);
	document_set(o, "pipelines", pipelines);
	document_set(o, "n_bins", s->n_bins > 0 ? document_count(s->n_bins) : json_null());
	document_set(o, "not_understood", json_deep_copy(s->unknown_keys));
	return o;
}

static json_t *slot_states(const struct audit_input *in)
{
	size_t counts[AUDIT_STATE_COUNT] = {0};
	json_t *o = json_object();
	for (size_t i = 0; i < in->n_slots; i++)
		counts[in->slots[i].state]++;
	for (unsigned s = 0; s < AUDIT_STATE_COUNT; s++)
		if (counts[s] > 0)
			document_set(o, audit_state_word((enum audit_state)s), document_count(counts[s]));
	return o;
}

static json_t *assemble(const struct audit_results *r)
{
	const struct audit_settings *s = &r->in->settings;
	json_t *doc = json_object(), *pipelines = json_object();
	document_set(doc, "document", json_string("audit"));
	document_set(doc, "set", s->name != NULL ? json_string(s->name) : json_null());
	document_set(doc, "settings_used", settings_used(s));
	document_set(doc, "slot_states", slot_states(r->in));
	if (r->in->course != NULL)
		document_set(doc, "course", json_deep_copy(r->in->course));
	document_set(doc, "observing_livetime_s", document_real(r->background.observing_s));
	document_set(doc, "background_livetime_s", document_real(r->background.livetime_s));
	document_set(doc, "largest_window_s", document_real(r->match.largest_window_s));
	document_set(doc, "unexplained_groups", document_groups(r));
	document_set(doc, "questions", document_questions(r));
	for (size_t p = 0; p < s->n_pipelines; p++)
		document_set(pipelines, s->pipelines[p], document_pipeline(r, p));
	document_set(doc, "pipelines", pipelines);
	document_set(doc, "comparison", document_comparison(r));
	document_set(doc, "drills", document_drills(r));
	document_set(doc, "missed", document_missed(r));
	document_set(doc, "unexplained", document_unexplained(r));
	document_set(doc, "residuals", document_residuals(r));
	document_set(doc, "claims", document_claims(r));
	return doc;
}

enum qb_status audit_run(const struct audit_input *in, json_t **out, struct qb_error *e)
{
	*out = NULL;
	struct audit_results r = {.in = in};
	const enum qb_status st = audit_match(in, &r.match, e);
	if (st != QB_OK)
		return st;
	r.background = audit_background_of(in, &r.match);
	for (size_t p = 0; p < in->settings.n_pipelines; p++)
		r.accidental[p] = audit_accidental_of(in, &r.match, &r.background, p);
	r.groups = audit_groups_of(in, &r.match);
	r.crowded = QB_NEW_ARRAY(bool, in->n_slots);
	audit_mark_crowded(in, r.crowded);
	*out = assemble(&r);
	audit_match_free(&r.match);
	audit_background_free(&r.background);
	audit_groups_free(&r.groups);
	qb_free(r.crowded);
	return QB_OK;
}
