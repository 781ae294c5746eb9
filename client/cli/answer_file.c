/* Answers and retractions as files: making, reading, checking. */
#include "client/cli/answer_file.h"

#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/custody/words.h"

static const char *const kinds[] = {[SAY_ANSWER] = "answer", [SAY_RETRACTION] = "retraction"};
static const char *const answers[] = {"drill", "not a drill", "planned, not played", "cannot say"};

void answer_statement(const struct answer_file *a, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, a->kind == SAY_ANSWER ? "quietbell/1/opening/answer" : "quietbell/1/opening/retraction");
	transcript_field(&t, a->th, sizeof a->th);
	transcript_field(&t, a->authority, sizeof a->authority);
	transcript_u64(&t, (uint64_t)a->from_ns);
	transcript_u64(&t, (uint64_t)a->to_ns);
	transcript_text(&t, a->answer);
	transcript_end(&t, out);
}

void answer_fingerprint(const struct answer_file *a, uint8_t out[static 16])
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/campaign/fingerprint");
	transcript_field(&t, a->id, sizeof a->id);
	transcript_field(&t, a->th, sizeof a->th);
	transcript_u64(&t, (uint64_t)a->n);
	transcript_u64(&t, (uint64_t)a->k);
	for (int i = 0; i < a->n; i++)
		transcript_field(&t, a->key[i], SIGN_PUBLIC);
	transcript_end(&t, h);
	memcpy(out, h, 16);
}

void answer_frame(struct answer_file *a, const struct campaign *k, const struct custody_group *g)
{
	*a = (struct answer_file){.n = k->n, .k = k->k};
	(void)snprintf(a->campaign, sizeof a->campaign, "%s", k->name);
	memcpy(a->id, k->id, 16);
	memcpy(a->th, g->th, 64);
	for (int i = 0; i < k->n; i++) {
		(void)snprintf(a->name[i], sizeof a->name[i], "%s", k->custodian[i].party->name);
		memcpy(a->key[i], k->custodian[i].party->signing_key, SIGN_PUBLIC);
	}
}

json_t *answer_json(const struct answer_file *a)
{
	json_t *doc = json_object(), *people = json_array();
	json_object_set_new(doc, "kind", json_string(kinds[a->kind]));
	json_object_set_new(doc, "campaign", json_string(a->campaign));
	json_object_set_new(doc, "campaign_id", json_hex_new(a->id, 16));
	json_object_set_new(doc, "from_gps", json_gps_new(a->from_ns));
	json_object_set_new(doc, "to_gps", json_gps_new(a->to_ns));
	json_object_set_new(doc, "answer", json_string(a->answer));
	json_object_set_new(doc, "authority", json_hex_new(a->authority, 64));
	json_object_set_new(doc, "transcript", json_hex_new(a->th, 64));
	json_object_set_new(doc, "needed", json_integer(a->k));
	for (int i = 0; i < a->n; i++) {
		json_t *p = json_object();
		json_object_set_new(p, "name", json_string(a->name[i]));
		json_object_set_new(p, "signing_key", json_hex_new(a->key[i], SIGN_PUBLIC));
		json_object_set_new(p, "signature",
		                    a->signed_by[i] ? json_hex_new(a->signature[i], SIGN_BYTES) : json_null());
		json_array_append_new(people, p);
	}
	json_object_set_new(doc, "custodians", people);
	return doc;
}

static enum qb_status read_word(const json_t *doc, const char *key, const char *const *words, int n, int *out,
                                struct qb_error *e)
{
	const char *s;
	enum qb_status st = json_str(doc, key, "answer file", &s, e);
	for (*out = 0; st == QB_OK && *out < n; (*out)++) {
		if (strcmp(words[*out], s) == 0)
			return QB_OK;
	}
	return st != QB_OK ? st : qb_fail(e, QB_FORMAT, "answer file", NULL, "'%s' has an unknown value", key);
}

static enum qb_status read_custodian(const json_t *p, struct answer_file *a, int i, struct qb_error *e)
{
	static const char *const keys[] = {"name", "signing_key", "signature", NULL};
	const char *name;
	enum qb_status st = json_only(p, keys, "answer file: custodians", e);
	if (st == QB_OK)
		st = json_str(p, "name", "answer file: custodians", &name, e);
	if (st == QB_OK && !text_is_name(name))
		st = qb_fail(e, QB_FORMAT, "answer file: custodians", NULL, "a name is not one");
	if (st == QB_OK)
		(void)snprintf(a->name[i], sizeof a->name[i], "%s", name);
	if (st == QB_OK)
		st = json_hex(p, "signing_key", "answer file: custodians", a->key[i], SIGN_PUBLIC, e);
	a->signed_by[i] = !json_is_null(json_object_get(p, "signature"));
	if (st == QB_OK && a->signed_by[i])
		st = json_hex(p, "signature", "answer file: custodians", a->signature[i], SIGN_BYTES, e);
	return st;
}

