/* From a verified bundle to the audit's input: settings of the plan, slots with their states, claims with their times.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/cli/bundle_verify.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/drill/report.h"

static json_t *seconds(int64_t gps_ns)
{
	return json_gps_new(gps_ns);
}

static json_t *numbers(const struct plan_numbers *x)
{
	json_t *list = json_array();
	for (int i = 0; i < x->n; i++)
		json_array_append_new(list, json_real(x->value[i]));
	return list;
}

static json_t *names(const struct plan_names *x)
{
	json_t *list = json_array();
	for (int i = 0; i < x->n; i++)
		json_array_append_new(list, json_string(x->name[i]));
	return list;
}

struct span {
	int64_t from, to;
};

static int by_start(const void *a, const void *b)
{
	const struct span *x = a, *y = b;
	return (x->from > y->from) - (x->from < y->from);
}

/* Where observing counts no more: the end of the stretch, or of a campaign that ended before it. */
static int64_t last_instant(const struct campaign *k)
{
	int64_t end = k->plan->slots.end_gps_ns;
	return k->ending != ENDING_NONE && k->ended_ns < end ? k->ended_ns : end;
}

/* All stated segments of a kind over all stations, merged. */
static enum qb_status segments_of(const struct verified *v, const char *kind, json_t *out, struct qb_error *e)
{
	struct span *span = NULL;
	size_t n = 0;
	enum qb_status st = QB_OK;
	for (uint64_t i = 0; st == QB_OK && i < v->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		size_t j;
		json_t *pair;
		if (follow_entry(&v->follow, i, &leaf, &en, NULL) != QB_OK)
			continue;
		/* frozen by closing: later versions do not count */
		bool counts = en.has_campaign && memcmp(en.campaign, v->k->id, 16) == 0 &&
		              strcmp(en.type->type, "segments") == 0 &&
		              strcmp(wire_entry_text(&en, "kind"), kind) == 0 && (int64_t)i < v->k->closing_seq;
		json_array_foreach(counts ? wire_entry_json(&en, "segments") : NULL, j, pair)
		{
			struct span s;
			if (!clock_gps_parse(json_string_value(json_array_get(pair, 0)), &s.from) ||
			    !clock_gps_parse(json_string_value(json_array_get(pair, 1)), &s.to))
				continue;
			if (v->k->ending != ENDING_NONE && s.to > last_instant(v->k))
				s.to = last_instant(v->k);
			if (s.to <= s.from)
				continue;
			span = (n & (n - 1)) == 0 ? qb_realloc(span, n > 0 ? 2 * n : 1, sizeof *span) : span;
			span[n++] = s;
		}
		wire_entry_free(&en);
	}
	(void)e;
	if (n > 0)
		qsort(span, n, sizeof *span, by_start);
	for (size_t i = 0; i < n;) {
		struct span s = span[i++];
		while (i < n && span[i].from <= s.to) {
			s.to = span[i].to > s.to ? span[i].to : s.to;
			i++;
		}
		json_t *pair = json_array();
		json_array_append_new(pair, seconds(s.from));
		json_array_append_new(pair, seconds(s.to));
		json_array_append_new(out, pair);
	}
	qb_free(span);
	return st;
}

