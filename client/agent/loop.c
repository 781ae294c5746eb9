/* The driver's whole run; see loop.h. */
#include "client/agent/loop.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

#include "client/agent/fetch.h"
#include "client/agent/slot.h"
#include "client/agent/watch.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

#define REQUEST_S 5 /* a service that hangs must not keep the driver from ramping down */

/* ---- opening ---- */

static enum qb_status check_station(struct driver *d, struct qb_error *e)
{
	const struct campaign *c = d->campaign;
	d->station = plan_station(c->plan, d->opt.station);
	if (d->station < 0)
		return qb_fail(e, QB_REFUSED, "--station", "see the plan's network", "the network has no station '%s'",
		               d->opt.station);
	if (station_of_driver(c, d->home.name) != d->station)
		return qb_fail(e, QB_REFUSED, "--station", "see the plan's parties: drivers", "%s does not drive %s",
		               d->home.name, d->opt.station);
	d->place = place_of_driver(c, d->home.name);
	return QB_OK;
}

static enum qb_status find_campaign(struct driver *d, struct qb_error *e)
{
	enum qb_status st = follow_update(&d->follow, &d->link, e);
	if (st != QB_OK)
		return st;
	watch_contact(d);
	d->campaign = view_campaign(&d->follow.view, d->opt.campaign);
	if (d->campaign == NULL)
		return qb_fail(e, QB_NOT_FOUND, "campaign", "see quietbell campaign list",
		               "the ledger has no campaign '%s'", d->opt.campaign);
	return QB_OK;
}

enum qb_status loop_open(struct driver *d, const struct driver_options *opt, const struct log *log,
                         volatile sig_atomic_t *stopping, struct qb_error *e)
{
	*d = (struct driver){.opt = *opt, .log = *log, .system = clock_system(), .stopping = stopping};
	d->recipe = QB_NEW_ARRAY(struct buf, DRIVER_READY_AHEAD);
	enum qb_status st = home_open(opt->home, false, &d->home, e);
	if (st == QB_OK)
		st = link_open(&d->link, &d->home, opt->service, e);
	if (st == QB_OK) {
		d->link.timeout_s = REQUEST_S;
		st = home_unlock(&d->home, opt->passphrase_file, d->link.rehearsal, e);
	}
	if (st == QB_OK)
		st = follow_open(&d->follow, &d->home, e);
	if (st == QB_OK)
		st = find_campaign(d, e);
	if (st == QB_OK)
		st = check_station(d, e);
	if (st == QB_OK)
		st = sink_open(opt->sink, &d->sink, e);
	return st;
}

void loop_close(struct driver *d)
{
	for (int i = 0; i < DRIVER_READY_AHEAD; i++)
		buf_wipe(&d->recipe[i]);
	qb_free(d->recipe);
	prekeys_close(&d->prekeys);
	sink_close(&d->sink);
	follow_close(&d->follow);
	link_close(&d->link);
	home_close(&d->home);
	*d = (struct driver){0};
}

/* ---- one-time keys ---- */

static void about_prekeys(const struct driver *d, struct prekeys_for *out)
{
	*out = (struct prekeys_for){.place = d->place, .count = d->campaign->n_slots};
	memcpy(out->campaign, d->campaign->id, sizeof out->campaign);
	snprintf(out->station, sizeof out->station, "%s", driver_station(d)->name);
}

static enum qb_status upload(struct driver *d, const struct buf *points, struct qb_error *e)
{
	uint8_t hash[64];
	json_t *extra = json_object(), *body = NULL;
	char *path = text_printf("/v1/campaigns/%s/prekeys", d->campaign->name);
	blake2b_512(hash, points->data, points->len);
	json_object_set_new(extra, "station", json_string(driver_station(d)->name));
	json_object_set_new(extra, "place", json_integer(d->place));
	json_object_set_new(extra, "count", json_integer(d->campaign->n_slots));
	json_object_set_new(extra, "points_hash", json_hex_new(hash, sizeof hash));
	enum qb_status st = link_entry(&d->link, "prekeys", d->campaign->id, "", extra, &body, NULL, e);
	if (st == QB_OK) {
		char *text = base64_encode(points->data, points->len);
		json_object_set_new(body, "points", json_string(text));
		qb_free(text);
		st = link_post(&d->link, path, body, NULL, e);
	}
	json_decref(body);
	qb_free(path);
	return st;
}

