/* The entry that a request carries: who signed it, what it is about, when. Checked once, here, for every route. */
#include <inttypes.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/text.h"
#include "server/ops/internal.h"

#define CLOCK_SLACK_NS (300 * NS_PER_S)

static bool in_list(const char *list, const char *word)
{
	size_t n = strlen(word);
	for (const char *p = list; (p = strstr(p, word)) != NULL; p += n) {
		if ((p == list || p[-1] == ' ') && (p[n] == ' ' || p[n] == '\0'))
			return true;
	}
	return false;
}

static enum qb_status check_author(struct ops *o, const struct ops_call *call, const struct campaign *c,
                                   const struct accepted *a, struct qb_error *e)
{
	const struct wire_entry *en = &a->entry;
	int64_t now = now_locked(o), off = en->when_gps_ns > now ? en->when_gps_ns - now : now - en->when_gps_ns;
	if (!in_list(call->match->route->entries, en->type->type))
		return qb_fail(e, QB_REFUSED, "entry", NULL, "an entry of type '%s' is not taken here", en->type->type);
	if (strcmp(en->by, call->who->name) != 0)
		return qb_fail(e, QB_REFUSED, "entry: by", "sign entries in your own name",
		               "the author is not the requester");
	if ((en->type->roles & ROLE_BIT(call->who->role)) == 0)
		return qb_fail(e, QB_REFUSED, "entry", NULL, "the role '%s' can't author '%s'",
		               wire_role_word(call->who->role), en->type->type);
	if (en->has_campaign && (c == NULL || memcmp(en->campaign, c->id, 16) != 0))
		return qb_fail(e, QB_REFUSED, "entry: campaign", NULL, "the entry is about another campaign");
	if (off > CLOCK_SLACK_NS)
		return qb_fail(e, QB_REFUSED, "entry: when_gps", "set the clock of your machine",
		               "the entry's time is %" PRId64 " s away from the service's", off / NS_PER_S);
	if (!entry_verify_body(call->who->signing_key, a->text, strlen(a->text), a->signature))
		return qb_fail(e, QB_CRYPTO, "entry: signature", NULL, "is not the author's over this text");
	return QB_OK;
}

enum qb_status accept_entry(struct ops *o, const struct ops_call *call, const struct campaign *c, struct accepted *out,
                            struct qb_error *e)
{
	*out = (struct accepted){0};
	enum qb_status st = json_str(call->body, "entry", "request", &out->text, e);
	if (st == QB_OK)
		st = json_hex(call->body, "signature", "request", out->signature, 64, e);
	if (st == QB_OK)
		st = wire_entry_parse(out->text, strlen(out->text), &out->entry, e);
	if (st == QB_OK)
		st = check_author(o, call, c, out, e);
	if (st != QB_OK)
		accepted_free(out);
	return st;
}

void accepted_free(struct accepted *a)
{
	wire_entry_free(&a->entry);
}

void reply_entry(struct ops_reply *r, int http_status, int64_t seq, const uint8_t leaf_hash[static 32], int64_t now_ns)
{
	r->http_status = http_status;
	r->doc = json_object();
	json_object_set_new(r->doc, "seq", json_integer(seq));
	json_object_set_new(r->doc, "leaf_hash", json_hex_new(leaf_hash, 32));
	json_object_set_new(r->doc, "received_gps", json_gps_new(now_ns));
}

enum qb_status body_base64(const json_t *body, const char *key, size_t max, struct buf *out, struct qb_error *e)
{
	const char *s;
	enum qb_status st = json_str(body, key, "request", &s, e);
	if (st != QB_OK)
		return st;
	if (strlen(s) > max * 2 || !base64_decode(s, out) || out->len > max)
		return qb_fail(e, QB_FORMAT, key, NULL, "is not base64 of at most %zu bytes", max);
	return QB_OK;
}

enum qb_status enter_one(struct ops *o, const char *use_case_name, const struct ops_call *call,
                         const struct accepted *a, struct ops_reply *reply, struct qb_error *e)
{
	struct txn t;
	int64_t seq;
	uint8_t leaf[32];
	enum qb_status st = txn_begin(&t, o, use_case_name, e);
	if (st != QB_OK)
		return st;
	st = txn_entry(&t, call->who->key_id, a->text, a->signature, &seq, leaf, e);
	if (st == QB_OK)
		st = txn_commit(&t, e);
	if (st == QB_OK)
		reply_entry(reply, 201, seq, leaf, t.now_ns);
	txn_end(&t);
	return st;
}
