/*
 * The spot opening between custodians: partial openings travel encrypted from each to each, everybody combines for
 * himself, and the asker gets a signed answer and no parameters.
 */
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "client/cli/answer_file.h"
#include "client/cli/keygen.h"
#include "client/cli/opening_join.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/custody/box.h"
#include "server/drill/report.h"
#include "server/drill/truth.h"

#define ANSWER_BYTES 512 /* padded content of every answer's box */
#define WAIT_S       600

struct spot {
	struct cli_call *c;
	struct campaign *k;
	struct custody_group g;
	int me; /* from 0 */
	const char *id;
	uint8_t commitment[64], ad[128]; /* ctx, commitment */
	int64_t from_ns, to_ns, asked_ns;
	uint8_t asker_exchange[32];
	struct sealed_items items; /* the records that the request fixes */
	struct secret *share;
	uint8_t *own;                     /* own partials */
	struct buf partials[CUSTODY_MAX]; /* from each custodian, once opened and checked */
	bool bad[CUSTODY_MAX];            /* what they gave is wrong */
};

/* The request as its asker signed it, hidden under the commitment that the service promised to enter. */
static enum qb_status check_request(struct cli_call *c, const struct campaign *k, const json_t *doc,
                                    uint8_t commitment[static 64], struct wire_entry *en,
                                    const struct view_party **asker, int64_t *asked_ns)
{
	const char *text;
	char id[33];
	uint8_t nonce[32], signature[64];
	struct entry_promise p;
	const json_t *receipt = json_object_get(doc, "receipt");
	struct qb_error *e = &c->error;
	enum qb_status st = json_str(doc, "entry", "spot request", &text, e);
	if (st == QB_OK)
		st = json_hex(doc, "nonce", "spot request", nonce, 32, e);
	if (st == QB_OK)
		st = json_hex(doc, "signature", "spot request", signature, 64, e);
	if (st == QB_OK)
		st = json_hex(receipt, "commitment", "receipt", p.commitment, 64, e);
	if (st == QB_OK)
		st = json_gps(receipt, "received_gps", "receipt", &p.received_gps_ns, e);
	if (st == QB_OK)
		st = json_gps(receipt, "batch_due_gps", "receipt", &p.batch_due_gps_ns, e);
	if (st == QB_OK)
		st = json_hex(receipt, "promise", "receipt", p.signature, 64, e);
	if (st != QB_OK)
		return st;
	memcpy(p.campaign, k->id, 16);
	entry_hide(nonce, text, strlen(text), commitment);
	hex_encode(id, commitment, 16);
	if (memcmp(commitment, p.commitment, 64) != 0 || !json_is_string(json_object_get(doc, "opening")) ||
	    strcmp(id, json_string_value(json_object_get(doc, "opening"))) != 0)
		return qb_fail(e, QB_CRYPTO, "spot request", "do not open", "is not what the commitment hides");
	*asked_ns = p.received_gps_ns;
	if ((st = entry_promise_verify(&p, c->home.service_key, e)) != QB_OK ||
	    (st = wire_entry_parse(text, strlen(text), en, e)) != QB_OK)
		return st;
	*asker = view_party_named(&c->follow.view, en->by);
	bool good = strcmp(en->type->type, "spot-request") == 0 && *asker != NULL &&
	            memcmp(en->campaign, k->id, 16) == 0 &&
	            (en->type->roles & ROLE_BIT(campaign_role(k, *asker))) != 0 &&
	            entry_verify_body((*asker)->signing_key, text, strlen(text), signature);
	if (!good) {
		wire_entry_free(en);
		return qb_fail(e, QB_CRYPTO, "spot request", "do not open",
		               "its author may not ask, or did not sign it");
	}
	if ((st = campaign_spot_allowed(k, en, e)) != QB_OK)
		wire_entry_free(en);
	return st;
}

/*
 * The newest note of each station in each slot, by the ledger and the time of the request: with an older one a service
 * could turn "drill" into "cannot say".
 */
