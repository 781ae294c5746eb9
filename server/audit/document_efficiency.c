/* Blocks of the document about efficiency: per pipeline, along covariates, the union and the table of who found what.
 */
#include "server/audit/document.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "server/audit/recovery.h"
#include "server/base/alloc.h"

static size_t count_state(const struct audit_input *in, enum audit_state state)
{
	size_t n = 0;
	for (size_t i = 0; i < in->n_slots; i++)
		n += in->slots[i].state == state;
	return n;
}

static json_t *status_counts(const struct audit_results *r, size_t p)
{
	json_t *o = json_object();
	for (unsigned s = 0; s < AUDIT_STATUS_COUNT; s++)
		if (r->match.status_counts[p][s] > 0)
			document_set(o, audit_status_word((enum audit_status)s),
			             document_count(r->match.status_counts[p][s]));
	return o;
}

static json_t *matching(const struct assign_result *a)
{
	json_t *o = json_object(), *sizes = json_object();
	for (size_t i = 0; i < a->n_sizes; i++) {
		char key[48];
		(void)snprintf(key, sizeof key, "%zux%zu", a->sizes[i].claims, a->sizes[i].drills);
		document_set(sizes, key, document_count(a->sizes[i].count));
	}
	document_set(o, "edges", document_count(a->edges));
	document_set(o, "components", document_count(a->components));
	document_set(o, "component_sizes", sizes);
	document_set(o, "total_weight_units", json_integer(a->total_weight));
	return o;
}

static json_t *accidental(const struct audit_accidental *a)
{
	json_t *o = json_object();
	document_set(o, "lambda", document_real(a->lambda));
	document_set(o, "probability", document_real(a->probability));
	document_set(o, "standard_error", document_real(a->standard_error));
	document_set(o, "background_claims", document_count(a->background_claims));
	document_set(o, "by_quarter", json_boolean(a->by_quarter));
	return o;
}

static json_t *corrected(const struct audit_efficiency *eff, const struct audit_accidental *a)
{
	if (eff->of == 0)
		return json_null();
	double c[3];
	json_t *o = json_array();
	audit_corrected(eff->estimate, eff->wilson, a, c);
	for (int i = 0; i < 3; i++)
		json_array_append_new(o, document_real(c[i]));
	return o;
}

/* Live drills, those found with a rate below the threshold, and the crowded ones set aside on request. */
static struct audit_efficiency count_found(const struct audit_results *r, size_t p, double far_below, bool uncrowded)
{
	uint64_t live = 0, found = 0;
	for (size_t s = 0; s < r->in->n_slots; s++) {
		if (r->in->slots[s].state != AUDIT_LIVE || (uncrowded && r->crowded[s]))
			continue;
		live++;
		const ptrdiff_t claim = audit_found_by(&r->match, r->in, p, s);
		found += claim >= 0 && (isinf(far_below) || r->in->claims[claim].far_per_year < far_below);
	}
	return audit_efficiency_of(found, live, r->in->settings.confidence);
}

static json_t *efficiency(const struct audit_results *r, const struct audit_efficiency *eff,
                          const struct audit_accidental *a)
{
	json_t *o = json_object();
	document_set(o, "live", document_count(count_state(r->in, AUDIT_LIVE)));
	document_efficiency(o, eff);
	document_set(o, "corrected", corrected(eff, a));
	return o;
}

/* Everything that was played counts here, so that setting a drill aside afterwards can't improve the number. */
static json_t *intention_to_treat(const struct audit_results *r, int p, uint64_t found)
{
	uint64_t played = 0, any = 0;
	for (size_t s = 0; s < r->in->n_slots; s++) {
		if (!audit_state_actuated(r->in->slots[s].state))
			continue;
		played++;
		bool matched = false;
		for (size_t k = 0; k < r->match.n_pipelines; k++)
			if (p < 0 || k == (size_t)p)
				matched = matched || r->match.claim_of[k * r->match.n_slots + s] >= 0;
		any += matched;
	}
	const struct audit_efficiency eff = audit_efficiency_of(found, played, r->in->settings.confidence);
	json_t *o = json_object();
	document_set(o, "played", document_count(played));
	document_efficiency(o, &eff);
	document_set(o, "matched_any_played", document_count(any));
	return o;
}

static json_t *null_slot_test(const struct audit_results *r, size_t p)
{
	const size_t nulls = count_state(r->in, AUDIT_NULL), near = r->match.near_null[p];
	const double expected = (double)nulls * r->accidental[p].lambda;
	json_t *o = json_object();
	document_set(o, "null_slots", document_count(nulls));
	document_set(o, "near_null_claims", document_count(near));
	document_set(o, "expected", document_real(expected));
	document_set(o, "p_too_many", document_real(audit_poisson_at_least(near, expected)));
	return o;
}

