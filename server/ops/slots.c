/*
 * The schedule as everybody sees it, holds and stops, and what the clock makes due: the go/no-go snapshot of each slot
 * and the erasure of keys. Nothing here reads a record; nothing here can depend on what one holds.
 */
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define SLOTS_PER_PAGE   1000
#define FREEZES_PER_TURN 2000

static int64_t slot_end(const struct campaign *c, int64_t n)
{
	return slots_start(&c->plan->slots, n + 1);
}

static bool overlaps(const struct states_hold *h, int64_t from, int64_t to)
{
	return h->lifted_ns == STATES_NEVER && h->from_ns < to && h->to_ns > from;
}

bool station_held(const struct campaign *c, int station, int64_t slot)
{
	for (int i = 0; i < c->n_holds; i++) {
		const struct states_hold *h = &c->hold[i].hold;
		if ((h->station == STATES_ALL || h->station == station) &&
		    overlaps(h, slots_start(&c->plan->slots, slot), slot_end(c, slot)))
			return true;
	}
	return false;
}

bool station_stopped(const struct campaign *c, int station, int64_t *since_ns)
{
	bool any = false;
	for (int i = 0; i < c->n_stops; i++) {
		const struct states_stop *s = &c->stop[i].stop;
		if (s->lifted_ns != STATES_NEVER || (s->station != STATES_ALL && s->station != station))
			continue;
		if (!any || s->placed_ns < *since_ns)
			*since_ns = s->placed_ns;
		any = true;
	}
	return any;
}

/* ---- what the clock makes due ---- */

/* By any of its hosts. */
static enum qb_status station_ready(struct ops *o, const struct campaign *c, int64_t n, int station, bool *ready,
                                    struct qb_error *e)
{
	enum qb_status st = QB_OK;
	*ready = false;
	for (int place = 0; st == QB_OK && !*ready && place < RECIPE_PLACES; place++)
		st = store_ready_get(o->store, c->id, n, c->plan->network->stations[station].name, place, ready, e);
	return st;
}

static enum qb_status freeze_slot(struct txn *t, struct campaign *c, int64_t n, struct qb_error *e)
{
	const struct slots *sl = &c->plan->slots;
	struct states_slot s = {.start_ns = slots_start(sl, n),
	                        .end_ns = slot_end(c, n),
	                        .freeze_ns = slots_freeze(sl, n),
	                        .n_stations = c->plan->network->n_stations,
	                        .stations_needed = c->plan->stations_needed};
	struct states_hold *holds;
	struct states_stop *stops;
	bool going[STATES_MAX_STATIONS] = {false};
	json_t *ready_names = json_array(), *going_names = json_array(), *extra = json_object();
	enum qb_status st = QB_OK;
	campaign_controls(c, &holds, &stops);
	for (int i = 0; st == QB_OK && i < s.n_stations; i++)
		st = station_ready(t->o, c, n, i, &s.station[i].ready, e);
	bool enough = states_freeze(&s, holds, (size_t)c->n_holds, stops, (size_t)c->n_stops, going);
	for (int i = 0; i < s.n_stations; i++) {
		const char *name = c->plan->network->stations[i].name;
		if (s.station[i].ready)
			json_array_append_new(ready_names, json_string(name));
		if (enough && going[i])
			json_array_append_new(going_names, json_string(name));
	}
	json_object_set_new(extra, "slot", json_integer(n));
	json_object_set_new(extra, "ready", ready_names);
	json_object_set_new(extra, "going", going_names);
	if (st == QB_OK)
		st = txn_service_entry(t, "freeze", c, "start - lead was reached", extra, NULL, NULL, e);
	else
		json_decref(extra);
	qb_free(holds);
	qb_free(stops);
	return st;
}

static int64_t first_unfinished(const struct campaign *c, int64_t now_ns)
{
	const struct slots *sl = &c->plan->slots;
	if (now_ns < sl->start_gps_ns)
		return 0;
	int64_t n = slots_at(sl, now_ns);
	return n < 0 ? c->n_slots : n;
}

/* Slots below this one need their keys no more. */
static int64_t erasable(const struct campaign *c, int64_t now_ns)
{
	return c->ending != ENDING_NONE ? c->n_slots : first_unfinished(c, now_ns);
}

bool slots_anything_due(struct ops *o, const struct campaign *c)
{
	int64_t now = now_locked(o);
	if (c->state < C_SEALED)
		return false;
	return erasable(c, now) > c->erased_below || (c->ending == ENDING_NONE && c->next_freeze < c->n_slots &&
	                                              now >= slots_freeze(&c->plan->slots, c->next_freeze));
}