static enum qb_status check_newest(struct spot *s, int64_t first, int64_t last)
{
	enum qb_status st = QB_OK;
	int stations = s->k->plan->network->n_stations;
	size_t cells = (size_t)(last - first + 1) * (size_t)stations;
	uint8_t(*newest)[64] = qb_alloc(cells, sizeof *newest);
	bool *any = QB_NEW_ARRAY(bool, cells);
	for (uint64_t n = 0; st == QB_OK && n < s->c->follow.n; n++) {
		struct entry leaf;
		struct wire_entry en;
		if (follow_entry(&s->c->follow, n, &leaf, &en, NULL) != QB_OK)
			continue;
		if (leaf.received_gps_ns <= s->asked_ns && en.has_campaign && memcmp(en.campaign, s->k->id, 16) == 0 &&
		    strcmp(en.type->type, "play-note") == 0) {
			int64_t slot = wire_entry_int(&en, "slot");
			int station = plan_station(s->k->plan, wire_entry_text(&en, "station"));
			if (slot >= first && slot <= last && station >= 0) {
				size_t at = (size_t)(slot - first) * (size_t)stations + (size_t)station;
				wire_entry_hex(&en, "record_id", newest[at], 64);
				any[at] = true;
			}
		}
		wire_entry_free(&en);
	}
	for (size_t i = 0; st == QB_OK && i < cells; i++) {
		bool there = !any[i];
		for (size_t j = 0; j < s->items.n && !there; j++)
			there = memcmp(s->items.item[j].rec.id, newest[i], 64) == 0;
		if (!there)
			st = qb_fail(&s->c->error, QB_CRYPTO, "spot request", "do not open; tell the other custodians",
			             "leaves out the newest note of a station");
	}
	qb_free(newest);
	qb_free(any);
	return st;
}

/* Exactly the truths of the slots that the interval touches, and play notes of those slots: nothing else is opened. */
static enum qb_status choose_items(struct spot *s, const json_t *doc)
{
	struct sealed_items all = {0};
	int64_t first, last, truths = 0;
	json_t *j;
	size_t n;
	enum qb_status st = items_fetch(s->c, s->k, &all);
	if (st == QB_OK && !slots_touched(&s->k->plan->slots, s->from_ns, s->to_ns, &first, &last))
		st = qb_fail(&s->c->error, QB_REFUSED, "spot request", NULL, "the interval lies outside the campaign");
	json_array_foreach(json_object_get(doc, "records"), n, j)
	{
		json_int_t position = json_integer_value(json_object_get(j, "position"));
		size_t i = 0;
		while (i < all.n && all.item[i].position != position)
			i++;
		if (st != QB_OK || i == all.n) {
			if (st == QB_OK)
				st = qb_fail(&s->c->error, QB_CRYPTO, "spot request", "do not open",
				             "names a record that is not there");
			break;
		}
		s->items.item = qb_realloc(s->items.item, s->items.n + 1, sizeof *s->items.item);
		struct sealed_item *x = &s->items.item[s->items.n++];
		*x = all.item[i];
		all.item[i].bytes = (struct buf){0};
		st = item_check(s->k, &s->c->follow.view, &s->g, x, &s->c->error);
		if (st == QB_OK &&
		    (!partial_purpose_opens(PARTIAL_SPOT, x->rec.header.type) || x->slot < first || x->slot > last))
			st = qb_fail(&s->c->error, QB_REFUSED, "spot request", "do not open",
			             "asks for a %s of slot %lld, which is not what a spot opening opens",
			             record_type_word(x->rec.header.type), (long long)x->slot);
		truths += st == QB_OK && x->rec.header.type == RECORD_SLOT;
	}
	if (st == QB_OK && truths != last - first + 1)
		st = qb_fail(&s->c->error, QB_CRYPTO, "spot request", "do not open",
		             "does not open each touched slot once");
	if (st == QB_OK)
		st = check_newest(s, first, last);
	items_free(&all);
	return st;
}

static enum qb_status make_own(struct spot *s)
{
	struct partial_authority auth = {.purpose = PARTIAL_SPOT};
	struct buf b = {0};
	enum qb_status st = cli_share(s->c, s->k, &s->g, &s->share);
	memcpy(auth.hash, s->commitment, 64);
	for (size_t i = 0; st == QB_OK && i < s->items.n; i++)
		st = partial_make(&s->g, &s->items.item[i].rec, (uint32_t)s->me + 1, s->share, &auth, &b, &s->c->error);
	s->own = b.data;
	return st;
}

