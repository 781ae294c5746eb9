/*
 * The noun `service`: what it is, and moving a rehearsal clock. The clock goes in steps, so that every driver takes
 * part in every slot as it would in real time: freeze, start (the keys are fetched), end (the reports are filed).
 */
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define WAIT_S  60
#define POLL_NS 10000000L

static enum qb_status run_show(struct cli_call *c)
{
	json_t *doc;
	enum qb_status st = cli_home(c, false);
	if (st == QB_OK)
		st = link_open(&c->link, &c->home, cli_option(c, "service"), &c->error);
	if (st != QB_OK)
		return st;
	c->has_link = true;
	st = link_get(&c->link, "/v1/service", &doc, &c->error);
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, doc);
	else if (st == QB_OK)
		cli_print(c, "address  %s\nversion  %s\nkey      %s (pinned)\nclock    %s, %s (GPS %s)\n", c->link.url,
		          json_string_value(json_object_get(doc, "version")),
		          json_string_value(json_object_get(doc, "service_key")),
		          json_string_value(json_object_get(doc, "clock")),
		          json_string_value(json_object_get(doc, "now_utc")),
		          json_string_value(json_object_get(doc, "now_gps")));
	json_decref(doc);
	return st;
}

static enum qb_status move(struct cli_call *c, int64_t to_ns)
{
	if (to_ns <= c->link.now_gps_ns)
		return QB_OK;
	json_t *body = json_object();
	json_object_set_new(body, "to_gps", json_gps_new(to_ns));
	enum qb_status st = link_post(&c->link, "/v1/clock", body, NULL, &c->error);
	json_decref(body);
	if (st == QB_OK)
		c->link.now_gps_ns = to_ns;
	return st;
}

/* Whether every station has got as far as the step needs: a note at the start, the report after the end. */
static bool all_there(const json_t *slot, bool ended, const char **missing)
{
	const char *name;
	json_t *s;
	json_object_foreach(json_object_get(slot, "stations"), name, s)
	{
		bool there = ended ? json_is_true(json_object_get(s, "reported"))
		                   : json_integer_value(json_object_get(s, "notes")) > 0 ||
		                         json_is_true(json_object_get(s, "reported"));
		if (!there) {
			*missing = name;
			return false;
		}
	}
	return true;
}

static enum qb_status wait_for_drivers(struct cli_call *c, const struct campaign *k, int64_t n, bool ended)
{
	struct timespec pause = {0, POLL_NS};
	char *path = text_printf("/v1/campaigns/%s/slots/%lld", k->name, (long long)n);
	const char *missing = "";
	char name[64] = "";
	enum qb_status st = QB_OK;
	bool there = false;
	for (long i = 0; st == QB_OK && !there && i < WAIT_S * (1000000000L / POLL_NS); i++) {
		json_t *doc;
		st = link_get(&c->link, path, &doc, &c->error);
		there = st == QB_OK && all_there(doc, ended, &missing);
		if (st == QB_OK && !there) {
			(void)snprintf(name, sizeof name, "%s", missing);
			nanosleep(&pause, NULL);
		}
		json_decref(doc);
	}
	if (st == QB_OK && !there)
		st = qb_fail(&c->error, QB_REFUSED, "rehearsal clock",
		             "start the driver of the station, then move the clock on",
		             "%s has not %s for slot %lld within %d s", name,
		             ended ? "reported" : "filed its first note", (long long)n, WAIT_S);
	qb_free(path);
	return st;
}

/* One campaign's slots up to the target. */
static enum qb_status step_campaign(struct cli_call *c, const struct campaign *k, int64_t to_ns)
{
	const struct slots *s = &k->plan->slots;
	enum qb_status st = QB_OK;
	for (int64_t n = 0; st == QB_OK && n < k->n_slots; n++) {
		int64_t freeze = slots_freeze(s, n), start = slots_start(s, n), end = slots_start(s, n + 1);
		if (end <= c->link.now_gps_ns)
			continue;
		if (freeze > to_ns)
			break;
		st = move(c, freeze);
		if (st == QB_OK && start <= to_ns && (st = move(c, start)) == QB_OK)
			st = wait_for_drivers(c, k, n, false);
		if (st == QB_OK && end <= to_ns && (st = move(c, end)) == QB_OK)
			st = wait_for_drivers(c, k, n, true);
		cli_progress(c, "slots", (uint64_t)n + 1, (uint64_t)k->n_slots);
	}
	return st;
}

static enum qb_status run_clock(struct cli_call *c)
{
	int64_t to;
	char utc[40], gps[32];
	enum qb_status st = cli_option_gps(c, "to", 0, &to);
	if (st == QB_OK)
		st = cli_follow(c);
	if (st == QB_OK && !c->link.rehearsal)
		st = qb_fail(&c->error, QB_REFUSED, "clock", NULL, "this service runs on the system clock");
	if (st == QB_OK && to < c->link.now_gps_ns)
		st = qb_fail(&c->error, QB_REFUSED, "clock", NULL, "a clock is never set back");
	for (int i = 0; st == QB_OK && i < c->follow.view.n_campaigns; i++) {
		if (c->follow.view.campaign[i]->state == C_SEALED && cli_option(c, "at-once") == NULL)
			st = step_campaign(c, c->follow.view.campaign[i], to);
	}
	if (st == QB_OK)
		st = move(c, to);
	if (st == QB_OK)
		cli_print(c, "the rehearsal clock stands at %s (GPS %s)\n", clock_utc_text(to, utc, sizeof utc),
		          clock_gps_text(to, gps, sizeof gps));
	return st;
}

static const struct cli_option clock_options[] = {
    {"to", "GPS", true, "GPS seconds or UTC"},
    {"at-once", NULL, false, "not in steps: slots in between go unplayed when their drivers can't keep up"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_service_verbs[] = {
    {"service", "show", "", run_show, NULL, "shows address, key and clock of the service",
     "quietbell service show --service http://127.0.0.1:8787"},
    {"service", "clock", "", run_clock, clock_options, "moves a rehearsal clock in steps (administrator)",
     "quietbell service clock --to 2027-03-01T00:10:40Z"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
