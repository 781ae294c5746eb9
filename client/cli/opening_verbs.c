/* The noun `opening`: asking, seeing, joining, and the answer. */
#include <string.h>

#include "client/cli/opening_join.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define DEADLINE_NS (3600 * NS_PER_S)

static enum qb_status names_of(struct cli_call *c, json_t **out)
{
	const char *list = cli_option(c, "recipients");
	*out = json_array();
	for (const char *p = list != NULL ? list : ""; *p != '\0';) {
		size_t n = strcspn(p, ",");
		char *name = qb_memdup(p, n);
		bool good = text_is_name(name);
		if (good)
			json_array_append_new(*out, json_string(name));
		qb_free(name);
		if (!good)
			return qb_fail(&c->error, QB_USAGE, "--recipients", "give names with commas between them",
			               "'%.60s' is no list of names", list);
		p += n + (p[n] == ',');
	}
	if (json_array_size(*out) == 0)
		json_array_append_new(*out, json_string(c->home.name));
	return QB_OK;
}

static enum qb_status run_request(struct cli_call *c)
{
	struct campaign *k;
	int64_t from, to, deadline;
	uint8_t nonce[32];
	bool all = cli_option(c, "all") != NULL;
	json_t *extra = json_object(), *more = NULL, *names = NULL, *answer = NULL;
	if (all == (cli_option(c, "from") != NULL) ||
	    (cli_option(c, "from") == NULL) != (cli_option(c, "to") == NULL)) {
		json_decref(extra);
		return qb_fail(&c->error, QB_USAGE, NULL, NULL, "give --all, or --from and --to");
	}
	enum qb_status st = cli_option_gps(c, "from", 0, &from);
	if (st == QB_OK)
		st = cli_option_gps(c, "to", 0, &to);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		st = cli_option_gps(c, "deadline", c->link.now_gps_ns + DEADLINE_NS, &deadline);
	if (st == QB_OK)
		st = names_of(c, &names);
	if (st != QB_OK) {
		json_decref(extra);
		json_decref(names);
		return st;
	}
	json_object_set_new(extra, "recipients", names);
	json_object_set_new(extra, "deadline_gps", json_gps_new(deadline));
	if (!all) {
		json_object_set_new(extra, "from_gps", json_gps_new(from));
		json_object_set_new(extra, "to_gps", json_gps_new(to));
		random_bytes(nonce, sizeof nonce);
		more = json_object();
		json_object_set_new(more, "nonce", json_hex_new(nonce, 32));
	}
	char *path = text_printf("/v1/campaigns/%s/openings", k->name);
	st = cli_post_entry(c, path, all ? "opening-request" : "spot-request", k->id, cli_option(c, "reason"), extra,
	                    more, &answer);
	qb_free(path);
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, answer);
	else if (st == QB_OK)
		cli_print(c, "%s\n", json_string_value(json_object_get(answer, "opening")));
	json_decref(answer);
	return st;
}

static enum qb_status run_list(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL, *j;
	size_t i;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	char *path = text_printf("/v1/campaigns/%s/openings", k->name);
	st = link_get(&c->link, path, &doc, &c->error);
	qb_free(path);
	if (st == QB_OK && cli_wants_json(c)) {
		cli_json(c, json_object_get(doc, "openings"));
	} else if (st == QB_OK) {
		json_array_foreach(json_object_get(doc, "openings"), i, j) cli_print(
		    c, "%s  %-5s %-9s %zu of %d custodians\n", json_string_value(json_object_get(j, "opening")),
		    json_string_value(json_object_get(j, "scope")), json_string_value(json_object_get(j, "state")),
		    json_array_size(json_object_get(j, "shares")), k->k);
	}
	json_decref(doc);
	return st;
}

static enum qb_status fetch_opening(struct cli_call *c, const struct campaign *k, const char *id, json_t **out)
{
	char *path = text_printf("/v1/campaigns/%s/openings/%s", k->name, id);
	enum qb_status st = link_get(&c->link, path, out, &c->error);
	qb_free(path);
	return st;
}