static json_t *uncrowded(const struct audit_results *r, size_t p)
{
	const struct audit_efficiency eff = count_found(r, p, INFINITY, true);
	size_t crowded = 0;
	json_t *o = json_object();
	for (size_t s = 0; s < r->in->n_slots; s++)
		crowded += r->crowded[s];
	document_set(o, "live", document_count(eff.of));
	document_efficiency(o, &eff);
	document_set(o, "crowded_live", document_count(crowded));
	return o;
}

static json_t *by_far(const struct audit_results *r, size_t p)
{
	json_t *a = json_array();
	const struct audit_settings *s = &r->in->settings;
	for (size_t i = 0; i < s->n_far_thresholds; i++) {
		const struct audit_efficiency eff = count_found(r, p, s->far_thresholds_per_year[i], false);
		json_t *o = json_object();
		document_set(o, "false_alarm_rate_below_per_year", document_real(s->far_thresholds_per_year[i]));
		document_efficiency(o, &eff);
		json_array_append_new(a, o);
	}
	return a;
}

static bool falls_with(const char *covariate)
{
	return strcmp(covariate, "distance_mpc") == 0;
}

json_t *document_curve(const struct audit_results *r, int pipeline, const char *covariate)
{
	const struct audit_settings *s = &r->in->settings;
	struct audit_outcomes o = audit_outcomes_of(r->in, &r->match, pipeline, covariate);
	struct audit_bin *bins;
	const size_t n = audit_bins(&o, s->n_bins, s->confidence, &bins);
	json_t *curve = json_object(), *list = json_array();
	char name[80];
	(void)snprintf(name, sizeof name, "ln %s", covariate);
	document_set(curve, "covariate", json_string(name));
	for (size_t i = 0; i < n; i++) {
		const struct audit_efficiency *eff = &bins[i].efficiency;
		json_t *b = json_object();
		document_set(b, "lower_edge", document_real(bins[i].first));
		document_set(b, "upper_edge", document_real(bins[i].last));
		document_set(b, "mean", document_real(bins[i].mean));
		document_set(b, "drills", document_count(eff->of));
		document_set(b, "found", document_count(eff->found));
		document_set(b, "efficiency", document_real(eff->estimate));
		document_set(b, "wilson", document_pair(eff->wilson.lower, eff->wilson.upper));
		document_set(b, "clopper_pearson",
		             document_pair(eff->clopper_pearson.lower, eff->clopper_pearson.upper));
		json_array_append_new(list, b);
	}
	document_set(curve, "bins", list);
	for (size_t i = 0; i < s->n_band_at; i++) {
		if (strcmp(s->band_at[i].covariate, covariate) != 0)
			continue;
		const struct audit_interval band =
		    audit_monotone_band(&o, s->band_at[i].at, !falls_with(covariate), s->confidence);
		json_t *b = json_object();
		document_set(b, "at", document_real(s->band_at[i].at));
		document_set(b, "interval", document_pair(band.lower, band.upper));
		document_set(curve, "monotone_band", b);
	}
	qb_free(bins);
	audit_outcomes_free(&o);
	return curve;
}

/* Covariates that some live drill carries; the delivered SNR, where measured, is the covariate of record. */
static json_t *curves(const struct audit_results *r, int pipeline)
{
	static const char *const names[] = {"network_snr", "delivered_network_snr", "distance_mpc", "chirp_mass_msun"};
	json_t *o = json_object();
	for (size_t i = 0; i < sizeof names / sizeof names[0]; i++)
		if (audit_column(r->in, names[i]) >= 0)
			document_set(o, names[i], document_curve(r, pipeline, names[i]));
	return o;
}

static json_t *recovery(const struct audit_results *r, size_t p)
{
	json_t *all = json_object();
	for (size_t i = 0; i < r->in->settings.n_parameters; i++) {
		const char *name = r->in->settings.parameters[i];
		struct audit_residuals res = audit_residuals_of(r->in, &r->match, p, name);
		if (res.n + res.unusable > 0) {
			json_t *o = json_object(), *z = json_object();
			document_set(z, "n", document_count(res.n));
			document_set(z, "mean", document_real(res.mean));
			document_set(z, "sd", document_real(res.sd));
			document_set(z, "mean_se", document_real(res.mean_se));
			document_set(z, "p_mean_zero", document_real(res.p_mean_zero));
			document_set(z, "median", document_real(res.median));
			document_set(o, "claims", document_count(res.n));
			document_set(o, "unusable", document_count(res.unusable));
			document_set(o, "residual", z);
			document_set(o, "median_above_truth", document_count(res.above));
			document_set(o, "sign_p", document_real(res.sign_p));
			document_set(all, name, o);
		}
		audit_residuals_free(&res);
	}
	return all;
}

