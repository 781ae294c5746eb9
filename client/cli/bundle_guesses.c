/*
 * Guesses of a verified bundle: each was promised before its slot started, each record is about that slot. What a guess
 * says is its author's affair: one that can't be read is left out and counted, and holds nobody's audit up.
 */
#include <inttypes.h>
#include <stdio.h>
#include <string.h>

#include "client/cli/bundle_verify.h"
#include "server/base/alloc.h"

struct guess {
	const struct bundle_hidden *hidden;
	const struct view_party *author;
	int64_t slot, sequence;
	size_t record; /* position in the bundle */
};

size_t bundle_record(const struct bundle *b, const uint8_t id[static 64])
{
	size_t i = 0;
	while (i < b->records.n && memcmp(b->records.item[i].rec.id, id, 64) != 0)
		i++;
	return i;
}

/* All guesses of the bundle; the array is the caller's to free. */
static enum qb_status guesses_of(const struct verified *v, struct guess **out, size_t *n, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	*out = NULL;
	*n = 0;
	for (size_t i = 0; st == QB_OK && i < v->bundle->n_hidden; i++) {
		const struct bundle_hidden *h = &v->bundle->hidden[i];
		struct wire_entry en;
		uint8_t id[64];
		st = wire_entry_parse((const char *)h->entry.data, h->entry.len, &en, e);
		if (st != QB_OK)
			break;
		if (strcmp(en.type->type, "guess") == 0) {
			wire_entry_hex(&en, "record_id", id, 64);
			*out = qb_realloc(*out, *n + 1, sizeof **out);
			(*out)[(*n)++] =
			    (struct guess){h, view_party_by_id(&v->follow.view, h->author), wire_entry_int(&en, "slot"),
			                   wire_entry_int(&en, "sequence"), bundle_record(v->bundle, id)};
		}
		wire_entry_free(&en);
	}
	return st;
}

static enum qb_status no(const struct guess *g, const char *what, struct qb_error *e)
{
	return qb_fail(e, QB_NO, "bundle", "do not rely on it", "a guess of %.60s about slot %" PRId64 " %s",
	               g->author != NULL ? g->author->name : "somebody", g->slot, what);
}

static enum qb_status check_guess(const struct verified *v, const struct guess *g, bool *entered_before,
                                  struct qb_error *e)
{
	const struct slots *sl = &v->k->plan->slots;
	struct entry leaf;
	if (g->slot < 0 || g->slot >= v->k->n_slots || g->record >= v->bundle->records.n)
		return no(g, "has no slot or no record", e);
	const struct record_header *h = &v->bundle->records.item[g->record].rec.header;
	int64_t start = slots_start(sl, g->slot);
	if (h->type != RECORD_GUESS || h->index != (uint64_t)g->sequence || h->start_gps_ns != start ||
	    h->duration_ns != (uint64_t)sl->slot_ns || memcmp(h->author, g->hidden->author, 16) != 0)
		return no(g, "has the record of another", e);
	if (g->hidden->received_gps_ns >= start)
		return no(g, "was received after the slot had started", e);
	const struct buf *frame = &v->follow.frame[g->hidden->seq];
	enum qb_status st = entry_decode(frame->data, frame->len, &leaf, e);
	if (st == QB_OK && leaf.received_gps_ns < g->hidden->received_gps_ns)
		st = no(g, "stands in the ledger before it was received", e);
	*entered_before = st == QB_OK && leaf.received_gps_ns < start;
	return st;
}

/* The sealed words; false when they can't be read or are about another slot. */
static bool guess_read(const struct verified *v, const struct guess *g, json_t **out)
{
	static const char *const keys[] = {"slot", "guess", "probability_live", NULL};
	const struct buf *b = &v->content[g->record];
	json_t *doc = NULL;
	const char *word = NULL;
	int64_t slot = -1;
	bool good = json_read((const char *)b->data, b->len, "guess", &doc, NULL) == QB_OK &&
	            json_only(doc, keys, "guess", NULL) == QB_OK &&
	            json_str(doc, "guess", "guess", &word, NULL) == QB_OK &&
	            json_int(doc, "slot", "guess", 0, SLOTS_MAX, &slot, NULL) == QB_OK && slot == g->slot &&
	            (strcmp(word, "live") == 0 || strcmp(word, "null") == 0 || strcmp(word, "dont_know") == 0);
	const json_t *p = good ? json_object_get(doc, "probability_live") : NULL;
	if (p != NULL && !(json_is_number(p) && json_number_value(p) >= 0 && json_number_value(p) <= 1))
		good = false;
	if (good) {
		char name[32];
		truth_slot_id(g->slot, name);
		*out = json_object();
		json_object_set_new(*out, "analyst", json_string(g->author->name));
		json_object_set_new(*out, "slot_id", json_string(name));
		json_object_set_new(*out, "guess", json_string(word));
		if (p != NULL)
			json_object_set_new(*out, "probability_live", json_real(json_number_value(p)));
		json_object_set_new(*out, "recorded_gps", json_gps_new(g->hidden->received_gps_ns));
	}
	json_decref(doc);
	return good;
}

enum qb_status verify_guesses(struct verified *v, struct qb_error *e)
{
	struct guess *g;
	size_t n, before = 0, unreadable = 0;
	enum qb_status st = guesses_of(v, &g, &n, e);
	for (size_t i = 0; st == QB_OK && i < n; i++) {
		bool entered_before = false;
		json_t *doc = NULL;
		if ((st = check_guess(v, &g[i], &entered_before, e)) != QB_OK)
			break;
		before += entered_before;
		unreadable += !guess_read(v, &g[i], &doc);
		json_decref(doc);
	}
	if (n == 0)
		verify_note(v, "no guesses");
	else
		verify_note(v,
		            "%zu guesses, %zu of them in the ledger before the slot, the others by the service's "
		            "promise; %zu can't be read",
		            n, before, unreadable);
	qb_free(g);
	return st;
}

enum qb_status bundle_guesses_of(const struct verified *v, json_t *list, struct qb_error *e)
{
	struct guess *g;
	size_t n;
	enum qb_status st = guesses_of(v, &g, &n, e);
	for (size_t i = 0; st == QB_OK && i < n; i++) {
		bool replaced = false;
		json_t *doc = NULL;
		for (size_t j = 0; j < n; j++)
			replaced = replaced || (g[j].author == g[i].author && g[j].slot == g[i].slot &&
			                        g[j].sequence > g[i].sequence);
		if (!replaced && guess_read(v, &g[i], &doc))
			json_array_append_new(list, doc);
	}
	qb_free(g);
	return st;
}