static enum qb_status run_join(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK && custodian_index(k, c->home.name) < 0)
		st = qb_fail(&c->error, QB_REFUSED, "opening", NULL, "%s is no custodian of '%s'", c->home.name,
		             k->name);
	/* A full opening stands in the verified ledger; whatever else the service shows is a spot request. */
	struct opening *op = st == QB_OK ? opening_find(k, cli_arg(c, 1)) : NULL;
	if (op != NULL) {
		st = join_full(c, k, op);
	} else if (st == QB_OK && (st = fetch_opening(c, k, cli_arg(c, 1), &doc)) == QB_OK) {
		const char *scope = json_string_value(json_object_get(doc, "scope"));
		if (scope == NULL || strcmp(scope, "spot") != 0)
			st = qb_fail(&c->error, QB_CRYPTO, "opening", "do not trust this service",
			             "the ledger has no such request");
		else
			st = join_spot(c, k, doc);
	}
	if (st == QB_OK)
		st = cli_follow(c);
	if (st == QB_OK)
		st = follow_cosign(&c->follow, &c->link, &c->error);
	json_decref(doc);
	return st;
}

static enum qb_status run_result(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL;
	char answer[64];
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	struct opening *op = st == QB_OK ? opening_find(k, cli_arg(c, 1)) : NULL;
	if (op != NULL) {
		if (!op->opened)
			return qb_fail(&c->error, QB_NO, "opening", "wait for the custodians", "it is not open yet");
		cli_print(c, "opened: export the bundle with quietbell bundle export\n");
		return QB_OK;
	}
	if (st == QB_OK)
		st = fetch_opening(c, k, cli_arg(c, 1), &doc);
	if (st == QB_OK)
		st = spot_result(c, k, doc, answer);
	if (st == QB_OK && cli_wants_json(c)) {
		json_t *j = json_object();
		json_object_set_new(j, "answer", json_string(answer));
		json_object_set_new(j, "custodians", json_integer(k->k));
		cli_json(c, j);
		json_decref(j);
	} else if (st == QB_OK) {
		cli_print(c, "%s\n", answer);
		cli_note(c, "signed by %d custodians\n", k->k);
	}
	json_decref(doc);
	return st;
}

static const struct cli_option request_options[] = {
    {"all", NULL, false, "the full opening (reviewer, after closing)"},
    {"from", "GPS", false, "spot: start of the interval, GPS seconds or UTC"},
    {"to", "GPS", false, "spot: its end"},
    {"reason", "TEXT", true, "why"},
    {"recipients", "NAMES", false, "who will learn the result (default: the asker)"},
    {"deadline", "GPS", false, "when an answer is of no use any more (default: an hour)"},
    {NULL, NULL, false, NULL}};
static const struct cli_option join_options[] = {{"yes", NULL, false, "do not ask"}, {NULL, NULL, false, NULL}};

static const struct cli_option rehearse_options[] = {{"reason", "TEXT", false, "why, for the ledger"},
                                                     {NULL, NULL, false, NULL}};

const struct cli_verb cli_opening_verbs[] = {
    {"opening", "request", "CAMPAIGN", run_request, request_options, "asks for a spot or the full opening",
     "quietbell opening request fells-spring --from 1487895000 --to 1487895002 --reason 'alert in hand'"},
    {"opening", "list", "CAMPAIGN", run_list, NULL, "lists openings that this party may see",
     "quietbell opening list fells-spring"},
    {"opening", "join", "CAMPAIGN OPENING", run_join, join_options, "gives a custodian's part, after every check",
     "quietbell opening join fells-spring 0123456789abcdef0123456789abcdef"},
    {"opening", "rehearse", "CAMPAIGN", cli_rehearse, rehearse_options,
     "opens the newest canary, or asks for a fresh one: does this custodian's share still work?",
     "quietbell opening rehearse fells-spring --reason monthly"},
    {"opening", "result", "CAMPAIGN OPENING", run_result, NULL, "shows the answer (the asker)",
     "quietbell opening result fells-spring 0123456789abcdef0123456789abcdef"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