json_t *document_pipeline(const struct audit_results *r, size_t p)
{
	const struct audit_efficiency eff = count_found(r, p, INFINITY, false);
	json_t *o = json_object();
	document_set(o, "claims_in_file", document_count(r->match.claims_in_file[p]));
	document_set(o, "status_counts", status_counts(r, p));
	document_set(o, "near_null_slot", document_count(r->match.near_null[p]));
	document_set(o, "matching", matching(&r->match.per_pipeline[p]));
	document_set(o, "accidental", accidental(&r->accidental[p]));
	document_set(o, "efficiency", efficiency(r, &eff, &r->accidental[p]));
	document_set(o, "intention_to_treat", intention_to_treat(r, (int)p, eff.found));
	document_set(o, "null_slot_test", null_slot_test(r, p));
	document_set(o, "efficiency_uncrowded", uncrowded(r, p));
	document_set(o, "efficiency_by_far", by_far(r, p));
	document_set(o, "curves", curves(r, (int)p));
	document_set(o, "recovery_quantiles", recovery(r, p));
	return o;
}

static int by_text(const void *a, const void *b)
{
	return strcmp(a, b);
}

/* Counts of live drills for every set of pipelines that occurs, as bit strings in plan order. */
static json_t *found_by_table(const struct audit_results *r, uint64_t *any, uint64_t *all)
{
	const size_t width = r->match.n_pipelines + 1;
	char *keys = qb_alloc(r->in->n_slots, width);
	size_t n = 0;
	json_t *table = json_object();
	*any = *all = 0;
	for (size_t s = 0; s < r->in->n_slots; s++) {
		if (r->in->slots[s].state != AUDIT_LIVE)
			continue;
		char *key = keys + n++ * width;
		size_t found = 0;
		for (size_t p = 0; p < r->match.n_pipelines; p++) {
			const bool yes = audit_found_by(&r->match, r->in, p, s) >= 0;
			key[p] = yes ? '1' : '0';
			found += yes;
		}
		*any += found > 0;
		*all += found == r->match.n_pipelines;
	}
	qsort(keys, n, width, by_text);
	for (size_t i = 0, same = 0; i < n; i++) {
		same++;
		if (i + 1 == n || strcmp(keys + i * width, keys + (i + 1) * width) != 0) {
			document_set(table, keys + i * width, document_count(same));
			same = 0;
		}
	}
	qb_free(keys);
	return table;
}

json_t *document_comparison(const struct audit_results *r)
{
	const struct audit_settings *s = &r->in->settings;
	const struct audit_accidental chance = audit_accidental_union(r->accidental, s->n_pipelines);
	const uint64_t live = count_state(r->in, AUDIT_LIVE);
	uint64_t any, all;
	json_t *o = json_object(), *names = json_array(), *every = json_object();
	json_t *table = found_by_table(r, &any, &all);
	const struct audit_efficiency u = audit_efficiency_of(any, live, s->confidence);
	const struct audit_efficiency a = audit_efficiency_of(all, live, s->confidence);
	for (size_t p = 0; p < s->n_pipelines; p++)
		json_array_append_new(names, json_string(s->pipelines[p]));
	document_set(o, "pipelines", names);
	document_set(o, "found_by", table);
	document_set(o, "union", efficiency(r, &u, &chance));
	document_set(o, "union_accidental_probability", document_real(chance.probability));
	document_set(o, "union_intention_to_treat", intention_to_treat(r, -1, any));
	document_set(o, "union_curves", curves(r, -1));
	document_efficiency(every, &a);
	document_set(o, "all", every);
	return o;
}

static const char *answer(const struct audit_interval *band, double at_least)
{
	if (band->lower >= at_least)
		return "yes";
	return band->upper < at_least ? "no" : "not_shown";
}

json_t *document_questions(const struct audit_results *r)
{
	const struct audit_settings *s = &r->in->settings;
	const bool delivered = audit_column(r->in, "delivered_network_snr") >= 0;
	const char *covariate = delivered ? "delivered_network_snr" : "network_snr";
	json_t *list = json_array();
	for (size_t i = 0; i < s->n_questions; i++) {
		const struct audit_question *q = &s->questions[i];
		struct audit_outcomes x = audit_outcomes_of(r->in, &r->match, q->pipeline, covariate);
		const struct audit_interval band = audit_monotone_band(&x, q->network_snr, true, s->confidence);
		json_t *o = json_object();
		document_set(o, "pipeline", json_string(q->pipeline < 0 ? "any" : s->pipelines[q->pipeline]));
		document_set(o, "covariate", json_string(covariate));
		document_set(o, "efficiency_at_network_snr", document_real(q->network_snr));
		document_set(o, "at_least", document_real(q->at_least));
		document_set(o, "live", document_count(x.n));
		document_set(o, "interval", document_pair(band.lower, band.upper));
		document_set(o, "answer", json_string(answer(&band, q->at_least)));
		json_array_append_new(list, o);
		audit_outcomes_free(&x);
	}
	return list;
}