enum qb_status slots_due(struct ops *o, struct campaign *c, struct qb_error *e)
{
	struct txn t;
	int64_t erase = erasable(c, now_locked(o));
	enum qb_status st = txn_begin(&t, o, "slots-due", e);
	if (st != QB_OK)
		return st;
	for (int64_t n = c->next_freeze, done = 0; st == QB_OK && done < FREEZES_PER_TURN && n < c->n_slots;
	     n++, done++) {
		if (t.now_ns < slots_freeze(&c->plan->slots, n) || c->ending != ENDING_NONE)
			break;
		st = freeze_slot(&t, c, n, e);
	}
	if (st == QB_OK && erase > c->erased_below)
		st = store_slot_keys_erase_below(o->store, c->id, erase, e);
	if (st == QB_OK)
		st = txn_commit(&t, e);
	if (st == QB_OK)
		c->erased_below = erase;
	txn_end(&t);
	return st;
}

/* ---- the listing ---- */

static const char *public_state(struct ops *o, const struct campaign *c, int64_t n)
{
	int64_t now = now_locked(o);
	if (!campaign_reached(c, n))
		return "unplayed";
	if (now >= slot_end(c, n))
		return "done";
	if (now >= slots_start(&c->plan->slots, n))
		return "playing";
	return now >= slots_freeze(&c->plan->slots, n) ? "frozen" : "planned";
}

static enum qb_status slot_json(struct ops *o, const struct campaign *c, int64_t n, json_t **out, struct qb_error *e)
{
	const struct slot_public *s = &c->slot[n];
	char utc[40];
	json_t *j = json_object(), *stations = json_object();
	enum qb_status st = QB_OK;
	int64_t start = slots_start(&c->plan->slots, n);
	json_object_set_new(j, "slot", json_integer(n));
	json_object_set_new(j, "start_gps", json_gps_new(start));
	json_object_set_new(j, "start_utc", json_string(clock_utc_text(start, utc, sizeof utc)));
	json_object_set_new(j, "duration_s", json_real((double)c->plan->slots.slot_ns / 1e9));
	json_object_set_new(j, "state", json_string(public_state(o, c, n)));
	json_object_set_new(j, "ended", json_boolean(c->ending != ENDING_NONE));
	json_object_set_new(j, "record_id", c->state >= C_SEALED ? json_hex_new(s->record_id, 64) : json_null());
	json_object_set_new(j, "slot_key_commitment",
	                    c->state >= C_SEALED ? json_hex_new(s->slot_key_commitment, 64) : json_null());
	for (int i = 0; st == QB_OK && i < c->plan->network->n_stations; i++) {
		const char *name = c->plan->network->stations[i].name;
		json_t *x = json_object();
		int64_t since = 0;
		int host = -1;
		bool stopped = station_stopped(c, i, &since), ready = (s->ready >> i & 1) != 0,
		     frozen = s->freeze_seq != NO_SEQ;
		if (!frozen)
			st = station_ready(o, c, n, i, &ready, e);
		if (st == QB_OK)
			st = store_lease_get(o->store, c->id, n, name, &host, e);
		json_object_set_new(x, "held", json_boolean(station_held(c, i, n)));
		json_object_set_new(x, "stopped", json_boolean(stopped));
		json_object_set_new(x, "stopped_gps", stopped ? json_gps_new(since) : json_null());
		json_object_set_new(x, "ready", json_boolean(ready));
		json_object_set_new(x, "going", frozen ? json_boolean((s->going >> i & 1) != 0) : json_null());
		json_object_set_new(x, "host",
		                    host < 0 ? json_null() : json_string(host == RECIPE_SPARE ? "spare" : "main"));
		json_object_set_new(x, "reported", json_boolean((s->reported >> i & 1) != 0));
		json_object_set_new(x, "notes", json_integer(s->notes[i]));
		json_object_set_new(stations, name, x);
	}
	json_object_set_new(j, "stations", stations);
	*out = j;
	return st;
}

enum qb_status case_slots(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                          struct qb_error *e)
{
	int64_t from, limit;
	enum qb_status st = QB_OK;
	if (!query_int(call->query, "from", 0, c->n_slots, 0, &from) ||
	    !query_int(call->query, "limit", 1, SLOTS_PER_PAGE, 500, &limit))
		return qb_fail(e, QB_RANGE, "query", "from=0.. and limit=1..1000", "is out of range");
	json_t *list = json_array();
	int64_t to = from + limit < c->n_slots ? from + limit : c->n_slots;
	for (int64_t n = from; st == QB_OK && n < to; n++) {
		json_t *j = NULL;
		st = slot_json(o, c, n, &j, e);
		json_array_append_new(list, j);
	}
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "slots", list);
	json_object_set_new(reply->doc, "next", to < c->n_slots ? json_integer(to) : json_null());
	return st;
}