static enum qb_status give(struct spot *s)
{
	uint8_t nonce[32], hash[64];
	struct transcript t;
	json_t *boxes = json_object(), *extra = json_object(), *more = json_object();
	size_t n = s->items.n * PARTIAL_BYTES;
	enum qb_status st = QB_OK;
	transcript_begin(&t, "quietbell/1/opening/boxes");
	for (int i = 0; st == QB_OK && i < s->k->n; i++) {
		struct buf b = {0};
		st = box_seal(s->k->custodian[i].party->exchange_key, BOX_SPOT_PARTIAL, s->ad, sizeof s->ad, s->own, n,
		              n, &b, &s->c->error);
		char *text = base64_encode(b.data, b.len);
		transcript_field(&t, b.data, b.len);
		json_object_set_new(boxes, s->k->custodian[i].party->name, json_string(text));
		qb_free(text);
		buf_free(&b);
	}
	transcript_end(&t, hash);
	random_bytes(nonce, sizeof nonce);
	json_object_set_new(extra, "opening", json_string(s->id));
	json_object_set_new(extra, "boxes_hash", json_hex_new(hash, 64));
	json_object_set_new(more, "nonce", json_hex_new(nonce, 32));
	json_object_set_new(more, "boxes", boxes);
	char *path = text_printf("/v1/campaigns/%s/openings/%s/shares", s->k->name, s->id);
	if (st == QB_OK) {
		st = cli_post_entry(s->c, path, "spot-shares", s->k->id, "the spot request was checked", extra, more,
		                    NULL);
	} else {
		json_decref(extra);
		json_decref(more);
	}
	qb_free(path);
	return st;
}

/* Every proof of one custodian, for every record that the request fixes. */
static enum qb_status check_partials(const struct spot *s, int i, const struct buf *b, struct qb_error *e)
{
	struct partial_authority auth = {.purpose = PARTIAL_SPOT};
	struct partial p;
	enum qb_status st =
	    b->len == s->items.n * PARTIAL_BYTES ? QB_OK : qb_fail(e, QB_CRYPTO, "box", NULL, "has a bad length");
	memcpy(auth.hash, s->commitment, 64);
	for (size_t r = 0; st == QB_OK && r < s->items.n; r++) {
		st = partial_check(&s->g, &s->items.item[r].rec, &auth, b->data + r * PARTIAL_BYTES, PARTIAL_BYTES, &p,
		                   e);
		if (st == QB_OK && p.i != (uint32_t)i + 1)
			st = qb_fail(e, QB_CRYPTO, "box", NULL, "holds another custodian's openings");
	}
	return st;
}

/* What a custodian gave that is wrong counts for nothing, and is said once: no single one may block an answer. */
static void take_box(struct spot *s, int i, const char *text)
{
	struct buf box = {0}, b = {0};
	struct qb_error e = {0};
	char line[600];
	enum qb_status st =
	    text != NULL && base64_decode(text, &box) ? QB_OK : qb_fail(&e, QB_FORMAT, "box", NULL, "is not base64");
	if (st == QB_OK)
		st =
		    box_open(s->c->home.key.exchange, BOX_SPOT_PARTIAL, s->ad, sizeof s->ad, box.data, box.len, &b, &e);
	if (st == QB_OK)
		st = check_partials(s, i, &b, &e);
	if (st == QB_OK) {
		s->partials[i] = b;
	} else {
		s->bad[i] = true;
		cli_note(s->c, "what %s gave is wrong and does not count: %s\n", s->k->custodian[i].party->name,
		         qb_error_line(&e, line, sizeof line));
		buf_wipe(&b);
	}
	buf_free(&box);
}

