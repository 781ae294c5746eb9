/* The noun `campaign`: draft, list, show, seal, close; key generation is in keygen.c. */
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "client/cli/answer_file.h"
#include "client/cli/internal.h"
#include "client/cli/register.h"
#include "client/cli/keygen.h"
#include "client/cli/seal_host.h"
#include "client/cli/plan_file.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/custody/words.h"

static void draft_nonce(struct cli_call *c, int64_t seed, const char *plan, uint8_t out[static 16])
{
	struct transcript t;
	uint8_t h[64];
	(void)c;
	if (seed < 0) {
		random_bytes(out, 16);
		return;
	}
	transcript_begin(&t, "quietbell/1/rehearsal/nonce");
	transcript_u64(&t, (uint64_t)seed);
	transcript_text(&t, plan);
	transcript_end(&t, h);
	memcpy(out, h, 16);
}

static enum qb_status run_draft(struct cli_call *c)
{
	struct plan_file p;
	struct plan_findings f = {0};
	char line[900];
	uint8_t nonce[16];
	int64_t seed;
	json_t *answer = NULL;
	enum qb_status st = cli_option_int(c, "rehearsal-seed", 0, INT64_MAX, -1, &seed);
	if (st != QB_OK || (st = plan_file_read(cli_arg(c, 0), &p, &c->error)) != QB_OK)
		return st;
	st = plan_check(p.plan, &f, &c->error);
	for (int i = 0; i < f.n; i++)
		cli_note(c, "%s\n", plan_finding_line(&f.finding[i], line, sizeof line));
	if (st == QB_OK)
		st = cli_connect(c);
	if (st == QB_OK && seed >= 0 && !c->link.rehearsal)
		st = qb_fail(&c->error, QB_REFUSED, "--rehearsal-seed", NULL, "is for services with a rehearsal clock");
	if (st == QB_OK) {
		draft_nonce(c, seed, p.text, nonce);
		json_t *extra = json_object();
		json_object_set_new(extra, "nonce", json_hex_new(nonce, 16));
		json_object_set_new(extra, "plan", json_string(p.text));
		json_object_set(extra, "files", p.files);
		st = cli_post_entry(c, "/v1/campaigns", "plan", NULL, cli_option(c, "reason"), extra, NULL, &answer);
	}
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, answer);
	else if (st == QB_OK)
		cli_print(c, "campaign %s is drafted, id %s\n", json_string_value(json_object_get(answer, "name")),
		          json_string_value(json_object_get(answer, "id")));
	json_decref(answer);
	plan_findings_free(&f);
	plan_file_free(&p);
	return st;
}

static void print_register(struct cli_call *c, const struct view *v)
{
	cli_print(c, "%-24s %-10s %-11s %-20s %-12s %4s %5s  %s\n", "campaign", "state", "phase", "drafted", "by",
	          "keys", "seals", "id");
	for (int i = 0; i < v->n_campaigns; i++) {
		const struct campaign *k = v->campaign[i];
		char id[33], utc[40];
		hex_encode(id, k->id, 16);
		cli_print(c, "%-24s %-10s %-11s %-20s %-12s %4llu %5llu  %s\n", k->name, campaign_word(k),
		          plan_phase_word(k->plan->phase), clock_utc_text(k->drafted_ns, utc, sizeof utc),
		          k->drafted_by, (unsigned long long)k->attempt, (unsigned long long)k->sealing_attempt, id);
		if (k->ending != ENDING_NONE)
			cli_print(c, "    %s by %s on %s: %s\n", campaign_ending_word(k->ending), k->ended_by,
			          clock_utc_text(k->ended_ns, utc, sizeof utc), k->ended_why);
	}
	if (v->n_campaigns == 0)
		cli_print(c, "no campaign was ever drafted here\n");
}

static enum qb_status run_list(struct cli_call *c)
{
	enum qb_status st = cli_follow(c);
	if (st != QB_OK)
		return st;
	json_t *list = register_of(&c->follow.view);
	if (cli_wants_json(c))
		cli_json(c, list);
	else
		print_register(c, &c->follow.view);
	json_decref(list);
	return QB_OK;
}

/* A link between names that became known after the drafting: nothing is silenced, everybody sees it. */
static void print_conflicts(struct cli_call *c, const struct campaign *k)
{
	for (int i = 0; i < k->plan->n_people; i++) {
		const struct view_party *p = view_party_named(&c->follow.view, k->plan->person[i].name);
		for (int j = 0; p != NULL && j < i; j++) {
			const struct view_party *q = view_party_named(&c->follow.view, k->plan->person[j].name);
			if (q != NULL && view_one_person(p, q))
				cli_print(c, "conflict   %s (%s) and %s (%s) are one person\n", q->name,
				          plan_duty_word(k->plan->person[j].duty), p->name,
				          plan_duty_word(k->plan->person[i].duty));
		}
	}
}

