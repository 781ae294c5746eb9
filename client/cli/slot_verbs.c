/* The noun `slot`: the schedule, holds and stops. */
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

/* One word of what a station does in a slot, from the public listing alone. */
static const char *station_word(const json_t *s)
{
	const json_t *going = json_object_get(s, "going");
	if (json_is_true(json_object_get(s, "stopped")))
		return "stopped";
	if (json_is_true(json_object_get(s, "held")))
		return "held";
	if (json_is_true(json_object_get(s, "reported")))
		return json_is_true(going) ? "reported" : "out";
	if (json_is_true(going))
		return "goes";
	if (json_is_false(going))
		return "out";
	return json_is_true(json_object_get(s, "ready")) ? "ready" : "-";
}

static void print_slot(struct cli_call *c, const struct campaign *k, const json_t *s)
{
	cli_print(c, "%6lld  %-24s %-14s %-8s", (long long)json_integer_value(json_object_get(s, "slot")),
	          json_string_value(json_object_get(s, "start_utc")),
	          json_string_value(json_object_get(s, "start_gps")), json_string_value(json_object_get(s, "state")));
	for (int i = 0; i < k->plan->network->n_stations; i++)
		cli_print(
		    c, " %-9s",
		    station_word(json_object_get(json_object_get(s, "stations"), k->plan->network->stations[i].name)));
	cli_print(c, "\n");
}

static void print_head(struct cli_call *c, const struct campaign *k)
{
	cli_print(c, "%6s  %-24s %-14s %-8s", "slot", "start (UTC)", "start (GPS s)", "state");
	for (int i = 0; i < k->plan->network->n_stations; i++)
		cli_print(c, " %-9s", k->plan->network->stations[i].name);
	cli_print(c, "\n");
}

static enum qb_status run_list(struct cli_call *c)
{
	struct campaign *k;
	json_t *all = json_array();
	json_int_t from = 0;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	while (st == QB_OK && from >= 0) {
		json_t *doc;
		char *path = text_printf("/v1/campaigns/%s/slots?from=%lld&limit=500", k->name, (long long)from);
		st = link_get(&c->link, path, &doc, &c->error);
		qb_free(path);
		if (st == QB_OK) {
			json_array_extend(all, json_object_get(doc, "slots"));
			const json_t *next = json_object_get(doc, "next");
			from = json_is_integer(next) ? json_integer_value(next) : -1;
		}
		json_decref(doc);
	}
	if (st == QB_OK && cli_wants_json(c)) {
		cli_json(c, all);
	} else if (st == QB_OK) {
		size_t i;
		json_t *s;
		print_head(c, k);
		json_array_foreach(all, i, s) print_slot(c, k, s);
	}
	json_decref(all);
	return st;
}

static enum qb_status run_show(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL;
	int64_t n;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK && !text_i64(cli_arg(c, 1), &n))
		st = qb_fail(&c->error, QB_USAGE, "N", "give the slot's number", "'%.30s' is not a number",
		             cli_arg(c, 1));
	if (st != QB_OK)
		return st;
	char *path = text_printf("/v1/campaigns/%s/slots/%lld", k->name, (long long)n);
	st = link_get(&c->link, path, &doc, &c->error);
	qb_free(path);
	if (st == QB_OK && cli_wants_json(c)) {
		cli_json(c, doc);
	} else if (st == QB_OK) {
		print_head(c, k);
		print_slot(c, k, doc);
	}
	json_decref(doc);
	return st;
}

/* Posts a control entry and prints the number by which it can be lifted. */
static enum qb_status control(struct cli_call *c, struct campaign *k, const char *tail, const char *type, json_t *extra,
                              const char *said)
{
	json_t *answer = NULL;
	char *path = text_printf("/v1/campaigns/%s/%s", k->name, tail);
	enum qb_status st = cli_post_entry(c, path, type, k->id, cli_option(c, "reason"), extra, NULL, &answer);
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, answer);
	else if (st == QB_OK)
		cli_print(c, "%s %lld\n", said, (long long)json_integer_value(json_object_get(answer, "seq")));
	json_decref(answer);
	qb_free(path);
	return st;
}