/* The hash of this station's points as the ledger has it; false while there is none. */
static bool entered_points(const struct driver *d, uint8_t hash[static 64])
{
	bool found = false;
	for (uint64_t i = (uint64_t)d->campaign->plan_seq; i < d->follow.n; i++) {
		struct entry leaf;
		struct wire_entry w;
		struct qb_error ignored = {0};
		if (follow_entry(&d->follow, i, &leaf, &w, &ignored) != QB_OK)
			continue;
		if (strcmp(w.type->type, "prekeys") == 0 &&
		    memcmp(w.campaign, d->campaign->id, sizeof w.campaign) == 0 &&
		    strcmp(wire_entry_text(&w, "station"), driver_station(d)->name) == 0 &&
		    wire_entry_int(&w, "place") == (int64_t)d->place) {
			wire_entry_hex(&w, "points_hash", hash, 64);
			found = true;
		}
		wire_entry_free(&w);
	}
	return found;
}

static enum qb_status check_entered(const struct buf *points, const uint8_t entered[static 64], const char *path,
                                    struct qb_error *e)
{
	uint8_t hash[64];
	blake2b_512(hash, points->data, points->len);
	if (memcmp(hash, entered, sizeof hash) == 0)
		return QB_OK;
	return qb_fail(e, QB_REFUSED, path, "use the home directory from which they were sent",
	               "these one-time keys are not the ones that the service has");
}

static enum qb_status ensure_prekeys(struct driver *d, struct qb_error *e)
{
	struct prekeys_for what;
	struct buf points = {0};
	struct qb_error missing = {0};
	uint8_t entered[64];
	char *path = NULL;
	bool there = entered_points(d, entered);
	about_prekeys(d, &what);
	enum qb_status st = home_campaign_path(&d->home, d->campaign->id, "prekeys", &path, e);
	if (st == QB_OK) {
		st = prekeys_open(path, &what, &d->prekeys, &missing);
		if (st == QB_NOT_FOUND && there)
			st = qb_fail(e, QB_REFUSED, path, "use the home directory from which they were sent",
			             "the service has one-time keys of this station that are not here");
		else if (st == QB_NOT_FOUND && d->campaign->state >= C_SEALING)
			st = qb_fail(e, QB_REFUSED, d->campaign->name, NULL,
			             "was sealed without one-time keys of this %s",
			             d->place == RECIPE_SPARE ? "spare host" : "station");
		else if (st == QB_NOT_FOUND && (st = prekeys_create(path, &what, &d->home.key, e)) == QB_OK)
			st = prekeys_open(path, &what, &d->prekeys, e);
		else if (st != QB_OK)
			*e = missing;
	}
	if (st == QB_OK)
		st = prekeys_points(d->prekeys, &points, e);
	if (st == QB_OK && there)
		st = check_entered(&points, entered, path, e);
	else if (st == QB_OK)
		st = upload(d, &points, e);
	if (st == QB_OK)
		log_event(&d->log, LOG_INFO_, there ? "one-time-keys-found" : "one-time-keys-sent", NULL);
	buf_free(&points);
	qb_free(path);
	return st;
}

/* ---- the run ---- */

/* Waits for the sealing; the service may come and go meanwhile. */
static enum qb_status wait_sealed(struct driver *d, struct qb_error *e)
{
	struct timespec pause = {.tv_sec = d->link.rehearsal ? 0 : 2, .tv_nsec = d->link.rehearsal ? 50000000 : 0};
	while (d->campaign->state < C_SEALED && !watch_stopping(d)) {
		struct qb_error now = {0};
		enum qb_status st = find_campaign(d, &now);
		if (st == QB_OK && campaign_over(d->campaign))
			return qb_fail(e, QB_REFUSED, d->campaign->name, NULL, "was abandoned by %s: %.200s",
			               d->campaign->ended_by, d->campaign->ended_why);
		if (st != QB_OK && st != QB_UNREACHABLE) {
			*e = now;
			return st;
		}
		if (d->campaign->state < C_SEALED)
			nanosleep(&pause, NULL);
	}
	if (d->campaign->state < C_SEALED)
		return QB_OK;
	log_event(&d->log, LOG_INFO_, "campaign-sealed", NULL);
	return campaign_certified_group(d->campaign, &d->group, e);
}