static enum qb_status make_settings(const struct verified *v, json_t *s, struct qb_error *e)
{
	const struct drill_plan *p = v->k->plan;
	const struct plan_audit *a = &p->audit;
	json_t *pipelines = json_array(), *questions = json_array(), *band = json_object(), *observing = json_array(),
	       *vetoes = json_array();
	const struct plan_person *person;
	struct entry closing;
	enum qb_status st =
	    entry_decode(v->follow.frame[v->k->closing_seq].data, v->follow.frame[v->k->closing_seq].len, &closing, e);
	for (int i = 0; (person = plan_person(p, DUTY_ANALYST, i)) != NULL; i++)
		json_array_append_new(pipelines, json_string(person->of));
	for (int i = 0; i < p->n_questions; i++) {
		json_t *q = json_object();
		json_object_set_new(q, "pipeline", json_string(p->question[i].pipeline));
		json_object_set_new(q, "efficiency_at_network_snr",
		                    json_real(p->question[i].efficiency_at_network_snr));
		json_object_set_new(q, "at_least", json_real(p->question[i].at_least));
		json_array_append_new(questions, q);
	}
	if (isfinite(a->band_at_network_snr))
		json_object_set_new(band, "network_snr", json_real(a->band_at_network_snr));
	if (isfinite(a->band_at_distance_mpc))
		json_object_set_new(band, "distance_mpc", json_real(a->band_at_distance_mpc));
	if (st == QB_OK)
		st = segments_of(v, "observing", observing, e);
	if (st == QB_OK)
		st = segments_of(v, "veto", vetoes, e);
	if (json_array_size(observing) == 0 && last_instant(v->k) > p->slots.start_gps_ns) {
		json_t *whole = json_array();
		json_array_append_new(whole, seconds(p->slots.start_gps_ns));
		json_array_append_new(whole, seconds(last_instant(v->k)));
		json_array_append_new(observing, whole);
	}
	json_object_set_new(s, "name", json_string(v->k->name));
	json_object_set_new(s, "confidence", json_real(a->confidence));
	json_object_set_new(s, "closing_gps", seconds(st == QB_OK ? closing.received_gps_ns : 0));
	json_object_set_new(s, "audit_seed", json_integer((json_int_t)v->audit_seed));
	json_object_set_new(s, "match_base_s", json_real(a->match_base_s));
	json_object_set_new(s, "match_sigma_factor", json_real(a->match_sigma_factor));
	json_object_set_new(s, "match_max_s", json_real(a->match_max_s));
	json_object_set_new(s, "pipelines", pipelines);
	json_object_set_new(s, "parameters", names(&a->parameters));
	json_object_set_new(s, "log_parameters", names(&a->log_parameters));
	json_object_set_new(s, "far_thresholds_per_year", numbers(&a->far_thresholds_per_year));
	json_object_set_new(s, "far_ceiling_per_year", json_real(a->far_ceiling_per_year));
	if (a->n_bins > 0)
		json_object_set_new(s, "n_bins", json_integer(a->n_bins));
	json_object_set_new(s, "band_at", band);
	json_object_set_new(s, "questions", questions);
	json_object_set_new(s, "observing_segments_gps", observing);
	json_object_set_new(s, "veto_segments_gps", vetoes);
	return st;
}

/* Position of the record of this type, slot and station; the number of records when there is none. */
static size_t find_record(const struct verified *v, enum record_type type, int64_t slot, int station)
{
	uint64_t index = (uint64_t)slot * 256 + (uint64_t)station * 16 + 15;
	size_t i = 0;
	while (i < v->bundle->records.n && (v->bundle->records.item[i].rec.header.type != type ||
	                                    v->bundle->records.item[i].rec.header.index != index))
		i++;
	return i;
}

static void slot_state_of(const struct verified *v, const struct drill_truth *t, const struct states_hold *holds,
                          const struct states_stop *stops, struct states_verdict *out)
{
	const struct slots *sl = &v->k->plan->slots;
	struct play_report report[STATES_MAX_STATIONS];
	struct states_slot s = {.start_ns = slots_start(sl, t->slot),
	                        .end_ns = slots_start(sl, t->slot + 1),
	                        .freeze_ns = slots_freeze(sl, t->slot),
	                        .live = t->live,
	                        .n_stations = t->n_stations,
	                        .stations_needed = v->k->plan->stations_needed};
	for (int i = 0; i < t->n_stations; i++) {
		size_t at = find_record(v, RECORD_PLAY_REPORT, t->slot, i);
		s.station[i].ready = (v->k->slot[t->slot].ready >> i & 1) != 0;
		s.station[i].drive_from_ns = t->station[i].drive_from_ns;
		s.station[i].drive_to_ns = t->station[i].drive_to_ns;
		/* A report that can't be read is none: what its driver did is not known. */
		if (at < v->bundle->records.n && v->opens[at] &&
		    play_report_decode(v->content[at].data, v->content[at].len, &report[i], NULL) == QB_OK)
			s.station[i].report = &report[i];
	}
	states_judge(&s, holds, (size_t)v->k->n_holds, stops, (size_t)v->k->n_stops, out);
}

