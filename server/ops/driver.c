/*
 * What a station's driver gets and gives: one-time prekeys in advance, its wrapped recipes, the slot key from
 * start - lead on, sealed notes and reports. All of it alike for live and null.
 */
#include <string.h>
#include <time.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define SPARE_WAITS_NS (3 * NS_PER_S) /* a driver that plays looks at its slot several times a second */

static enum qb_status my_station(struct campaign *c, const struct ops_call *call, int *out, struct qb_error *e)
{
	driver_spoke(c, call->who);
	*out = station_of_driver(c, call->who->name);
	return *out >= 0 ? QB_OK : qb_fail(e, QB_REFUSED, NULL, NULL, "%s drives no station here", call->who->name);
}

static enum qb_status check_own_station(const struct campaign *c, const struct accepted *a, int station,
                                        struct qb_error *e)
{
	if (strcmp(wire_entry_text(&a->entry, "station"), c->plan->network->stations[station].name) != 0)
		return qb_fail(e, QB_REFUSED, "station", NULL, "is not the station that this driver drives");
	return QB_OK;
}

static enum qb_status check_prekeys(const struct campaign *c, const struct accepted *a, int station,
                                    const struct buf *points, struct qb_error *e)
{
	uint8_t hash[64], given[64];
	int64_t place = wire_entry_int(&a->entry, "place");
	enum qb_status st = check_own_station(c, a, station, e);
	if (st != QB_OK)
		return st;
	if (c->state >= C_SEALING)
		return qb_fail(e, QB_CONFLICT, "prekeys", NULL, "the campaign is %s already", campaign_word(c));
	if (place != place_of_driver(c, a->entry.by))
		return qb_fail(e, QB_REFUSED, "prekeys: place", "0 for a station's driver, 1 for its spare",
		               "%lld is not %s's place", (long long)place, a->entry.by);
	if (c->prekeys[station][place])
		return qb_fail(e, QB_CONFLICT, "prekeys", NULL, "keys for this station and place are here already");
	if (wire_entry_int(&a->entry, "count") != c->n_slots || points->len != (size_t)c->n_slots * POINT_BYTES)
		return qb_fail(e, QB_FORMAT, "prekeys: count", NULL, "one key a slot is needed: %lld",
		               (long long)c->n_slots);
	blake2b_512(hash, points->data, points->len);
	wire_entry_hex(&a->entry, "points_hash", given, 64);
	if (memcmp(hash, given, 64) != 0)
		return qb_fail(e, QB_CRYPTO, "prekeys: points_hash", NULL, "is not the hash of the points sent");
	for (size_t i = 0; i < points->len; i += POINT_BYTES) {
		if (!group_point_ok(points->data + i))
			return qb_fail(e, QB_CRYPTO, "prekeys", NULL, "key %zu is not a valid point", i / POINT_BYTES);
	}
	return QB_OK;
}

