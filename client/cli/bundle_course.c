/*
 * The course of a campaign, out of its verified bundle: what the report prints beside the numbers. Nothing in it is
 * computed from; an incident that can't be read is printed as such and holds nobody's audit up.
 */
#include <stdio.h>
#include <string.h>

#include "client/cli/bundle_verify.h"
#include "client/cli/register.h"
#include "server/base/text.h"

#define INCIDENT_TEXT_MAX 4096

static bool slots_are_good(const struct campaign *k, const json_t *slots)
{
	size_t i;
	json_t *pair;
	json_array_foreach((json_t *)(uintptr_t)slots, i, pair)
	{
		const json_t *from = json_array_get(pair, 0), *to = json_array_get(pair, 1);
		if (json_array_size(pair) != 2 || !json_is_integer(from) || !json_is_integer(to) ||
		    json_integer_value(from) < 0 || json_integer_value(from) > json_integer_value(to) ||
		    json_integer_value(to) >= k->n_slots)
			return false;
	}
	return json_is_array(slots);
}

/* Kind, slots and text of the sealed words into j; false when they can't be read. */
static bool read_incident(const struct campaign *k, const struct buf *b, json_t *j)
{
	static const char *const keys[] = {"kind", "slots", "text", NULL};
	json_t *doc = NULL;
	const char *kind = NULL, *text = NULL;
	bool good = json_read((const char *)b->data, b->len, "incident", &doc, NULL) == QB_OK &&
	            json_only(doc, keys, "incident", NULL) == QB_OK &&
	            json_str(doc, "kind", "incident", &kind, NULL) == QB_OK &&
	            json_str(doc, "text", "incident", &text, NULL) == QB_OK &&
	            (strcmp(kind, "planned") == 0 || strcmp(kind, "accidental") == 0 || strcmp(kind, "rumour") == 0) &&
	            text_is_line(text, INCIDENT_TEXT_MAX) && slots_are_good(k, json_object_get(doc, "slots"));
	if (good) {
		json_object_set(j, "kind", json_object_get(doc, "kind"));
		json_object_set(j, "slots", json_object_get(doc, "slots"));
		json_object_set(j, "text", json_object_get(doc, "text"));
	}
	json_decref(doc);
	return good;
}

static double filed(const json_t *incident)
{
	return json_number_value(json_object_get(incident, "filed_gps"));
}

static void insert_by_time(json_t *list, json_t *incident)
{
	size_t at = json_array_size(list);
	while (at > 0 && filed(json_array_get(list, at - 1)) > filed(incident))
		at--;
	json_array_insert_new(list, at, incident);
}

static enum qb_status incidents_of(const struct verified *v, json_t *list, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < v->bundle->n_hidden; i++) {
		const struct bundle_hidden *h = &v->bundle->hidden[i];
		struct wire_entry en;
		uint8_t id[64];
		st = wire_entry_parse((const char *)h->entry.data, h->entry.len, &en, e);
		if (st != QB_OK)
			break;
		if (strcmp(en.type->type, "incident") == 0) {
			const struct view_party *p = view_party_by_id(&v->follow.view, h->author);
			wire_entry_hex(&en, "record_id", id, 64);
			size_t at = bundle_record(v->bundle, id);
			json_t *j = json_object();
			json_object_set_new(j, "by", json_string(en.by));
			if (p != NULL)
				json_object_set_new(j, "role", json_string(wire_role_word(campaign_role(v->k, p))));
			json_object_set_new(j, "filed_gps", json_real((double)h->received_gps_ns / 1e9));
			if (at >= v->bundle->records.n ||
			    v->bundle->records.item[at].rec.header.type != RECORD_INCIDENT ||
			    !read_incident(v->k, &v->content[at], j))
				json_object_set_new(j, "unreadable", json_true());
			insert_by_time(list, j);
		}
		wire_entry_free(&en);
	}
	return st;
}

static json_t *ending_of(const struct campaign *k)
{
	json_t *j = json_object();
	int64_t unplayed = 0, first = -1;
	for (int64_t n = k->n_slots - 1; n >= 0; n--) {
		if (campaign_reached(k, n))
			continue;
		unplayed++;
		first = n;
	}
	json_object_set_new(j, "how", json_string(campaign_ending_word(k->ending)));
	json_object_set_new(j, "by", json_string(k->ended_by));
	json_object_set_new(j, "why", json_string(k->ended_why));
	json_object_set_new(j, "ended_gps", json_real((double)k->ended_ns / 1e9));
	json_object_set_new(j, "slots", json_integer(k->n_slots));
	json_object_set_new(j, "slots_unplayed", json_integer(unplayed));
	json_object_set_new(j, "first_unplayed", first >= 0 ? json_integer(first) : json_null());
	return j;
}

enum qb_status verify_ending(struct verified *v, struct qb_error *e)
{
	struct entry leaf;
	const struct campaign *k = v->k;
	if (k->closing_seq == NO_SEQ || (uint64_t)k->closing_seq >= v->follow.n)
		return qb_fail(e, QB_NO, "bundle", NULL, "the analysis was never closed");
	const struct buf *frame = &v->follow.frame[k->closing_seq];
	enum qb_status st = entry_decode(frame->data, frame->len, &leaf, e);
	if (st == QB_OK && k->ending == ENDING_NONE && leaf.received_gps_ns < k->plan->slots.end_gps_ns)
		st = qb_fail(e, QB_NO, "bundle", NULL,
		             "the analysis was closed before the end, and not as an early closing");
	if (st == QB_OK && k->ending != ENDING_NONE && strcmp(k->ended_why, "-") == 0)
		st = qb_fail(e, QB_NO, "bundle", NULL, "the campaign ended before its time without a reason");
	for (int64_t n = 0; st == QB_OK && k->ending != ENDING_NONE && n < k->n_slots; n++) {
		if (k->slot[n].freeze_seq > k->ending_seq)
			st = qb_fail(e, QB_NO, "bundle", NULL, "a slot was frozen after the end of the campaign");
	}
	if (st == QB_OK && k->ending != ENDING_NONE) {
		json_t *j = ending_of(k);
		(void)snprintf(v->note, sizeof v->note, "%s by %s, %lld of %lld slots not played: %.200s",
		               campaign_ending_word(k->ending), k->ended_by,
		               (long long)json_integer_value(json_object_get(j, "slots_unplayed")),
		               (long long)k->n_slots, k->ended_why);
		json_decref(j);
	} else if (st == QB_OK) {
		verify_note(v, "closed after its end, by entry %lld", (long long)k->closing_seq);
	}
	return st;
}

enum qb_status bundle_course_of(const struct verified *v, json_t *course, struct qb_error *e)
{
	json_t *incidents = json_array();
	json_object_set_new(course, "ending", v->k->ending == ENDING_NONE ? json_null() : ending_of(v->k));
	json_object_set_new(course, "incidents", incidents);
	json_object_set_new(course, "custody", register_custody(v->k));
	json_object_set_new(course, "register", register_of(&v->follow.view));
	enum qb_status st = incidents_of(v, incidents, e);
	return st == QB_OK ? bundle_questions_of(v, course, e) : st;
}