static enum qb_status make_slots(const struct verified *v, json_t *list, struct qb_error *e)
{
	struct states_hold *holds;
	struct states_stop *stops;
	struct drill_truth *t = QB_NEW(struct drill_truth);
	enum qb_status st = QB_OK;
	campaign_controls(v->k, &holds, &stops);
	for (size_t i = 0; st == QB_OK && i < v->bundle->records.n; i++) {
		struct states_verdict verdict;
		if (v->bundle->records.item[i].rec.header.type != RECORD_SLOT)
			continue;
		st = truth_decode(v->content[i].data, v->content[i].len, t, e);
		if (st != QB_OK)
			break;
		slot_state_of(v, t, holds, stops, &verdict);
		json_t *j = truth_audit_json(t), *played = json_array();
		double square = 0;
		for (int s = 0; s < t->n_stations; s++) {
			if (verdict.station[s] != STATION_PLAYED)
				continue;
			json_array_append_new(played, json_string(t->station[s].name));
			square += t->station[s].snr * t->station[s].snr;
		}
		json_object_set_new(j, "state", json_string(slot_state_word(verdict.state)));
		if (!campaign_reached(v->k, t->slot))
			json_object_set_new(j, "unplayed", json_true());
		json_object_set_new(j, "stations", played);
		if (t->live)
			json_object_set_new(j, "delivered_network_snr", json_real(sqrt(square)));
		json_array_append_new(list, j);
	}
	qb_free(t);
	qb_free(holds);
	qb_free(stops);
	return st;
}

/* The published hidden entry of a claim's record: when it was received, and for which pipeline. */
static enum qb_status claim_entry(const struct verified *v, const uint8_t id[static 64], json_t *claim,
                                  struct qb_error *e)
{
	for (size_t i = 0; i < v->bundle->n_hidden; i++) {
		const struct bundle_hidden *h = &v->bundle->hidden[i];
		struct wire_entry en;
		uint8_t given[64];
		enum qb_status st = wire_entry_parse((const char *)h->entry.data, h->entry.len, &en, e);
		if (st != QB_OK)
			return st;
		bool claims = strcmp(en.type->type, "claim") == 0;
		if (claims)
			wire_entry_hex(&en, "record_id", given, 64);
		bool found = claims && memcmp(given, id, 64) == 0;
		if (found) {
			json_object_set_new(claim, "submitted_gps", seconds(h->received_gps_ns));
			json_object_set_new(claim, "pipeline", json_string(wire_entry_text(&en, "pipeline")));
		}
		wire_entry_free(&en);
		if (found)
			return QB_OK;
	}
	return qb_fail(e, QB_NO, "bundle", NULL, "a claim has no entry");
}

static bool id_taken(const json_t *list, const char *id)
{
	size_t i;
	json_t *j;
	json_array_foreach(list, i, j)
	{
		if (strcmp(json_string_value(json_object_get(j, "claim_id")), id) == 0)
			return true;
	}
	return false;
}

/* An identifier that no claim of the list has: the given one, with a number behind it where it is taken. */
static void give_id(const json_t *list, json_t *claim, const char *wanted)
{
	char *id = text_printf("%.100s", wanted);
	for (size_t i = 2; id_taken(list, id); i++) {
		qb_free(id);
		id = text_printf("%.100s#%zu", wanted, i);
	}
	json_object_set_new(claim, "claim_id", json_string(id));
	qb_free(id);
}