static enum qb_status run_hold(struct cli_call *c)
{
	struct campaign *k;
	int64_t from, to;
	enum qb_status st = cli_option_gps(c, "from", 0, &from);
	if (st == QB_OK)
		st = cli_option_gps(c, "to", 0, &to);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	json_t *extra = json_object();
	json_object_set_new(extra, "station", json_string(cli_option(c, "station")));
	json_object_set_new(extra, "from_gps", json_gps_new(from));
	json_object_set_new(extra, "to_gps", json_gps_new(to));
	return control(c, k, "holds", "hold", extra, "hold");
}

static enum qb_status run_stop(struct cli_call *c)
{
	struct campaign *k;
	const char *station = cli_option(c, "station");
	bool all = cli_option(c, "all-stations") != NULL;
	if ((station != NULL) == all)
		return qb_fail(&c->error, QB_USAGE, NULL, NULL, "give --station S or --all-stations");
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	json_t *extra = json_object();
	json_object_set_new(extra, "station", json_string(all ? "all" : station));
	return control(c, k, "stops", "stop", extra, "stop");
}

static enum qb_status run_lift(struct cli_call *c)
{
	struct campaign *k;
	int64_t seq;
	char tail[64];
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK && !text_i64(cli_arg(c, 1), &seq))
		st = qb_fail(&c->error, QB_USAGE, NULL, "give the number that placing it printed",
		             "'%.30s' is not a number", cli_arg(c, 1));
	if (st != QB_OK)
		return st;
	bool stop = false;
	for (int i = 0; i < k->n_stops; i++)
		stop = stop || k->stop[i].seq == seq;
	json_t *extra = json_object();
	json_object_set_new(extra, stop ? "stop" : "hold", json_integer(seq));
	(void)snprintf(tail, sizeof tail, "%s/%lld/lift", stop ? "stops" : "holds", (long long)seq);
	return control(c, k, tail, stop ? "stop-lift" : "hold-lift", extra, "lifted: ledger entry");
}

static const struct cli_option hold_options[] = {{"station", "S", true, "the station"},
                                                 {"from", "GPS", true, "start of the stretch, GPS seconds or UTC"},
                                                 {"to", "GPS", true, "its end"},
                                                 {"reason", "TEXT", true, "why"},
                                                 {NULL, NULL, false, NULL}};
static const struct cli_option stop_options[] = {{"station", "S", false, "this station only"},
                                                 {"all-stations", NULL, false, "every station"},
                                                 {"reason", "TEXT", false, "why"},
                                                 {NULL, NULL, false, NULL}};
static const struct cli_option guess_options[] = {
    {"probability", "P", false, "how probable it is that the slot is live, 0 to 1"}, {NULL, NULL, false, NULL}};
static const struct cli_option reason_options[] = {{"reason", "TEXT", false, "why"}, {NULL, NULL, false, NULL}};

const struct cli_verb cli_slot_verbs[] = {
    {"slot", "list", "CAMPAIGN", run_list, NULL, "lists the schedule", "quietbell slot list fells-spring"},
    {"slot", "show", "CAMPAIGN N", run_show, NULL, "shows one slot", "quietbell slot show fells-spring 7"},
    {"slot", "hold", "CAMPAIGN", run_hold, hold_options, "holds a station for a stretch (operator)",
     "quietbell slot hold fells-spring --station heron --from 1487894866 --to 1487894930 --reason 'tree felling'"},
    {"slot", "lift", "CAMPAIGN NUMBER", run_lift, reason_options, "lifts a hold or stop (operator)",
     "quietbell slot lift fells-spring 131"},
    {"slot", "stop", "CAMPAIGN", run_stop, stop_options, "stops the drive at once (operator)",
     "quietbell slot stop fells-spring --all-stations"},
    {"slot", "guess", "CAMPAIGN N GUESS", cli_guess, guess_options,
     "seals a guess before a slot starts: live, null or dont-know; a later one replaces it (operator, analyst)",
     "quietbell slot guess fells-spring 7 live --probability 0.7"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
