/* The noun `claim`: checking, sealing and sending claims, and what can be done with a receipt. */
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/claim_file.h"
#include "client/cli/internal.h"
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

/* The next sequence number: one above every number used by this author. */
static enum qb_status next_sequence(struct cli_call *c, const struct campaign *k, int64_t *out)
{
	json_t *doc, *j;
	size_t i;
	enum qb_status st = own_claims(c, k, &doc);
	*out = 0;
	json_array_foreach(json_object_get(doc, "claims"), i, j)
	{
		if (json_integer_value(json_object_get(j, "sequence")) >= *out)
			*out = json_integer_value(json_object_get(j, "sequence")) + 1;
	}
	json_decref(doc);
	return st;
}

/* The receipt must be about what was sent, and signed by the pinned service. */
static enum qb_status check_receipt(struct cli_call *c, const struct campaign *k, const uint8_t nonce[static 32],
                                    const char *entry, const json_t *answer)
{
	struct entry_promise p;
	uint8_t commitment[64];
	memcpy(p.campaign, k->id, 16);
	entry_hide(nonce, entry, strlen(entry), commitment);
	enum qb_status st = json_hex(answer, "commitment", "receipt", p.commitment, 64, &c->error);
	if (st == QB_OK)
		st = json_gps(answer, "received_gps", "receipt", &p.received_gps_ns, &c->error);
	if (st == QB_OK)
		st = json_gps(answer, "batch_due_gps", "receipt", &p.batch_due_gps_ns, &c->error);
	if (st == QB_OK)
		st = json_hex(answer, "promise", "receipt", p.signature, 64, &c->error);
	if (st == QB_OK && memcmp(commitment, p.commitment, 64) != 0)
		st = qb_fail(&c->error, QB_CRYPTO, "receipt", "tell the custodians",
		             "is about something else than what was sent");
	if (st == QB_OK)
		st = entry_promise_verify(&p, c->home.service_key, &c->error);
	return st;
}

static enum qb_status keep_receipt(struct cli_call *c, const struct campaign *k, const char *claim_id,
                                   const json_t *answer)
{
	char *path;
	enum qb_status st = home_campaign_path(&c->home, k->id, "receipts.jsonl", &path, &c->error);
	if (st != QB_OK)
		return st;
	json_t *doc = json_deep_copy(answer);
	json_object_set_new(doc, "claim_id", json_string(claim_id));
	char *line = json_text(doc);
	FILE *f = fopen(path, "a");
	if (f == NULL || fprintf(f, "%s\n", line) < 0 || fflush(f) != 0 || fsync(fileno(f)) != 0)
		st = qb_fail(&c->error, QB_IO, path, NULL, "the receipt can't be kept");
	if (f != NULL)
		fclose(f);
	qb_free(line);
	qb_free(path);
	json_decref(doc);
	return st;
}

/* Seals `content` as a record of this type and posts the hidden entry. */
static enum qb_status send_sealed(struct cli_call *c, const struct campaign *k, const struct custody_group *g,
                                  enum record_type type, const char *entry_type, int64_t sequence, const char *content,
                                  json_t *extra, const char *path, const char *label)
{
	struct record_header h = {.type = type, .epoch = (uint32_t)g->seal_epoch, .index = (uint64_t)sequence};
	struct buf record = {0};
	struct record rec;
	uint8_t nonce[32];
	char *entry = NULL;
	json_t *body = NULL, *answer = NULL;
	memcpy(h.campaign, k->id, 16);
	memcpy(h.author, c->home.key_id, 16);
	random_bytes(nonce, sizeof nonce);
	enum qb_status st = record_seal(g, &h, content, strlen(content), &record, &c->error);
	if (st == QB_OK)
		st = record_check(g, record.data, record.len, &rec, &c->error);
	if (st == QB_OK) {
		json_object_set_new(extra, "sequence", json_integer(sequence));
		json_object_set_new(extra, "record_id", json_hex_new(rec.id, 64));
		st = link_entry(&c->link, entry_type, k->id, NULL, extra, &body, &entry, &c->error);
	} else {
		json_decref(extra);
	}
	if (st == QB_OK) {
		char *text = base64_encode(record.data, record.len);
		json_object_set_new(body, "nonce", json_hex_new(nonce, 32));
		json_object_set_new(body, "record", json_string(text));
		qb_free(text);
		st = link_post(&c->link, path, body, &answer, &c->error);
	}
	if (st == QB_OK)
		st = check_receipt(c, k, nonce, entry, answer);
	if (st == QB_OK)
		st = keep_receipt(c, k, label, answer);
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, answer);
	else if (st == QB_OK)
		cli_print(c, "%s  %s  received %s\n", json_string_value(json_object_get(answer, "id")), label,
		          json_string_value(json_object_get(answer, "received_gps")));
	json_decref(body);
	json_decref(answer);
	qb_free(entry);
	buf_free(&record);
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
		st = next_sequence(c, k, &sequence);
	json_array_foreach(list, i, claim)
	{
		if (st != QB_OK)
			break;
		char *content = json_text(claim), *path = text_printf("/v1/campaigns/%s/claims", k->name);
		json_t *extra = json_object();
		json_object_set(extra, "pipeline", json_object_get(claim, "pipeline"));
		st = send_sealed(c, k, g, RECORD_CLAIM, "claim", sequence++, content, extra, path,
		                 json_string_value(json_object_get(claim, "claim_id")));
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
		st = check_receipt(c, k, nonce, entry, answer);
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
		st = next_sequence(c, k, &sequence);
	if (st == QB_OK) {
		char *path = text_printf("/v1/campaigns/%s/claims/%s/milestones", k->name, id);
		char *content = text_printf("{\"milestone\":\"%s\"}", name);
		json_t *extra = json_object();
		json_object_set_new(extra, "claim", json_string(id));
		st = send_sealed(c, k, g, RECORD_MILESTONE, "milestone", sequence, content, extra, path, name);
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
