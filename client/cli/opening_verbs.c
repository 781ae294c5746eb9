/* The noun `opening`: asking, seeing, joining, and the answer. */
#include <stdio.h>
#include <stdlib.h>
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
	int64_t from, to, deadline, reveal;
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
		st = cli_option_gps(c, "reveal-at", c->link.now_gps_ns, &reveal);
	if (st == QB_OK && !all && cli_option(c, "reveal-at") != NULL)
		st = qb_fail(&c->error, QB_USAGE, "--reveal-at", NULL, "is for the full opening");
	if (st == QB_OK && cli_option(c, "reveal-at") != NULL && cli_option(c, "deadline") == NULL)
		deadline = reveal + DEADLINE_NS;
	if (st == QB_OK)
		st = names_of(c, &names);
	if (st != QB_OK) {
		json_decref(extra);
		json_decref(names);
		return st;
	}
	json_object_set_new(extra, "recipients", names);
	json_object_set_new(extra, "deadline_gps", json_gps_new(deadline));
	if (all)
		json_object_set_new(extra, "reveal_gps", json_gps_new(reveal));
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

/* "name, name": a list of the answer. Returns out. */
static const char *names(const json_t *list, char *out, size_t size)
{
	size_t i, n = 0;
	json_t *v;
	out[0] = '\0';
	json_array_foreach(list, i, v)
	{
		const char *name = json_string_value(v);
		if (n < size)
			n += (size_t)snprintf(out + n, size - n, "%s%s", i > 0 ? ", " : "", name != NULL ? name : "?");
	}
	return out;
}

static int compare(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return x < y ? -1 : x > y;
}

static void print_opening(struct cli_call *c, const struct campaign *k, const json_t *j, double *seconds, size_t *n)
{
	char list[400], when[CLOCK_PEOPLE_TEXT];
	int64_t asked = 0, answered, deadline = 0, reveal;
	const char *state = json_string_value(json_object_get(j, "state"));
	const json_t *refused = json_object_get(j, "refused"), *next = json_object_get(j, "next");
	struct qb_error ignored = {0};
	(void)!json_gps(j, "asked_gps", "opening", &asked, &ignored);
	(void)!json_gps(j, "deadline_gps", "opening", &deadline, &ignored);
	cli_print(c, "%s  %-5s %-9s %zu of %d custodians\n", json_string_value(json_object_get(j, "opening")),
	          json_string_value(json_object_get(j, "scope")), state, json_array_size(json_object_get(j, "shares")),
	          k->k);
	cli_print(c, "    asked     %s\n", clock_people_text(asked, when, sizeof when));
	if (json_gps(j, "answered_gps", "opening", &answered, &ignored) == QB_OK) {
		seconds[(*n)++] = (double)(answered - asked) / 1e9;
		cli_print(c, "    answered  after %.1f s\n", (double)(answered - asked) / 1e9);
		return;
	}
	if (state != NULL && strcmp(state, "waiting") == 0) {
		if (json_gps(j, "reveal_gps", "opening", &reveal, &ignored) == QB_OK && reveal > c->link.now_gps_ns)
			cli_print(c, "    reveal at %s\n", clock_people_text(reveal, when, sizeof when));
		cli_print(c, "    deadline  %s\n", clock_people_text(deadline, when, sizeof when));
		cli_print(c, "    called    %s\n", names(json_object_get(j, "called"), list, sizeof list));
		if (json_array_size(next) > 0)
			cli_print(c, "    next      %s\n", names(next, list, sizeof list));
	}
	if (json_array_size(refused) > 0)
		cli_print(c, "    refused   %s\n", names(refused, list, sizeof list));
}

static enum qb_status run_list(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL, *j;
	size_t i, n = 0;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	char *path = text_printf("/v1/campaigns/%s/openings", k->name);
	st = link_get(&c->link, path, &doc, &c->error);
	qb_free(path);
	const json_t *list = json_object_get(doc, "openings");
	double *seconds = QB_NEW_ARRAY(double, json_array_size(list) + 1);
	if (st == QB_OK && cli_wants_json(c)) {
		cli_json(c, list);
	} else if (st == QB_OK) {
		json_array_foreach(list, i, j) print_opening(c, k, j, seconds, &n);
		qsort(seconds, n, sizeof *seconds, compare);
		if (n > 0)
			cli_print(c, "median time from question to answer: %.1f s (%zu answered)\n",
			          n % 2 == 1 ? seconds[n / 2] : (seconds[n / 2 - 1] + seconds[n / 2]) / 2, n);
	}
	qb_free(seconds);
	json_decref(doc);
	return st;
}