enum qb_status case_slot(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	int64_t n;
	enum qb_status st = slot_number(c, call->match->parts[1], &n, e);
	driver_spoke(c, call->who);
	if (st == QB_OK)
		st = slot_json(o, c, n, &reply->doc, e);
	reply->http_status = 200;
	return st;
}

/* ---- holds and stops ---- */

static enum qb_status check_station(const struct campaign *c, const char *name, bool all_too, struct qb_error *e)
{
	if (plan_station(c->plan, name) >= 0 || (all_too && strcmp(name, "all") == 0))
		return QB_OK;
	return qb_fail(e, QB_NOT_FOUND, "station", "see quietbell campaign show", "the network has no station '%s'",
	               name);
}

static enum qb_status control(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                              enum qb_status (*check)(struct campaign *, const struct ops_call *,
                                                      const struct accepted *, struct qb_error *),
                              struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	if (c->state < C_SEALED || c->state > C_CLOSED)
		st = qb_fail(e, QB_CONFLICT, NULL, NULL, "the campaign is %s: there is nothing to hold or stop",
		             campaign_word(c));
	if (st == QB_OK)
		st = check(c, call, &a, e);
	if (st == QB_OK)
		st = enter_one(o, a.entry.type->type, call, &a, reply, e);
	accepted_free(&a);
	return st;
}

static enum qb_status check_hold(struct campaign *c, const struct ops_call *call, const struct accepted *a,
                                 struct qb_error *e)
{
	(void)call;
	enum qb_status st = check_station(c, wire_entry_text(&a->entry, "station"), false, e);
	if (st == QB_OK && strcmp(a->entry.why, "-") == 0)
		st = qb_fail(e, QB_REFUSED, "hold: why", "give --reason", "a hold needs a reason");
	if (st == QB_OK && wire_entry_gps(&a->entry, "from_gps") >= wire_entry_gps(&a->entry, "to_gps"))
		st = qb_fail(e, QB_RANGE, "hold", NULL, "its end is not after its start");
	return st;
}

static enum qb_status check_stop(struct campaign *c, const struct ops_call *call, const struct accepted *a,
                                 struct qb_error *e)
{
	(void)call;
	return check_station(c, wire_entry_text(&a->entry, "station"), true, e);
}

static enum qb_status check_hold_lift(struct campaign *c, const struct ops_call *call, const struct accepted *a,
                                      struct qb_error *e)
{
	int64_t seq;
	for (int i = 0; i < c->n_holds; i++) {
		if (text_i64(call->match->parts[1], &seq) && c->hold[i].seq == seq &&
		    wire_entry_int(&a->entry, "hold") == seq && c->hold[i].hold.lifted_ns == STATES_NEVER)
			return QB_OK;
	}
	return qb_fail(e, QB_NOT_FOUND, "hold", "its number is the ledger sequence number that placing it printed",
	               "there is no standing hold '%s'", call->match->parts[1]);
}

static enum qb_status check_stop_lift(struct campaign *c, const struct ops_call *call, const struct accepted *a,
                                      struct qb_error *e)
{
	int64_t seq;
	for (int i = 0; i < c->n_stops; i++) {
		if (text_i64(call->match->parts[1], &seq) && c->stop[i].seq == seq && seq != c->ending_seq &&
		    wire_entry_int(&a->entry, "stop") == seq && c->stop[i].stop.lifted_ns == STATES_NEVER)
			return QB_OK;
	}
	return qb_fail(e, QB_NOT_FOUND, "stop", "its number is the ledger sequence number that placing it printed",
	               "there is no standing stop '%s'", call->match->parts[1]);
}

enum qb_status case_hold(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	return control(o, c, call, reply, check_hold, e);
}

enum qb_status case_hold_lift(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                              struct qb_error *e)
{
	return control(o, c, call, reply, check_hold_lift, e);
}

enum qb_status case_stop(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	return control(o, c, call, reply, check_stop, e);
}

enum qb_status case_stop_lift(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                              struct qb_error *e)
{
	return control(o, c, call, reply, check_stop_lift, e);
}

enum qb_status case_segments(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                             struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	const char *kind = wire_entry_text(&a.entry, "kind");
	st = check_station(c, wire_entry_text(&a.entry, "station"), false, e);
	if (st == QB_OK && strcmp(kind, "observing") != 0 && strcmp(kind, "veto") != 0 && strcmp(kind, "noise") != 0)
		st = qb_fail(e, QB_FORMAT, "segments: kind", "observing, veto or noise", "is '%s'", kind);
	if (st == QB_OK)
		st = enter_one(o, "segments", call, &a, reply, e);
	accepted_free(&a);
	return st;
}