/* Opens the boxes that are there for us; *given is how many custodians have given what counts. */
static enum qb_status collect(struct spot *s, int *given)
{
	json_t *doc, *v;
	const char *name;
	char *path = text_printf("/v1/campaigns/%s/openings/%s", s->k->name, s->id);
	enum qb_status st = link_get(&s->c->link, path, &doc, &s->c->error);
	*given = 0;
	json_object_foreach(json_object_get(doc, "boxes"), name, v)
	{
		int i = custodian_index(s->k, name);
		if (st != QB_OK || i < 0)
			break;
		if (s->partials[i].len == 0 && !s->bad[i])
			take_box(s, i, json_string_value(v));
		*given += s->partials[i].len > 0;
	}
	json_decref(doc);
	qb_free(path);
	return st;
}

static enum qb_status open_item(struct spot *s, size_t i, struct buf *content, bool *opens)
{
	struct partial p[CUSTODY_MAX];
	struct partial_authority auth = {.purpose = PARTIAL_SPOT};
	size_t n = 0;
	enum qb_status st = QB_OK;
	memcpy(auth.hash, s->commitment, 64);
	for (int j = 0; st == QB_OK && j < s->k->n && n < (size_t)s->k->k; j++) {
		if (s->partials[j].len == 0)
			continue;
		st = partial_check(&s->g, &s->items.item[i].rec, &auth, s->partials[j].data + i * PARTIAL_BYTES,
		                   PARTIAL_BYTES, &p[n], &s->c->error);
		if (st == QB_OK && p[n].i != (uint32_t)j + 1)
			st = qb_fail(&s->c->error, QB_CRYPTO, s->k->custodian[j].party->name, NULL,
			             "gave another custodian's openings");
		n++;
	}
	return st == QB_OK ? partial_open_filed(&s->g, &s->items.item[i].rec, p, n, content, opens, &s->c->error) : st;
}

/*
 * What the notes of one slot say: played (or playing) anywhere, and whether every station has spoken. A station whose
 * note can't be read has not: its driver may be hostile, and must not keep the custodians from an answer.
 */
static enum qb_status read_notes(struct spot *s, int64_t slot, bool *played, bool *complete)
{
	int stations = 0;
	enum qb_status st = QB_OK;
	*played = false;
	for (size_t i = 0; st == QB_OK && i < s->items.n; i++) {
		struct buf b = {0};
		struct play_note note;
		if (s->items.item[i].slot != slot || s->items.item[i].rec.header.type != RECORD_PLAY_NOTE)
			continue;
		bool opens;
		st = open_item(s, i, &b, &opens);
		if (st == QB_OK && opens && play_note_decode(b.data, b.len, &note, NULL) == QB_OK) {
			stations++;
			*played = *played || note.played_to_ns > note.played_from_ns;
		}
		buf_wipe(&b);
	}
	*complete = stations == s->k->plan->network->n_stations;
	return st;
}

static enum qb_status find_answer(struct spot *s, const char **answer)
{
	enum qb_status st = QB_OK;
	struct drill_truth *truth = QB_NEW(struct drill_truth);
	*answer = "not a drill";
	for (size_t i = 0; st == QB_OK && i < s->items.n; i++) {
		struct buf b = {0};
		int64_t from, to;
		bool played, complete, opens;
		if (s->items.item[i].rec.header.type != RECORD_SLOT)
			continue;
		st = open_item(s, i, &b, &opens);
		if (st == QB_OK)
			st = truth_decode(b.data, b.len, truth, &s->c->error);
		buf_wipe(&b);
		if (st != QB_OK)
			break;
		truth_drive_interval(truth, &from, &to);
		/* the whole drive counts, not only its arrival */
		if (!truth->live || to < s->from_ns || from > s->to_ns)
			continue;
		if ((st = read_notes(s, s->items.item[i].slot, &played, &complete)) != QB_OK)
			break;
		if (played)
			*answer = "drill";
		else if (strcmp(*answer, "drill") != 0)
			*answer = complete && strcmp(*answer, "cannot say") != 0 ? "planned, not played" : "cannot say";
	}
	wipe(truth, sizeof *truth);
	qb_free(truth);
	return st;
}

