/* Sealing to the group key, posting, and holding the service to its signed promise: the client's side of a submission.
 */
#include "client/cli/submit.h"

#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

enum qb_status submit_next_sequence(struct cli_call *c, const struct campaign *k, int64_t *out)
{
	json_t *doc = NULL;
	char *path = text_printf("/v1/campaigns/%s/receipts", k->name);
	enum qb_status st = link_get(&c->link, path, &doc, &c->error);
	*out = 0;
	if (st == QB_OK)
		st = json_int(doc, "next_sequence", "receipts", 0, INT64_C(1) << 53, out, &c->error);
	json_decref(doc);
	qb_free(path);
	return st;
}

enum qb_status submit_check_receipt(struct cli_call *c, const struct campaign *k, const uint8_t nonce[static 32],
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

enum qb_status submit_sealed(struct cli_call *c, const struct campaign *k, const struct custody_group *g,
                             const struct submission *s, json_t *extra)
{
	struct record_header h = {.type = s->record,
	                          .epoch = (uint32_t)g->seal_epoch,
	                          .index = (uint64_t)s->sequence,
	                          .start_gps_ns = s->start_gps_ns,
	                          .duration_ns = s->duration_ns};
	struct buf record = {0};
	struct record rec;
	uint8_t nonce[32];
	char *entry = NULL;
	json_t *body = NULL, *answer = NULL;
	memcpy(h.campaign, k->id, 16);
	memcpy(h.author, c->home.key_id, 16);
	random_bytes(nonce, sizeof nonce);
	enum qb_status st = record_seal(g, &h, s->content, strlen(s->content), &record, &c->error);
	if (st == QB_OK)
		st = record_check(g, record.data, record.len, &rec, &c->error);
	if (st == QB_OK) {
		json_object_set_new(extra, "sequence", json_integer(s->sequence));
		json_object_set_new(extra, "record_id", json_hex_new(rec.id, 64));
		st = link_entry(&c->link, s->type, k->id, NULL, extra, &body, &entry, &c->error);
	} else {
		json_decref(extra);
	}
	if (st == QB_OK) {
		char *text = base64_encode(record.data, record.len);
		json_object_set_new(body, "nonce", json_hex_new(nonce, 32));
		json_object_set_new(body, "record", json_string(text));
		qb_free(text);
		st = link_post(&c->link, s->path, body, &answer, &c->error);
	}
	if (st == QB_OK)
		st = submit_check_receipt(c, k, nonce, entry, answer);
	if (st == QB_OK)
		st = keep_receipt(c, k, s->label, answer);
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, answer);
	else if (st == QB_OK)
		cli_print(c, "%s  %s  received %s\n", json_string_value(json_object_get(answer, "id")), s->label,
		          json_string_value(json_object_get(answer, "received_gps")));
	json_decref(body);
	json_decref(answer);
	qb_free(entry);
	buf_free(&record);
	return st;
}