enum qb_status answer_read(const json_t *doc, struct answer_file *out, struct qb_error *e)
{
	static const char *const keys[] = {"kind",      "campaign",   "campaign_id", "from_gps",   "to_gps", "answer",
	                                   "authority", "transcript", "needed",      "custodians", NULL};
	const json_t *people = json_object_get(doc, "custodians");
	const char *name;
	int kind, word;
	int64_t k;
	*out = (struct answer_file){0};
	enum qb_status st = json_only(doc, keys, "answer file", e);
	if (st == QB_OK)
		st = read_word(doc, "kind", kinds, 2, &kind, e);
	if (st == QB_OK)
		st = read_word(doc, "answer", answers, 4, &word, e);
	if (st == QB_OK)
		st = json_str(doc, "campaign", "answer file", &name, e);
	if (st == QB_OK && !text_is_name(name))
		st = qb_fail(e, QB_FORMAT, "answer file: campaign", NULL, "is not a name");
	if (st == QB_OK)
		st = json_hex(doc, "campaign_id", "answer file", out->id, 16, e);
	if (st == QB_OK)
		st = json_gps(doc, "from_gps", "answer file", &out->from_ns, e);
	if (st == QB_OK)
		st = json_gps(doc, "to_gps", "answer file", &out->to_ns, e);
	if (st == QB_OK)
		st = json_hex(doc, "authority", "answer file", out->authority, 64, e);
	if (st == QB_OK)
		st = json_hex(doc, "transcript", "answer file", out->th, 64, e);
	if (st == QB_OK)
		st = json_int(doc, "needed", "answer file", 2, CUSTODY_MAX, &k, e);
	if (st == QB_OK && (!json_is_array(people) || json_array_size(people) > CUSTODY_MAX))
		st = qb_fail(e, QB_FORMAT, "answer file: custodians", NULL, "is no list of at most %d", CUSTODY_MAX);
	for (size_t i = 0; st == QB_OK && i < json_array_size(people); i++)
		st = read_custodian(json_array_get(people, i), out, (int)i, e);
	if (st == QB_OK) {
		out->kind = (enum saying)kind;
		out->k = (int)k;
		out->n = (int)json_array_size(people);
		(void)snprintf(out->campaign, sizeof out->campaign, "%s", name);
		(void)snprintf(out->answer, sizeof out->answer, "%s", answers[word]);
	}
	return st;
}

enum qb_status answer_verify(const struct answer_file *a, struct qb_error *e)
{
	uint8_t statement[64];
	int good = 0;
	answer_statement(a, statement);
	for (int i = 0; i < a->n; i++) {
		if (!a->signed_by[i])
			continue;
		if (!sign_verify(a->key[i], statement, sizeof statement, a->signature[i]))
			return qb_fail(e, QB_NO, "answer file", "do not act on it; ask the custodians by telephone",
			               "the signature of %s is false", a->name[i]);
		for (int j = 0; j < i; j++) {
			if (memcmp(a->key[i], a->key[j], SIGN_PUBLIC) == 0)
				return qb_fail(e, QB_NO, "answer file", "do not act on it",
				               "two custodians have the same key");
		}
		good++;
	}
	if (a->k > a->n || good < a->k)
		return qb_fail(e, QB_NO, "answer file", "do not act on it; ask for the rest",
		               "%d custodians signed, %d are needed", good, a->k);
	return QB_OK;
}

const char *answer_meaning(const struct answer_file *a, char *out, size_t size)
{
	char from[40], to[40];
	bool drill = strcmp(a->answer, "drill") == 0;
	const char *says = a->kind == SAY_ANSWER ? a->answer
	                   : drill               ? "retract: it was a blind test signal; withdraw every alert about it"
	                           : "retract: the earlier answer no longer stands; rely on nothing that was said";
	(void)snprintf(
	    out, size, "What arrived between %s and %s: %s%s%s%s", clock_utc_text(a->from_ns, from, sizeof from),
	    clock_utc_text(a->to_ns, to, sizeof to), says, a->kind == SAY_RETRACTION && !drill ? " (it was: " : "",
	    a->kind == SAY_RETRACTION && !drill ? a->answer : "", a->kind == SAY_RETRACTION && !drill ? ")" : "");
	return out;
}

static bool same_fingerprint(const uint8_t own[static 16], const char *typed)
{
	uint8_t words[16];
	struct qb_error ignored = {0};
	char hex[33], got[80];
	size_t n = 0;
	hex_encode(hex, own, 16);
	for (const char *p = typed; *p != '\0' && n + 1 < sizeof got; p++) {
		if (*p != '-' && *p != ' ')
			got[n++] = *p;
	}
	got[n] = '\0';
	return strcmp(got, hex) == 0 ||
	       (words_parse(typed, strlen(typed), words, 16, &ignored) == QB_OK && memcmp(words, own, 16) == 0);
}

enum qb_status cli_answer_check(struct cli_call *c)
{
	struct answer_file *a = QB_NEW(struct answer_file);
	struct buf b = {0}, spoken = {0};
	json_t *doc = NULL;
	uint8_t own[16];
	char hex[33], line[400];
	const char *typed = cli_option(c, "fingerprint");
	enum qb_status st = file_read(cli_arg(c, 0), 1 << 16, &b, &c->error);
	if (st == QB_OK)
		st = json_read((const char *)b.data, b.len, cli_arg(c, 0), &doc, &c->error);
	if (st == QB_OK)
		st = answer_read(doc, a, &c->error);
	if (st == QB_OK)
		st = answer_verify(a, &c->error);
	if (st == QB_OK) {
		answer_fingerprint(a, own);
		hex_encode(hex, own, 16);
		words_put(own, 16, &spoken);
		if (typed == NULL)
			st = qb_fail(&c->error, QB_NO, "--fingerprint",
			             "compare it with the one that the custodians published, and give that one",
			             "the file's custodians have the fingerprint %s (%s)", hex,
			             (const char *)spoken.data);
		else if (!same_fingerprint(own, typed))
			st = qb_fail(&c->error, QB_NO, "--fingerprint",
			             "do not act on it; ask the custodians by telephone",
			             "these are other custodians: their fingerprint is %s", hex);
	}
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, doc);
	else if (st == QB_OK)
		cli_print(c, "%s\nCampaign %s, signed by %d of its custodians.\n", answer_meaning(a, line, sizeof line),
		          a->campaign, a->k);
	json_decref(doc);
	buf_free(&b);
	buf_free(&spoken);
	qb_free(a);
	return st;
}