static enum qb_status fetch_opening(struct cli_call *c, const struct campaign *k, const char *id, json_t **out)
{
	uint8_t bytes[16];
	const char *shown;
	*out = NULL;
	if (strlen(id) != 2 * sizeof bytes || !hex_decode(bytes, sizeof bytes, id))
		return qb_fail(&c->error, QB_USAGE, "opening", "see quietbell opening list",
		               "'%.40s' is not the number of an opening", id);
	char *path = text_printf("/v1/campaigns/%s/openings/%s", k->name, id);
	enum qb_status st = link_get(&c->link, path, out, &c->error);
	qb_free(path);
	if (st == QB_OK)
		st = json_str(*out, "opening", "opening", &shown, &c->error);
	if (st == QB_OK && strcmp(id, shown) != 0)
		st = qb_fail(&c->error, QB_CRYPTO, "opening", "do not open; tell the other custodians",
		             "the service shows another opening than the one asked for");
	if (st != QB_OK) {
		json_decref(*out);
		*out = NULL;
	}
	return st;
}

/* A refusal is an entry like any other: by name, with its reason. */
static enum qb_status refuse(struct cli_call *c, const struct campaign *k, const char *id, bool full)
{
	uint8_t nonce[32];
	json_t *extra = json_object(), *more = NULL;
	char *path = text_printf("/v1/campaigns/%s/openings/%s/shares", k->name, id);
	if (cli_option(c, "reason") == NULL) {
		json_decref(extra);
		qb_free(path);
		return qb_fail(&c->error, QB_USAGE, "--refuse", "give --reason", "a refusal needs a reason");
	}
	json_object_set_new(extra, "opening", json_string(id));
	if (!full) {
		random_bytes(nonce, sizeof nonce);
		more = json_object();
		json_object_set_new(more, "nonce", json_hex_new(nonce, 32));
	}
	enum qb_status st = cli_post_entry(c, path, full ? "opening-refusal" : "spot-refusal", k->id,
	                                   cli_option(c, "reason"), extra, more, NULL);
	qb_free(path);
	if (st == QB_OK)
		cli_print(c, "%s refused\n", c->home.name);
	return st;
}

/* By whose call: nobody is kept from helping, but the people who are called should know that they are. */
static void note_rota(struct cli_call *c, const json_t *doc)
{
	char list[400];
	size_t i;
	json_t *v;
	const json_t *called = json_object_get(doc, "called");
	json_array_foreach(called, i, v)
	{
		const char *name = json_string_value(v);
		if (name != NULL && strcmp(name, c->home.name) == 0)
			return;
	}
	if (json_array_size(called) > 0)
		cli_note(c, "The rota calls %s first; %s helps all the same.\n", names(called, list, sizeof list),
		         c->home.name);
}

static enum qb_status spot_doc(struct cli_call *c, const struct campaign *k, const char *id, json_t **out)
{
	enum qb_status st = fetch_opening(c, k, id, out);
	const char *scope = json_string_value(json_object_get(*out, "scope"));
	if (st == QB_OK && (scope == NULL || strcmp(scope, "spot") != 0))
		st = qb_fail(&c->error, QB_CRYPTO, "opening", "do not trust this service",
		             "the ledger has no such request");
	return st;
}

static enum qb_status custodian_of(struct cli_call *c, struct campaign **k)
{
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), k);
	if (st == QB_OK && custodian_index(*k, c->home.name) < 0)
		st = qb_fail(&c->error, QB_REFUSED, "opening", NULL, "%s is no custodian of '%s'", c->home.name,
		             (*k)->name);
	return st;
}

static enum qb_status run_join(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL;
	bool no = cli_option(c, "refuse") != NULL;
	enum qb_status st = custodian_of(c, &k);
	/* A full opening stands in the verified ledger; whatever else the service shows is a spot request. */
	struct opening *op = st == QB_OK ? opening_find(k, cli_arg(c, 1)) : NULL;
	if (op != NULL) {
		st = no ? refuse(c, k, cli_arg(c, 1), true) : join_full(c, k, op);
	} else if (st == QB_OK && (st = spot_doc(c, k, cli_arg(c, 1), &doc)) == QB_OK) {
		if (!no)
			note_rota(c, doc);
		st = no ? refuse(c, k, cli_arg(c, 1), false) : join_spot(c, k, doc, SAY_ANSWER);
	}
	if (st == QB_OK)
		st = cli_follow(c);
	if (st == QB_OK)
		st = follow_cosign(&c->follow, &c->link, &c->error);
	json_decref(doc);
	return st;
}

static enum qb_status run_retract(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL;
	enum qb_status st = custodian_of(c, &k);
	if (st == QB_OK && (st = spot_doc(c, k, cli_arg(c, 1), &doc)) == QB_OK)
		st = join_spot(c, k, doc, SAY_RETRACTION);
	json_decref(doc);
	return st;
}