/* What outside partners check answers against. */
static void print_fingerprint(struct cli_call *c, const struct campaign *k)
{
	struct answer_file *a = QB_NEW(struct answer_file);
	struct custody_group *g = QB_NEW(struct custody_group);
	struct qb_error ignored = {0};
	struct buf words = {0};
	uint8_t print[16];
	char hex[33];
	if (campaign_certified_group(k, g, &ignored) == QB_OK) {
		answer_frame(a, k, g);
		answer_fingerprint(a, print);
		hex_encode(hex, print, 16);
		words_put(print, 16, &words);
		cli_print(c, "fingerprint of the custodians  %s\n           %s\n", hex, (const char *)words.data);
	}
	buf_free(&words);
	qb_free(a);
	qb_free(g);
}

static enum qb_status run_show(struct cli_call *c)
{
	json_t *doc;
	char from[40], to[40];
	struct campaign *k;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	char *path = text_printf("/v1/campaigns/%s", k->name);
	st = link_get(&c->link, path, &doc, &c->error);
	qb_free(path);
	if (st == QB_OK && cli_wants_json(c)) {
		cli_json(c, doc);
	} else if (st == QB_OK) {
		int reports = 0, witnessed = 0;
		for (int64_t n = 0; n < k->n_slots; n++)
			reports += __builtin_popcount(k->slot[n].reported);
		cli_print(c, "campaign   %s (%s%s)\nstate      %s\n", k->name, plan_phase_word(k->plan->phase),
		          k->rehearsal_clock ? ", rehearsal clock" : "", campaign_word(k));
		if (k->ending != ENDING_NONE)
			cli_print(c, "ending     %s on %s by %s: %s\n", campaign_ending_word(k->ending),
			          clock_utc_text(k->ended_ns, from, sizeof from), k->ended_by, k->ended_why);
		cli_print(c, "slots      %lld of %g s, %s to %s\n", (long long)k->n_slots,
		          (double)k->plan->slots.slot_ns / 1e9,
		          clock_utc_text(k->plan->slots.start_gps_ns, from, sizeof from),
		          clock_utc_text(k->plan->slots.end_gps_ns, to, sizeof to));
		cli_print(c, "custody    %d of %d:", k->k, k->n);
		for (int i = 0; i < k->n; i++)
			cli_print(c, " %s", k->custodian[i].party->name);
		cli_print(c, "\n");
		cli_show_custody(c, k);
		print_fingerprint(c, k);
		cli_print(c, "attempts   key generation %llu, sealing %llu\n", (unsigned long long)k->attempt,
		          (unsigned long long)k->sealing_attempt);
		for (int i = 0; i < k->plan->network->n_stations; i++)
			witnessed += k->witness_seq[i] != NO_SEQ;
		cli_print(c, "witnesses  %d of %d stations signed their witness channels\n", witnessed,
		          k->plan->network->n_stations);
		print_conflicts(c, k);
		cli_print(c, "operations %d holds, %d stops, %d play reports\n", k->n_holds, k->n_stops, reports);
	}
	json_decref(doc);
	return st;
}

static enum qb_status wait_sealed(struct cli_call *c, const struct campaign *k)
{
	struct timespec pause = {0, 200000000};
	char *path = text_printf("/v1/campaigns/%s/sealer", k->name);
	enum qb_status st = QB_OK;
	for (;;) {
		json_t *doc;
		st = link_get(&c->link, path, &doc, &c->error);
		if (st != QB_OK)
			break;
		const char *state = json_string_value(json_object_get(doc, "state"));
		json_int_t done = json_integer_value(json_object_get(doc, "done")),
		           of = json_integer_value(json_object_get(doc, "of"));
		const char *failure = json_string_value(json_object_get(doc, "failure"));
		if (state != NULL && strcmp(state, "failed") == 0)
			st = qb_fail(&c->error, QB_REFUSED, "sealing", "see the service's log, then seal again",
			             "failed: %.300s", failure != NULL ? failure : "no reason was given");
		bool ready = state != NULL && strcmp(state, "done") == 0;
		cli_progress(c, "sealing", (uint64_t)done, (uint64_t)of);
		json_decref(doc);
		if (ready || st != QB_OK)
			break;
		nanosleep(&pause, NULL);
	}
	qb_free(path);
	return st;
}

enum qb_status cli_seal_ask(struct cli_call *c, const struct campaign *k, bool remote)
{
	json_t *more = json_object();
	char *path = text_printf("/v1/campaigns/%s/seal", k->name);
	if (remote)
		json_object_set_new(more, "remote", json_true());
	enum qb_status st = cli_post_entry(c, path, "seal-request", k->id, cli_option(c, "reason"), NULL, more, NULL);
	qb_free(path);
	return st;
}

