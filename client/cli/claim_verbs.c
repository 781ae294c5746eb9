/* The noun `claim`: checking, sealing and sending claims, and what can be done with a receipt. */
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/claim_file.h"
#include "client/cli/submit.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

static enum qb_status run_check(struct cli_call *c)
{
	json_t *list;
	enum qb_status st = claim_file_read(cli_arg(c, 0), &list, &c->error);
	if (st == QB_OK)
		cli_print(c, "%zu claims, all well-formed\n", json_array_size(list));
	json_decref(list);
	return st;
}

static enum qb_status own_claims(struct cli_call *c, const struct campaign *k, json_t **out)
{
	char *path = text_printf("/v1/campaigns/%s/claims", k->name);
	enum qb_status st = link_get(&c->link, path, out, &c->error);
	qb_free(path);
	return st;
}

static enum qb_status run_send(struct cli_call *c)
{
	json_t *list = NULL, *claim;
	size_t i;
	struct campaign *k;
	int64_t sequence = 0;
	struct custody_group *g = QB_NEW(struct custody_group);
	enum qb_status st = claim_file_read(cli_arg(c, 1), &list, &c->error);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		st = campaign_certified_group(k, g, &c->error);
	if (st == QB_OK)
		st = submit_next_sequence(c, k, &sequence);
	json_array_foreach(list, i, claim)
	{
		if (st != QB_OK)
			break;
		char *content = json_text(claim), *path = text_printf("/v1/campaigns/%s/claims", k->name);
		json_t *extra = json_object();
		json_object_set(extra, "pipeline", json_object_get(claim, "pipeline"));
		st = submit_sealed(c, k, g,
		                   &(struct submission){.record = RECORD_CLAIM,
		                                        .type = "claim",
		                                        .path = path,
		                                        .label = json_string_value(json_object_get(claim, "claim_id")),
		                                        .content = content,
		                                        .sequence = sequence++},
		                   extra);
		qb_free(content);
		qb_free(path);
	}
	/* Analysts hold the service to one history, too. */
	if (st == QB_OK)
		st = cli_follow(c);
	if (st == QB_OK)
		st = follow_cosign(&c->follow, &c->link, &c->error);
	json_decref(list);
	qb_free(g);
	return st;
}

static enum qb_status run_list(struct cli_call *c)
{
	struct campaign *k;
	json_t *doc = NULL, *j;
	size_t i;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		st = own_claims(c, k, &doc);
	if (st == QB_OK && cli_wants_json(c)) {
		cli_json(c, json_object_get(doc, "claims"));
	} else if (st == QB_OK) {
		json_array_foreach(json_object_get(doc, "claims"), i, j)
		    cli_print(c, "%s  received %s  %s%s\n", json_string_value(json_object_get(j, "id")),
		              json_string_value(json_object_get(j, "received_gps")),
		              json_is_true(json_object_get(j, "entered")) ? "in the ledger" : "promised",
		              json_is_true(json_object_get(j, "withdrawn")) ? ", withdrawn" : "");
	}
	json_decref(doc);
	return st;
}

static enum qb_status run_withdraw(struct cli_call *c)
{
	struct campaign *k;
	uint8_t nonce[32];
	char *entry = NULL;
	json_t *extra = json_object(), *body = NULL, *answer = NULL;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK) {
		json_decref(extra);
		return st;
	}
	random_bytes(nonce, sizeof nonce);
	json_object_set_new(extra, "claim", json_string(cli_arg(c, 1)));
	st = link_entry(&c->link, "claim-withdrawal", k->id, cli_option(c, "reason"), extra, &body, &entry, &c->error);
	if (st == QB_OK) {
		char *path = text_printf("/v1/campaigns/%s/claims/%s/withdraw", k->name, cli_arg(c, 1));
		json_object_set_new(body, "nonce", json_hex_new(nonce, 32));
		st = link_post(&c->link, path, body, &answer, &c->error);
		qb_free(path);
	}
	if (st == QB_OK)
		st = submit_check_receipt(c, k, nonce, entry, answer);
	if (st == QB_OK)
		cli_print(c, "%s is withdrawn; that it was made remains\n", cli_arg(c, 1));
	json_decref(body);
	json_decref(answer);
	qb_free(entry);
	return st;
}

static enum qb_status run_milestone(struct cli_call *c)
{
	struct campaign *k;
	int64_t sequence;
	struct custody_group *g = QB_NEW(struct custody_group);
	const char *id = cli_arg(c, 1), *name = cli_arg(c, 2);
	enum qb_status st = QB_OK;
	if (!text_is_name(name))
		st = qb_fail(&c->error, QB_USAGE, "NAME", "use a-z, 0-9 and -", "'%.40s' is not a name", name);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		st = campaign_certified_group(k, g, &c->error);
	if (st == QB_OK)
		st = submit_next_sequence(c, k, &sequence);
	if (st == QB_OK) {
		char *path = text_printf("/v1/campaigns/%s/claims/%s/milestones", k->name, id);
		char *content = text_printf("{\"milestone\":\"%s\"}", name);
		json_t *extra = json_object();
		json_object_set_new(extra, "claim", json_string(id));
		st = submit_sealed(c, k, g,
		                   &(struct submission){.record = RECORD_MILESTONE,
		                                        .type = "milestone",
		                                        .path = path,
		                                        .label = name,
		                                        .content = content,
		                                        .sequence = sequence},
		                   extra);
		qb_free(content);
		qb_free(path);
	}
	qb_free(g);
	return st;
}

static const struct cli_option reason_options[] = {{"reason", "TEXT", false, "why, for the ledger"},
                                                   {NULL, NULL, false, NULL}};

const struct cli_verb cli_claim_verbs[] = {
    {"claim", "check", "FILE", run_check, NULL, "checks a file of claims", "quietbell claim check claims.jsonl"},
    {"claim", "send", "CAMPAIGN FILE", run_send, NULL, "seals and sends claims (analyst)",
     "quietbell claim send fells-spring claims.jsonl"},
    {"claim", "list", "CAMPAIGN", run_list, NULL, "lists one's own claims by receipt",
     "quietbell claim list fells-spring"},
    {"claim", "withdraw", "CAMPAIGN ID", run_withdraw, reason_options, "withdraws a claim",
     "quietbell claim withdraw fells-spring 0123456789abcdef0123456789abcdef"},
    {"claim", "milestone", "CAMPAIGN ID NAME", run_milestone, NULL, "files a step of the response to a claim",
     "quietbell claim milestone fells-spring 0123456789abcdef0123456789abcdef vetted"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
