/* Lists for people in the document: groups of unexplained claims, drills, misses, residuals, and every claim's status.
 */
#include "server/audit/document.h"

#include <math.h>
#include <stdio.h>

#include "server/audit/recovery.h"
#include "server/base/alloc.h"

static double to_ms(double gps)
{
	return round(gps * 1000) / 1000;
}

static json_t *group(const struct audit_results *r, const struct audit_group *g)
{
	json_t *o = json_object(), *claims = json_array(), *pipelines = json_array();
	bool seen[AUDIT_MAX_PIPELINES] = {false};
	for (size_t i = g->first; i < g->first + g->n; i++) {
		const struct audit_claim *c = &r->in->claims[r->groups.claims[i]];
		json_array_append_new(claims, json_string(c->claim_id));
		seen[c->pipeline] = true;
	}
	for (size_t p = 0; p < r->match.n_pipelines; p++)
		if (seen[p])
			json_array_append_new(pipelines, json_string(r->in->settings.pipelines[p]));
	document_set(o, "time_gps", document_real(to_ms(g->mean_gps)));
	document_set(o, "pipelines", pipelines);
	document_set(o, "claims", claims);
	return o;
}

json_t *document_groups(const struct audit_results *r)
{
	json_t *o = json_object(), *counts = json_object(), *times = json_array(), *list = json_array();
	for (size_t k = 1; k <= r->match.n_pipelines; k++) {
		size_t n = 0;
		char key[24];
		for (size_t i = 0; i < r->groups.n; i++)
			n += r->groups.at[i].pipelines == k;
		(void)snprintf(key, sizeof key, "%zu", k);
		if (n > 0)
			document_set(counts, key, document_count(n));
	}
	for (size_t i = 0; i < r->groups.n; i++)
		if (r->groups.at[i].pipelines == r->match.n_pipelines)
			json_array_append_new(times, document_real(to_ms(r->groups.at[i].mean_gps)));
	/* Most pipelines first: the list is read from the top. */
	for (size_t k = r->match.n_pipelines; k >= 1; k--)
		for (size_t i = 0; i < r->groups.n; i++)
			if (r->groups.at[i].pipelines == k)
				json_array_append_new(list, group(r, &r->groups.at[i]));
	document_set(o, "by_number_of_pipelines", counts);
	document_set(o, "all_pipelines_times_gps", times);
	document_set(o, "groups", list);
	return o;
}

static json_t *finders(const struct audit_results *r, size_t slot)
{
	json_t *a = json_array();
	for (size_t p = 0; p < r->match.n_pipelines; p++)
		if (r->match.claim_of[p * r->match.n_slots + slot] >= 0)
			json_array_append_new(a, json_string(r->in->settings.pipelines[p]));
	return a;
}

static json_t *drill(const struct audit_results *r, size_t slot)
{
	const struct audit_slot *s = &r->in->slots[slot];
	json_t *o = json_object();
	document_set(o, "slot_id", json_string(s->slot_id));
	document_set(o, "arrival_gps", document_real(s->arrival_gps));
	document_set(o, "state", json_string(audit_state_word(s->state)));
	for (size_t i = 0; i < s->n_values; i++)
		document_set(o, r->in->columns[s->values[i].column], document_real(s->values[i].value));
	return o;
}

json_t *document_drills(const struct audit_results *r)
{
	json_t *a = json_array();
	for (size_t s = 0; s < r->in->n_slots; s++) {
		if (!audit_state_actuated(r->in->slots[s].state))
			continue;
		json_t *o = drill(r, s);
		document_set(o, "crowded", json_boolean(r->crowded[s]));
		document_set(o, "claimed_by", finders(r, s));
		json_array_append_new(a, o);
	}
	return a;
}

/* What a reader of the list of misses needs first: when, how loud, how heavy, how far. */
static json_t *missed_drill(const struct audit_results *r, size_t slot)
{
	static const char *const names[] = {"network_snr", "delivered_network_snr", "chirp_mass_msun", "distance_mpc"};
	const struct audit_slot *s = &r->in->slots[slot];
	json_t *o = json_object();
	document_set(o, "slot_id", json_string(s->slot_id));
	document_set(o, "arrival_gps", document_real(s->arrival_gps));
	for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
		const double x = audit_truth(r->in, s, names[i]);
		if (isfinite(x))
			document_set(o, names[i], document_real(x));
	}
	return o;
}