static enum qb_status run_seal(struct cli_call *c)
{
	struct campaign *k;
	const char *host = cli_option(c, "on");
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		st = host != NULL ? cli_seal_relay(c, k, host) : cli_seal_ask(c, k, false);
	if (st == QB_OK)
		st = wait_sealed(c, k);
	if (st == QB_OK)
		cli_print(c, "campaign %s is sealed: %lld slots, every one with its record\n", k->name,
		          (long long)k->n_slots);
	return st;
}

static const struct cli_option close_options[] = {
    {"check", NULL, false, "list what is missing, and change nothing; status 1 when something is"},
    {"early", NULL, false, "before the end of the stretch; nothing more is played"},
    {"reason", "TEXT", false, "why, for the ledger; needed with --early"},
    {NULL, NULL, false, NULL}};
static const struct cli_option draft_options[] = {
    {"reason", "TEXT", false, "why, for the ledger"},
    {"rehearsal-seed", "N", false, "a fixed campaign number, for reproducible rehearsals"},
    {NULL, NULL, false, NULL}};
static const struct cli_option keygen_options[] = {
    {"wait", NULL, false, "wait for the others and go on until the campaign is sealed"},
    {"rehearsal-seed", "N", false, "a fixed contribution, for reproducible rehearsals"},
    {NULL, NULL, false, NULL}};

static const struct cli_option why_options[] = {{"reason", "TEXT", true, "why, for the ledger"},
                                                {NULL, NULL, false, NULL}};
static const struct cli_option reshare_options[] = {
    {"to", "NAMES", false, "the new set, in its order"},
    {"needed", "K", false, "how many of them an opening needs (default: as now)"},
    {"dealers", "NAMES", false, "who of the present set deals (default: the first that are needed)"},
    {"end", NULL, false, "gives up the attempt that is under way; nothing changes"},
    {"reason", "TEXT", true, "why, for the ledger"},
    {NULL, NULL, false, NULL}};
static const struct cli_option repair_options[] = {
    {"helpers", "NAMES", false, "who helps (default: the first of the others that are needed)"},
    {"end", NULL, false, "gives up the repair that is under way, to ask other helpers"},
    {"reason", "TEXT", true, "why, for the ledger"},
    {NULL, NULL, false, NULL}};
static const struct cli_option seal_options[] = {
    {"on", "HOST-FILE", false, "a sealer on another machine (YAML: address: HOST:PORT, or folder: DIR)"},
    {"reason", "TEXT", false, "why, for the ledger"},
    {NULL, NULL, false, NULL}};
static const struct cli_option witness_options[] = {
    {"station", "S", true, "the station; the channels of the plan are taken"},
    {"also", "NAMES", false, "further channels that were found, readable by people on site"},
    {"also-masked", "NAMES", false, "further channels that were found and are masked now"},
    {"reason", "TEXT", true, "how the station was looked at, for the ledger"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_campaign_verbs[] = {
    {"campaign", "draft", "PLAN", run_draft, draft_options, "drafts a campaign from a plan",
     "quietbell campaign draft plan.yaml"},
    {"campaign", "list", "", run_list, NULL,
     "the register: every campaign ever drafted, with its attempts and how it ended", "quietbell campaign list"},
    {"campaign", "show", "CAMPAIGN", run_show, NULL, "shows state, keys and counts that reveal nothing",
     "quietbell campaign show fells-spring"},
    {"campaign", "keygen", "CAMPAIGN", cli_keygen, keygen_options,
     "a custodian's part: deal, certify, rehearse, contribute", "quietbell campaign keygen fells-spring --wait"},
    {"campaign", "exclude", "CAMPAIGN NAME", cli_exclude, why_options,
     "leaves a custodian out who has kept the key generation waiting for three days",
     "quietbell campaign exclude fells-spring okoro --reason 'cannot be reached'"},
    {"campaign", "reshare", "CAMPAIGN", cli_reshare, reshare_options,
     "asks the custodians to deal their shares on to another set, under the same key",
     "quietbell campaign reshare fells-spring --to ines,marchetti,sato --needed 2 --reason 'okoro leaves'"},
    {"campaign", "repair", "CAMPAIGN", cli_repair, repair_options,
     "gets a lost share back from the others, without anybody learning another one",
     "quietbell campaign repair fells-spring --reason 'disk died'"},
    {"campaign", "witness", "CAMPAIGN", cli_witness, witness_options,
     "signs what could tell live from null at a station (operator, driver)",
     "quietbell campaign witness fells-spring --station tarn --reason 'walked the racks'"},
    {"campaign", "seal", "CAMPAIGN", run_seal, seal_options, "draws and seals every slot (administrator)",
     "quietbell campaign seal fells-spring"},
    {"campaign", "close", "CAMPAIGN", cli_close, close_options, "closes the analysis (reviewer)",
     "quietbell campaign close fells-spring"},
    {"campaign", "abandon", "CAMPAIGN", cli_abandon, why_options,
     "ends a campaign for good: nothing more is played (reviewer; before the sealing also the administrator)",
     "quietbell campaign abandon fells-spring --reason 'the schedule was on a public page'"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