/* Signs what was found, boxes it to the asker and posts it, as an answer or as a retraction. */
static enum qb_status say(struct spot *s, enum saying kind, const char *answer, const char *why)
{
	struct answer_file *a = QB_NEW(struct answer_file);
	uint8_t hash[64], signature[64], nonce[32], box_hash[64];
	char hex[129];
	struct buf box = {0};
	answer_frame(a, s->k, &s->g);
	a->kind = kind;
	a->from_ns = s->from_ns;
	a->to_ns = s->to_ns;
	memcpy(a->authority, s->commitment, 64);
	(void)snprintf(a->answer, sizeof a->answer, "%s", answer);
	answer_statement(a, hash);
	sign_bytes(s->c->home.key.seed, hash, sizeof hash, signature);
	hex_encode(hex, signature, 64);
	char *content = text_printf("{\"answer\":\"%s\",\"signature\":\"%s\"}", answer, hex);
	enum qb_status st = box_seal(s->asker_exchange, BOX_ANSWER, s->ad, sizeof s->ad, content, strlen(content),
	                             ANSWER_BYTES, &box, &s->c->error);
	if (st == QB_OK) {
		char *text = base64_encode(box.data, box.len);
		char *path = text_printf("/v1/campaigns/%s/openings/%s/shares", s->k->name, s->id);
		json_t *extra = json_object(), *more = json_object();
		blake2b_512(box_hash, box.data, box.len);
		random_bytes(nonce, sizeof nonce);
		json_object_set_new(extra, "opening", json_string(s->id));
		json_object_set_new(extra, "box_hash", json_hex_new(box_hash, 64));
		json_object_set_new(more, "nonce", json_hex_new(nonce, 32));
		json_object_set_new(more, "box", json_string(text));
		st = cli_post_entry(s->c, path, kind == SAY_ANSWER ? "spot-answer" : "spot-retraction", s->k->id, why,
		                    extra, more, NULL);
		qb_free(text);
		qb_free(path);
	}
	wipe(content, strlen(content));
	qb_free(content);
	buf_free(&box);
	wipe(a, sizeof *a);
	qb_free(a);
	return st;
}

static enum qb_status prepare(struct spot *s, const json_t *doc)
{
	struct wire_entry en;
	const struct view_party *asker;
	char what[700], from[40], to[40];
	enum qb_status st = campaign_certified_group(s->k, &s->g, &s->c->error);
	if (st != QB_OK || (st = check_request(s->c, s->k, doc, s->commitment, &en, &asker, &s->asked_ns)) != QB_OK)
		return st;
	s->id = json_string_value(json_object_get(doc, "opening"));
	s->from_ns = wire_entry_gps(&en, "from_gps");
	s->to_ns = wire_entry_gps(&en, "to_gps");
	memcpy(s->asker_exchange, asker->exchange_key, 32);
	memcpy(s->ad, s->k->context.ctx, 64);
	memcpy(s->ad + 64, s->commitment, 64);
	(void)snprintf(what, sizeof what,
	               "Spot opening for %s: is anything between %s and %s a drill? Reason: %.300s\n", asker->name,
	               clock_utc_text(s->from_ns, from, sizeof from), clock_utc_text(s->to_ns, to, sizeof to), en.why);
	wire_entry_free(&en);
	if ((st = choose_items(s, doc)) == QB_OK)
		st = join_confirm(s->c, what);
	return st;
}

enum qb_status join_spot(struct cli_call *c, struct campaign *k, const json_t *doc, enum saying kind)
{
	struct spot *s = QB_NEW(struct spot);
	struct timespec pause = {0, 200000000};
	const char *answer;
	int given = 0;
	s->c = c;
	s->k = k;
	s->me = custodian_index(k, c->home.name);
	enum qb_status st = prepare(s, doc);
	bool gave = json_object_get(json_object_get(doc, "boxes"), c->home.name) != NULL;
	if (st == QB_OK && kind == SAY_RETRACTION && !gave)
		st = qb_fail(&c->error, QB_CONFLICT, "retraction", "let those who answered sign it",
		             "%s did not open this request", c->home.name);
	if (st == QB_OK && !gave && (st = make_own(s)) == QB_OK)
		st = give(s);
	for (int i = 0; st == QB_OK && given < k->k && i < WAIT_S * 5; i++) {
		if ((st = collect(s, &given)) == QB_OK && given < k->k)
			nanosleep(&pause, NULL);
	}
	if (st == QB_OK && given < k->k)
		st = qb_fail(&c->error, QB_NO, "spot opening", "join again when another custodian has",
		             "only %d of %d custodians gave", given, k->k);
	if (st == QB_OK)
		st = find_answer(s, &answer);
	if (st == QB_OK)
		st = say(s, kind, answer, kind == SAY_ANSWER ? "the records were opened" : cli_option(c, "reason"));
	if (st == QB_OK)
		cli_print(c, kind == SAY_ANSWER ? "answered: %s\n" : "signed the retraction of: %s\n", answer);
	for (int i = 0; i < CUSTODY_MAX; i++)
		buf_wipe(&s->partials[i]);
	secret_free(&s->share);
	items_free(&s->items);
	qb_free(s->own);
	qb_free(s);
	return st;
}