enum qb_status case_prekeys(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e)
{
	struct accepted a;
	struct buf points = {0};
	struct txn t;
	int station;
	int64_t seq;
	uint8_t leaf[32];
	enum qb_status st = my_station(c, call, &station, e);
	if (st != QB_OK || (st = accept_entry(o, call, c, &a, e)) != QB_OK)
		return st;
	st = body_base64(call->body, "points", (size_t)c->n_slots * POINT_BYTES, &points, e);
	if (st == QB_OK)
		st = check_prekeys(c, &a, station, &points, e);
	if (st == QB_OK && (st = txn_begin(&t, o, "prekeys", e)) == QB_OK) {
		st = store_prekeys_put(o->store, c->id, c->plan->network->stations[station].name,
		                       (int)wire_entry_int(&a.entry, "place"), points.data, points.len, e);
		if (st == QB_OK)
			st = txn_entry(&t, call->who->key_id, a.text, a.signature, &seq, leaf, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	buf_free(&points);
	accepted_free(&a);
	return st;
}

/* Fetching before the freeze is how a station says that it is ready for the slot. */
static enum qb_status note_readiness(struct ops *o, const struct campaign *c, int64_t slot, const char *station,
                                     enum recipe_place place, struct qb_error *e)
{
	bool ready;
	enum qb_status st = store_ready_get(o->store, c->id, slot, station, (int)place, &ready, e);
	if (st != QB_OK || ready || now_locked(o) >= slots_freeze(&c->plan->slots, slot))
		return st;
	if ((st = store_begin(o->store, "ready", e)) == QB_OK)
		st = store_ready_put(o->store, c->id, slot, station, (int)place, e);
	if (st == QB_OK)
		st = store_commit(o->store, e);
	store_rollback(o->store);
	return st;
}

enum qb_status case_recipe(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                           struct qb_error *e)
{
	int64_t slot;
	int station;
	struct buf recipe = {0};
	enum qb_status st = my_station(c, call, &station, e);
	if (st == QB_OK)
		st = slot_number(c, call->match->parts[1], &slot, e);
	if (st == QB_OK && !campaign_reached(c, slot))
		st = qb_fail(e, QB_CONFLICT, "recipe", "end the driver", "the campaign was %s before this slot",
		             campaign_ending_word(c->ending));
	if (st != QB_OK)
		return st;
	const char *name = c->plan->network->stations[station].name;
	const enum recipe_place place = place_of_driver(c, call->who->name);
	st = store_recipe_get(o->store, c->id, slot, name, (int)place, &recipe, e);
	if (st == QB_OK)
		st = note_readiness(o, c, slot, name, place, e);
	if (st == QB_OK) {
		char *text = base64_encode(recipe.data, recipe.len);
		reply->http_status = 200;
		reply->doc = json_object();
		json_object_set_new(reply->doc, "slot", json_integer(slot));
		json_object_set_new(reply->doc, "station", json_string(name));
		json_object_set_new(reply->doc, "recipe", json_string(text));
		qb_free(text);
	}
	buf_free(&recipe);
	return st;
}

static enum qb_status may_release(struct ops *o, const struct campaign *c, int64_t slot, int station,
                                  struct ops_reply *reply, struct qb_error *e)
{
	int64_t now = now_locked(o), freeze = slots_freeze(&c->plan->slots, slot), since;
	const struct slot_public *s = &c->slot[slot];
	if (c->state < C_SEALED)
		return qb_fail(e, QB_CONFLICT, "slot key", NULL, "the campaign is not sealed");
	if (c->ending != ENDING_NONE)
		return qb_fail(e, QB_CONFLICT, "slot key", "end the driver",
		               "the campaign was %s and its keys are erased", campaign_ending_word(c->ending));
	if (now < freeze || s->freeze_seq == NO_SEQ) {
		reply->until_gps_ns = freeze;
		return qb_fail(e, QB_CONFLICT, "slot key", "wait until start - lead", "the slot is not frozen yet");
	}
	if (now >= slots_start(&c->plan->slots, slot + 1))
		return qb_fail(e, QB_CONFLICT, "slot key", NULL, "the slot is over and its key erased");
	if ((s->going >> station & 1) == 0)
		return qb_fail(e, QB_CONFLICT, "slot key", "see quietbell slot show",
		               "this station does not go in this slot");
	if (station_held(c, station, slot) || station_stopped(c, station, &since))
		return qb_fail(e, QB_CONFLICT, "slot key", "see quietbell slot show", "the station is held or stopped");
	return QB_OK;
}

int64_t monotonic_ns(void)
{
	struct timespec t;
	CHECK(clock_gettime(CLOCK_MONOTONIC, &t) == 0);
	return (int64_t)t.tv_sec * NS_PER_S + t.tv_nsec;
}

void driver_spoke(struct campaign *c, const struct view_party *who)
{
	int station = station_of_driver(c, who->name);
	if (station >= 0 && place_of_driver(c, who->name) == RECIPE_MAIN)
		c->main_seen_ns[station] = monotonic_ns();
}

/*
 * One host of a station plays a slot: the first that asks for its key or files anything about it. The main host comes
 * first: the spare gets a slot when half of the lead is over and the main host has not spoken for SPARE_WAITS_NS, live
 * and null alike.
 */
static enum qb_status take_lease(struct ops *o, const struct campaign *c, int64_t slot, int station,
                                 enum recipe_place mine, struct ops_reply *reply, struct qb_error *e)
{
	const char *name = c->plan->network->stations[station].name;
	const struct slots *sl = &c->plan->slots;
	int64_t half = slots_freeze(sl, slot) + (slots_start(sl, slot) - slots_freeze(sl, slot)) / 2;
	int place;
	enum qb_status st = store_lease_get(o->store, c->id, slot, name, &place, e);
	if (st != QB_OK || place == (int)mine)
		return st;
	if (place >= 0)
		return qb_fail(e, QB_CONFLICT, "slot", "leave the slot to it", "the station's %s host plays it",
		               place == RECIPE_SPARE ? "spare" : "main");
	int64_t heard = c->main_seen_ns[station] > o->opened_ns ? c->main_seen_ns[station] : o->opened_ns;
	if (mine == RECIPE_SPARE && (now_locked(o) < half || monotonic_ns() - heard < SPARE_WAITS_NS)) {
		reply->until_gps_ns = half;
		return qb_fail(e, QB_CONFLICT, "slot", "ask again", "the station's main host comes first");
	}
	return store_lease_put(o->store, c->id, slot, name, (int)mine, e);
}

static enum qb_status lease_for_key(struct ops *o, const struct campaign *c, int64_t slot, int station,
                                    enum recipe_place mine, struct ops_reply *reply, struct qb_error *e)
{
	enum qb_status st = store_begin(o->store, "lease", e);
	if (st != QB_OK)
		return st;
	st = take_lease(o, c, slot, station, mine, reply, e);
	if (st == QB_OK)
		st = store_commit(o->store, e);
	store_rollback(o->store);
	return st;
}

enum qb_status case_recipe_key(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                               struct qb_error *e)
{
	int64_t slot;
	int station;
	struct buf boxed = {0};
	struct secret *key = NULL;
	enum qb_status st = my_station(c, call, &station, e);
	if (st == QB_OK)
		st = slot_number(c, call->match->parts[1], &slot, e);
	if (st == QB_OK)
		st = may_release(o, c, slot, station, reply, e);
	if (st == QB_OK)
		st = lease_for_key(o, c, slot, station, place_of_driver(c, call->who->name), reply, e);
	if (st == QB_OK)
		st = store_slot_key_get(o->store, c->id, slot, &boxed, e);
	if (st == QB_OK)
		st = slot_key_unbox(o, c, slot, &boxed, &key, e);
	if (st == QB_OK) {
		reply->http_status = 200;
		reply->doc = json_object();
		json_object_set_new(reply->doc, "slot", json_integer(slot));
		json_object_set_new(reply->doc, "key", json_hex_new(secret_view(key), SLOT_KEY_BYTES));
	}
	secret_free(&key);
	buf_free(&boxed);
	return st;
}

/* Index of a note or report: slot * 256 + station * 16 + number; 15 is the report (docs/protocol.md). */
static enum qb_status check_filed(const struct campaign *c, const struct ops_call *call, const struct accepted *a,
                                  int station, int64_t slot, const struct buf *b, struct record *rec,
                                  struct qb_error *e)
{
	bool report = strcmp(a->entry.type->type, "play-report") == 0;
	uint64_t number = report ? 15 : c->slot[slot].notes[station];
	uint64_t index = (uint64_t)slot * 256 + (uint64_t)station * 16 + number;
	uint8_t id[64];
	enum qb_status st = check_own_station(c, a, station, e);
	if (st == QB_OK && wire_entry_int(&a->entry, "slot") != slot)
		st = qb_fail(e, QB_REFUSED, "entry: slot", NULL, "is not the slot of the path");
	if (st == QB_OK && (c->state < C_SEALED || c->state > C_CLOSED))
		st = qb_fail(e, QB_CONFLICT, NULL, NULL, "the campaign is %s", campaign_word(c));
	/* Custodians may have opened what is there already. */
	if (st == QB_OK && campaign_full_opening(c))
		st = qb_fail(e, QB_CONFLICT, NULL, NULL, "the full opening was asked for: nothing more is filed");
	if (st == QB_OK && report && (c->slot[slot].reported >> station & 1) != 0)
		st = qb_fail(e, QB_CONFLICT, "report", NULL, "the report of this slot and station is here already");
	if (st == QB_OK && !report && number >= PLAY_NOTES_MAX)
		st =
		    qb_fail(e, QB_CONFLICT, "note", NULL, "this slot and station has %d notes already", PLAY_NOTES_MAX);
	if (st == QB_OK)
		st = record_check(&c->group, b->data, b->len, rec, e);
	if (st == QB_OK)
		st = record_expect(rec, report ? RECORD_PLAY_REPORT : RECORD_PLAY_NOTE, index, e);
	if (st == QB_OK && memcmp(rec->header.author, call->who->key_id, 16) != 0)
		st = qb_fail(e, QB_CRYPTO, "record: author", NULL, "is not the driver");
	if (st == QB_OK) {
		wire_entry_hex(&a->entry, "record_id", id, 64);
		if (memcmp(id, rec->id, 64) != 0)
			st = qb_fail(e, QB_CRYPTO, "entry: record_id", NULL, "is not the record that was sent");
	}
	return st;
}

enum qb_status put_sealed(struct ops *o, const struct campaign *c, const struct record *rec, int64_t slot,
                          const char *station, struct qb_error *e)
{
	struct store_record r = {.position = -1,
	                         .type = (int)rec->header.type,
	                         .slot = slot,
	                         .station = station,
	                         .record = rec->bytes,
	                         .record_n = rec->len};
	memcpy(r.author, rec->header.author, 16);
	memcpy(r.record_id, rec->id, 64);
	memcpy(r.r_point, rec->r, 32);
	struct qb_error inner = {0};
	enum qb_status st = store_record_put(o->store, c->id, &r, &inner);
	/* Two contents under one R would be two under one key. */
	if (st == QB_CONFLICT)
		return qb_fail(e, QB_CONFLICT, "record: R", "seal it anew, which draws a fresh R",
		               "was used before in this campaign");
	if (st != QB_OK && e != NULL)
		*e = inner;
	return st;
}

static enum qb_status case_filed(struct ops *o, struct campaign *c, const struct ops_call *call,
                                 struct ops_reply *reply, struct qb_error *e)
{
	struct accepted a;
	struct buf b = {0};
	struct record rec;
	struct txn t;
	int station;
	int64_t slot, seq;
	uint8_t leaf[32];
	enum qb_status st = my_station(c, call, &station, e);
	if (st == QB_OK)
		st = slot_number(c, call->match->parts[1], &slot, e);
	if (st != QB_OK || (st = accept_entry(o, call, c, &a, e)) != QB_OK)
		return st;
	st = body_base64(call->body, "record", RECORD_BYTES_MAX, &b, e);
	if (st == QB_OK)
		st = check_filed(c, call, &a, station, slot, &b, &rec, e);
	if (st == QB_OK && (st = txn_begin(&t, o, "filed", e)) == QB_OK) {
		st = take_lease(o, c, slot, station, place_of_driver(c, call->who->name), reply, e);
		if (st == QB_OK)
			st = put_sealed(o, c, &rec, slot, c->plan->network->stations[station].name, e);
		if (st == QB_OK)
			st = txn_entry(&t, call->who->key_id, a.text, a.signature, &seq, leaf, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	buf_free(&b);
	accepted_free(&a);
	return st;
}

enum qb_status case_note(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	return case_filed(o, c, call, reply, e);
}

enum qb_status case_report(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                           struct qb_error *e)
{
	return case_filed(o, c, call, reply, e);
}