/*
 * What an analyst sealed, or where it is no claim that can be read, a claim without any content: it counts as
 * malformed, and holds nobody's audit up.
 */
static json_t *read_claim(const struct verified *v, size_t i)
{
	const char *id = NULL, *parent = NULL;
	json_t *claim = NULL;
	bool good = v->opens[i] &&
	            json_read((const char *)v->content[i].data, v->content[i].len, "claim", &claim, NULL) == QB_OK &&
	            json_str(claim, "claim_id", "claim", &id, NULL) == QB_OK && text_is_line(id, 128);
	const json_t *revision = json_object_get(claim, "revision_of");
	if (good && revision != NULL && !json_is_null(revision))
		good = json_str(claim, "revision_of", "claim", &parent, NULL) == QB_OK && text_is_line(parent, 128);
	if (good)
		return claim;
	json_decref(claim);
	claim = json_object();
	json_object_set_new(claim, "claim_id", json_string("unreadable"));
	return claim;
}

static enum qb_status make_claims(const struct verified *v, json_t *list, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < v->bundle->records.n; i++) {
		if (v->bundle->records.item[i].rec.header.type != RECORD_CLAIM)
			continue;
		json_t *claim = read_claim(v, i);
		st = claim_entry(v, v->bundle->records.item[i].rec.id, claim, e);
		/* An analyst may have used an identifier twice; both claims count, under different names. */
		const char *id = json_string_value(json_object_get(claim, "claim_id"));
		if (st == QB_OK && id_taken(list, id)) {
			char *wanted = qb_strdup(id);
			give_id(list, claim, wanted);
			qb_free(wanted);
		}
		if (st == QB_OK)
			json_array_append(list, claim);
		json_decref(claim);
	}
	return st;
}

enum qb_status bundle_audit_of(const struct verified *v, struct bundle_audit *out, struct qb_error *e)
{
	*out = (struct bundle_audit){json_object(), json_array(), json_array(), json_array(), json_object()};
	enum qb_status st = make_settings(v, out->settings, e);
	if (st == QB_OK)
		st = make_slots(v, out->slots, e);
	if (st == QB_OK)
		st = make_claims(v, out->claims, e);
	if (st == QB_OK)
		st = bundle_guesses_of(v, out->guesses, e);
	if (st == QB_OK)
		st = bundle_course_of(v, out->course, e);
	if (st != QB_OK)
		bundle_audit_free(out);
	return st;
}

void bundle_audit_free(struct bundle_audit *a)
{
	json_decref(a->settings);
	json_decref(a->slots);
	json_decref(a->claims);
	json_decref(a->guesses);
	json_decref(a->course);
	*a = (struct bundle_audit){0};
}

enum qb_status audit_source_bundle(const char *path, struct audit_input **out, struct qb_error *e)
{
	struct verified *v = NULL;
	struct bundle_audit a = {0};
	struct audit_input *in = audit_input_new();
	size_t i;
	json_t *j;
	enum qb_status st = bundle_verify(path, &v, e);
	if (st == QB_OK)
		st = bundle_audit_of(v, &a, e);
	if (st == QB_OK)
		st = audit_input_settings(in, a.settings, "settings of the plan", e);
	json_array_foreach(a.slots, i, j)
	{
		if (st == QB_OK)
			st = audit_input_slot(in, j, "opened truth", e);
	}
	json_array_foreach(a.claims, i, j)
	{
		if (st == QB_OK)
			st = audit_input_claim(in, j, "opened claim", e);
	}
	if (st == QB_OK)
		st = audit_input_course(in, a.course, "course", e);
	bundle_audit_free(&a);
	verified_free(&v);
	if (st != QB_OK)
		audit_input_free(&in);
	*out = in;
	return st;
}