/* Keys of slots that are over are of no use to anybody but a thief. */
static enum qb_status erase_past(struct driver *d, int64_t now_ns, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	const struct slots *sl = &d->campaign->plan->slots;
	for (int64_t n = 0; st == QB_OK && n < d->campaign->n_slots && slots_start(sl, n + 1) <= now_ns; n++)
		st = prekeys_erase(d->prekeys, n, e);
	return st;
}

/* The campaign ended before its time: from this slot on nothing is played. */
static enum qb_status erase_from(struct driver *d, int64_t slot, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	log_event(&d->log, LOG_INFO_, "campaign-ended-early", NULL);
	for (int64_t n = slot; st == QB_OK && n < d->campaign->n_slots; n++)
		st = prekeys_erase(d->prekeys, n, e);
	return st;
}

/* Tries while the service is out of reach; QB_UNREACHABLE is left only when told to end. */
static enum qb_status insist(struct driver *d,
                             enum qb_status (*get)(struct driver *, int64_t, void *, struct qb_error *), int64_t slot,
                             void *out, struct qb_error *e)
{
	enum qb_status st = QB_UNREACHABLE;
	for (int tries = 0; st == QB_UNREACHABLE && !watch_stopping(d); tries++) {
		char line[600];
		*e = (struct qb_error){0};
		st = get(d, slot, out, e);
		if (st != QB_UNREACHABLE)
			break;
		if (tries % 50 == 0)
			log_event(&d->log, LOG_WARN_, "service-not-answering", "why",
			          qb_error_line(e, line, sizeof line), NULL);
		watch_pause(d, false);
	}
	return st;
}

static enum qb_status get_now(struct driver *d, int64_t slot, void *out, struct qb_error *e)
{
	(void)slot;
	return watch_now(d, out, e);
}

static enum qb_status get_slot(struct driver *d, int64_t slot, void *out, struct qb_error *e)
{
	return watch_slot(d, slot, out, e);
}

static enum qb_status get_recipes(struct driver *d, int64_t slot, void *out, struct qb_error *e)
{
	(void)out;
	return fetch_ahead(d, slot, e);
}

static enum qb_status play_slots(struct driver *d, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (int64_t n = 0; st == QB_OK && n < d->campaign->n_slots && !watch_stopping(d); n++) {
		struct watch_slot seen;
		struct qb_error why = {0};
		char line[600];
		bool filed;
		st = insist(d, get_slot, n, &seen, e);
		if (st == QB_OK && watch_ended(&seen))
			return erase_from(d, n, e);
		if (st != QB_OK || seen.reported)
			continue;
		/* Without its recipe the slot is not played, and reported as such. */
		if (insist(d, get_recipes, n, NULL, &why) != QB_OK)
			log_event(&d->log, LOG_WARN_, "recipes-not-fetched", "why",
			          qb_error_line(&why, line, sizeof line), NULL);
		st = slot_run(d, n, &filed, e);
		/* Left unfiled without being told to end: the campaign ended while this slot was waited for. */
		if (st == QB_OK && !filed && !watch_stopping(d) && insist(d, get_slot, n, &seen, &why) == QB_OK &&
		    watch_ended(&seen))
			return erase_from(d, n, e);
	}
	return watch_stopping(d) && st == QB_UNREACHABLE ? QB_OK : st;
}

enum qb_status loop_run(struct driver *d, struct qb_error *e)
{
	int64_t now = 0;
	enum qb_status st = ensure_prekeys(d, e);
	if (st == QB_OK)
		st = wait_sealed(d, e);
	if (st == QB_OK && !watch_stopping(d))
		st = insist(d, get_now, 0, &now, e);
	if (st == QB_OK && !watch_stopping(d))
		st = erase_past(d, now, e);
	if (st == QB_OK)
		st = play_slots(d, e);
	if (watch_stopping(d) && st == QB_UNREACHABLE)
		st = QB_OK;
	if (st == QB_OK)
		log_event(&d->log, LOG_INFO_, watch_stopping(d) ? "told-to-end" : "campaign-played", NULL);
	return st;
}