json_t *document_missed(const struct audit_results *r)
{
	json_t *o = json_object(), *nobody = json_array(), *each = json_object();
	for (size_t p = 0; p < r->match.n_pipelines; p++)
		document_set(each, r->in->settings.pipelines[p], json_array());
	for (size_t s = 0; s < r->in->n_slots; s++) {
		if (r->in->slots[s].state != AUDIT_LIVE)
			continue;
		bool any = false;
		for (size_t p = 0; p < r->match.n_pipelines; p++) {
			if (audit_found_by(&r->match, r->in, p, s) >= 0)
				any = true;
			else
				json_array_append_new(json_object_get(each, r->in->settings.pipelines[p]),
				                      missed_drill(r, s));
		}
		if (!any)
			json_array_append_new(nobody, missed_drill(r, s));
	}
	document_set(o, "by_all", nobody);
	document_set(o, "by_pipeline", each);
	return o;
}

json_t *document_unexplained(const struct audit_results *r)
{
	json_t *a = json_array();
	for (size_t g = 0; g < r->groups.n; g++) {
		for (size_t i = r->groups.at[g].first; i < r->groups.at[g].first + r->groups.at[g].n; i++) {
			const size_t claim = r->groups.claims[i];
			const struct audit_claim *c = &r->in->claims[claim];
			json_t *o = json_object();
			document_set(o, "pipeline", json_string(r->in->settings.pipelines[c->pipeline]));
			document_set(o, "claim_id", json_string(c->claim_id));
			document_set(o, "arrival_gps", document_real(c->arrival_gps));
			document_set(o, "window_s", document_real(r->match.fates[claim].window_s));
			document_set(o, "false_alarm_rate_per_year", document_real(c->far_per_year));
			document_set(o, "network_snr", document_real(c->network_snr));
			document_set(o, "pipelines_in_group", document_count(r->groups.at[g].pipelines));
			document_set(o, "near_null_slot", json_boolean(r->match.fates[claim].near_null_slot));
			json_array_append_new(a, o);
		}
	}
	return a;
}

json_t *document_claims(const struct audit_results *r)
{
	json_t *a = json_array();
	for (size_t i = 0; i < r->in->n_claims; i++) {
		const struct audit_claim *c = &r->in->claims[i];
		const struct audit_fate *f = &r->match.fates[i];
		json_t *o = json_object();
		document_set(o, "pipeline", json_string(r->in->settings.pipelines[c->pipeline]));
		document_set(o, "claim_id", json_string(c->claim_id));
		document_set(o, "status", json_string(audit_status_word(f->status)));
		document_set(o, "slot_id", f->slot >= 0 ? json_string(r->in->slots[f->slot].slot_id) : json_null());
		document_set(o, "flag", f->near_null_slot ? json_string("near_null_slot") : json_null());
		json_array_append_new(a, o);
	}
	return a;
}

static json_t *residual_list(const struct audit_results *r, const struct audit_residuals *res, const char *unit_key)
{
	json_t *a = json_array();
	for (size_t i = 0; i < res->n; i++) {
		const struct audit_residual *x = &res->at[i];
		json_t *o = json_object();
		document_set(o, "claim_id", json_string(r->in->claims[x->claim].claim_id));
		document_set(o, "slot_id", json_string(r->in->slots[x->slot].slot_id));
		document_set(o, "stated", document_real(x->stated));
		document_set(o, "truth", document_real(x->truth));
		document_set(o, unit_key, document_real(x->stated - x->truth));
		document_set(o, "z", document_real(x->z));
		json_array_append_new(a, o);
	}
	return a;
}

static json_t *residual_block(const struct audit_results *r, const struct audit_residuals *res, const char *summary_of,
                              const char *unit_key)
{
	json_t *o = json_object();
	document_set(o, "n", document_count(res->n));
	document_set(o, "summary_of", json_string(summary_of));
	document_set(o, "mean", document_real(res->mean));
	document_set(o, "sd", document_real(res->sd));
	document_set(o, "median", document_real(res->median));
	document_set(o, "stated_above_truth", document_count(res->above));
	document_set(o, "stated_below_truth", document_count(res->below));
	document_set(o, "sign_p", document_real(res->sign_p));
	document_set(o, "list", residual_list(r, res, unit_key));
	return o;
}

json_t *document_residuals(const struct audit_results *r)
{
	json_t *all = json_object();
	for (size_t p = 0; p < r->match.n_pipelines; p++) {
		json_t *o = json_object();
		struct audit_residuals t = audit_arrivals_of(r->in, &r->match, p);
		struct audit_residuals c = audit_residuals_of(r->in, &r->match, p, "chirp_mass_msun");
		document_set(o, "arrival_gps", residual_block(r, &t, "difference_s", "difference_s"));
		document_set(o, "chirp_mass_msun", residual_block(r, &c, "z", "difference_msun"));
		document_set(all, r->in->settings.pipelines[p], o);
		audit_residuals_free(&t);
		audit_residuals_free(&c);
	}
	return all;
}