/* No answer yet: what the plan says about the alert that waits for it. */
static enum qb_status no_answer(struct cli_call *c, const struct campaign *k, const json_t *doc)
{
	const struct plan_alerts *a = &k->plan->alerts;
	int64_t asked = c->link.now_gps_ns;
	struct qb_error ignored = {0}, why = c->error;
	(void)!json_gps(doc, "asked_gps", "opening", &asked, &ignored);
	bool over = a->given && c->link.now_gps_ns - asked >= a->no_answer_after_ns;
	const char *policy = !over ? "wait" : a->then == PLAN_KEEP_HELD ? "keep-held" : "release-with-warning";
	if (cli_wants_json(c)) {
		json_t *j = json_object();
		json_object_set_new(j, "answer", json_null());
		json_object_set_new(j, "policy", json_string(policy));
		json_object_set_new(j, "waited_s", json_real((double)(c->link.now_gps_ns - asked) / 1e9));
		cli_json(c, j);
		json_decref(j);
	}
	if (!over)
		return QB_NO;
	c->error = (struct qb_error){0};
	return qb_fail(&c->error, QB_NO, "spot opening",
	               a->then == PLAN_KEEP_HELD ? "keep the alert held" : "release it with the plan's warning",
	               "no answer after %.0f s: by the plan, %s; %.200s", (double)(c->link.now_gps_ns - asked) / 1e9,
	               policy, why.what);
}

static enum qb_status show_result(struct cli_call *c, const struct answer_file *a)
{
	const char *out = cli_option(c, "out");
	json_t *doc = answer_json(a);
	enum qb_status st = QB_OK;
	if (out != NULL) {
		char *text = json_pretty(doc);
		st = file_write(out, 0644, text, strlen(text), &c->error);
		qb_free(text);
	}
	if (st == QB_OK && cli_wants_json(c)) {
		json_t *j = json_object();
		json_object_set_new(j, "answer", json_string(a->answer));
		json_object_set_new(j, "custodians", json_integer(a->k));
		json_object_set_new(j, "retracted", json_boolean(a->kind == SAY_RETRACTION));
		cli_json(c, j);
		json_decref(j);
	} else if (st == QB_OK) {
		cli_print(c, "%s%s\n", a->kind == SAY_RETRACTION ? "retracted: " : "", a->answer);
		cli_note(c, "signed by %d custodians\n", a->k);
	}
	json_decref(doc);
	return st;
}

static enum qb_status run_result(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL;
	struct answer_file *a = QB_NEW(struct answer_file);
	enum saying kind = cli_option(c, "retraction") != NULL ? SAY_RETRACTION : SAY_ANSWER;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	struct opening *op = st == QB_OK ? opening_find(k, cli_arg(c, 1)) : NULL;
	if (op != NULL) {
		if (!op->opened)
			st = qb_fail(&c->error, QB_NO, "opening", "wait for the custodians", "it is not open yet");
		else
			cli_print(c, "opened: export the bundle with quietbell bundle export\n");
	} else if (st == QB_OK) {
		st = fetch_opening(c, k, cli_arg(c, 1), &doc);
		if (st == QB_OK)
			st = spot_result(c, k, doc, kind, a);
		if (st == QB_OK)
			st = show_result(c, a);
		else if (st == QB_NO && kind == SAY_ANSWER)
			st = no_answer(c, k, doc);
	}
	json_decref(doc);
	qb_free(a);
	return st;
}

static const struct cli_option request_options[] = {
    {"all", NULL, false, "the full opening (reviewer, after closing)"},
    {"from", "GPS", false, "spot: start of the interval, GPS seconds or UTC"},
    {"to", "GPS", false, "spot: its end"},
    {"reason", "TEXT", true, "why"},
    {"recipients", "NAMES", false, "who will learn the result (default: the asker)"},
    {"reveal-at", "GPS", false, "full: custodians prepare before, and hand their parts over at this time"},
    {"deadline", "GPS", false, "when an answer is of no use any more (default: an hour)"},
    {NULL, NULL, false, NULL}};
static const struct cli_option join_options[] = {
    {"yes", NULL, false, "do not ask"},
    {"wait", NULL, false, "with a time to reveal: stay until then and hand the parts over"},
    {"refuse", NULL, false, "give nothing, and say so"},
    {"reason", "TEXT", false, "with --refuse: why"},
    {NULL, NULL, false, NULL}};
static const struct cli_option result_options[] = {
    {"out", "FILE", false, "a file that anybody can check with quietbell opening check"},
    {"retraction", NULL, false, "the retraction of the answer, if the custodians signed one"},
    {NULL, NULL, false, NULL}};
static const struct cli_option retract_options[] = {
    {"reason", "TEXT", true, "why, for the ledger"}, {"yes", NULL, false, "do not ask"}, {NULL, NULL, false, NULL}};
static const struct cli_option check_options[] = {
    {"fingerprint", "TEXT", false, "that the custodians published, in digits or words"}, {NULL, NULL, false, NULL}};

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
    {"opening", "retract", "CAMPAIGN OPENING", run_retract, retract_options,
     "signs the retraction of an answer, or of alerts about a drill (custodians)",
     "quietbell opening retract fells-spring 0123456789abcdef0123456789abcdef --reason 'telescopes were told'"},
    {"opening", "check", "FILE", cli_answer_check, check_options,
     "checks an answer or retraction; needs no account, service or network",
     "quietbell opening check answer.json --fingerprint 0123456789abcdef0123456789abcdef"},
    {"opening", "result", "CAMPAIGN OPENING", run_result, result_options, "shows the answer (the asker)",
     "quietbell opening result fells-spring 0123456789abcdef0123456789abcdef"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