/* One custodian's boxed words: opened, checked, and put in their place. */
static enum qb_status take_saying(struct cli_call *c, const char *box, const uint8_t ad[static 128], int i,
                                  struct answer_file *a)
{
	struct buf b = {0}, content = {0};
	json_t *said = NULL;
	const char *word;
	uint8_t hash[64];
	enum qb_status st = box != NULL && base64_decode(box, &b)
	                        ? QB_OK
	                        : qb_fail(&c->error, QB_FORMAT, "answer", NULL, "is not base64");
	if (st == QB_OK)
		st = box_open(c->home.key.exchange, BOX_ANSWER, ad, 128, b.data, b.len, &content, &c->error);
	if (st == QB_OK)
		st = json_read((const char *)content.data, content.len, "answer", &said, &c->error);
	if (st == QB_OK)
		st = json_str(said, "answer", "answer", &word, &c->error);
	if (st == QB_OK)
		st = json_hex(said, "signature", "answer", a->signature[i], SIGN_BYTES, &c->error);
	if (st == QB_OK && a->answer[0] != '\0' && strcmp(a->answer, word) != 0)
		st = qb_fail(&c->error, QB_CRYPTO, "answers", "ask the custodians by telephone",
		             "the custodians contradict each other");
	if (st == QB_OK) {
		(void)snprintf(a->answer, sizeof a->answer, "%.60s", word);
		a->signed_by[i] = true;
		answer_statement(a, hash);
		if (!sign_verify(a->key[i], hash, sizeof hash, a->signature[i]))
			st = qb_fail(&c->error, QB_CRYPTO, a->name[i], "ask the custodians by telephone",
			             "the answer's signature is false");
	}
	json_decref(said);
	buf_free(&b);
	buf_wipe(&content);
	return st;
}

enum qb_status spot_result(struct cli_call *c, struct campaign *k, const json_t *doc, enum saying kind,
                           struct answer_file *a)
{
	struct custody_group *g = QB_NEW(struct custody_group);
	struct wire_entry en = {0};
	const struct view_party *asker;
	uint8_t commitment[64], ad[128];
	const char *name;
	json_t *v;
	int64_t asked_ns;
	int good = 0;
	enum qb_status st = campaign_certified_group(k, g, &c->error);
	if (st == QB_OK)
		st = check_request(c, k, doc, commitment, &en, &asker, &asked_ns);
	if (st == QB_OK) {
		answer_frame(a, k, g);
		a->kind = kind;
		a->from_ns = wire_entry_gps(&en, "from_gps");
		a->to_ns = wire_entry_gps(&en, "to_gps");
		wire_entry_free(&en);
		memcpy(a->authority, commitment, 64);
		memcpy(ad, k->context.ctx, 64);
		memcpy(ad + 64, commitment, 64);
	}
	json_object_foreach(json_object_get(doc, kind == SAY_ANSWER ? "answers" : "retractions"), name, v)
	{
		int i = custodian_index(k, name);
		if (st != QB_OK || i < 0)
			break;
		st = take_saying(c, json_string_value(v), ad, i, a);
		good += st == QB_OK;
	}
	if (st == QB_OK && good < k->k)
		st = qb_fail(&c->error, QB_NO, "spot opening", "ask again in a moment",
		             "waiting: %d of %d custodians have %s", good, k->k,
		             kind == SAY_ANSWER ? "answered" : "signed the retraction");
	qb_free(g);
	return st;
}
