/*
 * Canaries: a random text sealed to the group key, which every custodian must be able to open. One after each key
 * generation and resharing, one on demand, and one whenever the plan's interval has passed; the service combines the
 * openings and compares, so that "the shares work" is never a mere statement.
 */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/keyholders.h"

#define CANARY_BYTES 32

static void canary_key(const struct campaign *c, const char *type, char out[static 56])
{
	char hex[33];
	hex_encode(hex, c->id, 16);
	(void)snprintf(out, 56, "%s-%s", type, hex);
}

/* The content stays unknown to the store: only its hash is kept, to be compared after the combination. */
enum qb_status canary_seal(struct txn *t, struct campaign *c, const struct custody_group *g, const char *type,
                           uint64_t attempt, const char *why, struct qb_error *e)
{
	uint8_t content[CANARY_BYTES], hash[64];
	char key[56], hex[129];
	struct buf record = {0};
	struct record_header h = {
	    .type = RECORD_CANARY, .epoch = (uint32_t)g->seal_epoch, .index = campaign_next_canary(c)};
	memcpy(h.campaign, c->id, 16);
	memcpy(h.author, t->o->service_id, 16);
	random_bytes(content, sizeof content);
	blake2b_512(hash, content, sizeof content);
	hex_encode(hex, hash, 64);
	canary_key(c, type, key);
	enum qb_status st = record_seal(g, &h, content, sizeof content, &record, e);
	wipe(content, sizeof content);
	if (st == QB_OK)
		st = store_setting_put(t->o->store, key, hex, e);
	if (st == QB_OK) {
		json_t *extra = json_object();
		char *text = base64_encode(record.data, record.len);
		json_object_set_new(extra, "attempt", json_integer((json_int_t)attempt));
		json_object_set_new(extra, "record", json_string(text));
		qb_free(text);
		st = txn_service_entry(t, type, c, why, extra, NULL, NULL, e);
	}
	buf_free(&record);
	return st;
}

enum qb_status canary_check_request(struct ops *o, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	(void)o;
	(void)a;
	if (c->state < C_REHEARSED || c->state > C_CLOSED || c->state == C_SEALING)
		return qb_fail(e, QB_CONFLICT, "rehearsal", NULL, "the campaign is %s", campaign_word(c));
	for (int i = 0; i < c->n; i++) {
		if (c->custodian[i].rehearsal_seq != NO_SEQ)
			return QB_OK;
	}
	return qb_fail(e, QB_CONFLICT, "rehearsal", "open the canary that is there",
	               "nobody has opened the newest canary yet");
}

enum qb_status canary_after_request(struct txn *t, struct campaign *c, const struct accepted *a, struct qb_error *e)
{
	(void)a;
	return canary_seal(t, c, &c->group, "canary", c->attempt, "a custodian asked for it", e);
}

bool canary_due(const struct campaign *c, int64_t now_ns)
{
	return c->state == C_SEALED && now_ns - c->canary_ns >= c->plan->rehearsals_ns;
}

enum qb_status canary_issue(struct ops *o, struct campaign *c, struct qb_error *e)
{
	struct txn t;
	enum qb_status st = txn_begin(&t, o, "canary", e);
	if (st == QB_OK)
		st = canary_seal(&t, c, &c->group, "canary", c->attempt, "the plan's interval has passed", e);
	if (st == QB_OK)
		st = txn_commit(&t, e);
	txn_end(&t);
	return st;
}

/* ---- rehearsals ---- */

/* What a rehearsal is about: the set in office, or the one of a resharing. */
struct stage {
	const struct custodian *list;
	int n;
	const struct custody_group *group;
	const char *canary_type;
	uint64_t attempt;
	const uint8_t *leaf, *canary;
	size_t canary_n;
	bool open;
	struct record rec;
	struct partial_authority auth;
	struct partial partial[CUSTODY_MAX];
	int n_partials;
};

static struct stage stage_of(const struct campaign *c, bool reshare)
{
	const struct reshare_view *r = &c->reshare;
	struct stage s = {.auth = {.purpose = PARTIAL_REHEARSAL}};
	if (reshare) {
		s.list = r->member;
		s.n = r->n;
		s.group = &r->group;
		s.canary_type = "reshare-canary";
		s.attempt = c->reshare_attempt;
		s.leaf = r->canary_leaf;
		s.canary = r->canary.data;
		s.canary_n = r->canary.len;
		s.open = r->under_way && r->canary_seq != NO_SEQ;
	} else {
		s.list = c->custodian;
		s.n = c->n;
		s.group = &c->group;
		s.canary_type = "canary";
		s.attempt = c->attempt;
		s.leaf = c->canary_leaf;
		s.canary = c->canary;
		s.canary_n = c->canary_n;
		s.open = c->state >= C_CERTIFIED && c->state <= C_CLOSED;
	}
	memcpy(s.auth.hash, s.leaf, 32);
	return s;
}

static enum qb_status load_one(void *state, uint64_t seq, const uint8_t *frame, size_t n,
                               const uint8_t leaf_hash[static 32], struct qb_error *e)
{
	struct stage *s = state;
	struct entry leaf;
	struct wire_entry en;
	struct buf share = {0};
	(void)seq;
	(void)leaf_hash;
	enum qb_status st = entry_decode(frame, n, &leaf, e);
	if (st != QB_OK || (st = wire_entry_parse((const char *)leaf.body, leaf.body_len, &en, e)) != QB_OK)
		return st;
	if (base64_decode(wire_entry_text(&en, "share"), &share))
		st = partial_check(s->group, &s->rec, &s->auth, share.data, share.len, &s->partial[s->n_partials++], e);
	buf_free(&share);
	wire_entry_free(&en);
	return st;
}

/* The last opening is in: all together must give the text that was sealed. The others' are read from the ledger. */
static enum qb_status combine(struct ops *o, const struct campaign *c, struct stage *s, int latest, struct qb_error *e)
{
	struct buf content = {0}, want = {0};
	uint8_t hash[64], expected[64];
	char key[56];
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < s->n; i++) {
		if (i != latest)
			st = store_leaves(o->store, (uint64_t)s->list[i].rehearsal_seq, 1, load_one, s, e);
	}
	canary_key(c, s->canary_type, key);
	if (st == QB_OK)
		st = partial_open(s->group, &s->rec, s->partial, (size_t)s->n_partials, &content, e);
	if (st == QB_OK)
		st = store_setting_get(o->store, key, &want, e);
	if (st == QB_OK) {
		blake2b_512(hash, content.data, content.len);
		if (!hex_decode(expected, 64, (const char *)want.data) || memcmp(hash, expected, 64) != 0)
			st = qb_fail(e, QB_CRYPTO, "rehearsal", "start a new key generation",
			             "the canary opened to another text");
	}
	buf_wipe(&content);
	buf_free(&want);
	return st;
}

static enum qb_status check(const struct accepted *a, struct stage *s, int i, struct qb_error *e)
{
	struct buf share = {0};
	enum qb_status st = QB_OK;
	if (!s->open || i < 0 || s->list[i].rehearsal_seq != NO_SEQ)
		return qb_fail(e, QB_CONFLICT, "rehearsal", NULL, "a rehearsal of %s is not due now", a->entry.by);
	if ((uint64_t)wire_entry_int(&a->entry, "attempt") != s->attempt)
		return qb_fail(e, QB_CONFLICT, "rehearsal: attempt", "follow the ledger", "attempt %llu runs now",
		               (unsigned long long)s->attempt);
	st = record_check(s->group, s->canary, s->canary_n, &s->rec, e);
	if (st == QB_OK)
		st = keyholder_message(a, "share", &share, e);
	if (st == QB_OK)
		st = partial_check(s->group, &s->rec, &s->auth, share.data, share.len, &s->partial[0], e);
	if (st == QB_OK && s->partial[0].i != (uint32_t)i + 1)
		st = qb_fail(e, QB_CRYPTO, "rehearsal: share", NULL, "is another custodian's");
	s->n_partials = 1;
	buf_free(&share);
	return st;
}

enum qb_status case_rehearsal(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                              struct qb_error *e)
{
	struct accepted a;
	struct txn t;
	uint8_t leaf[32];
	int64_t seq;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	bool reshare = strcmp(a.entry.type->type, "reshare-rehearsal") == 0;
	struct stage s = stage_of(c, reshare);
	int i = reshare ? reshare_member(c, a.entry.by) : custodian_index(c, a.entry.by);
	st = check(&a, &s, i, e);
	bool last = st == QB_OK && custodians_all_in(s.list, s.n, i, offsetof(struct custodian, rehearsal_seq));
	if (last)
		st = combine(o, c, &s, i, e);
	if (st == QB_OK && (st = txn_begin(&t, o, "rehearsal", e)) == QB_OK) {
		st = txn_entry(&t, call->who->key_id, a.text, a.signature, &seq, leaf, e);
		if (st == QB_OK && last) {
			json_t *extra = json_object();
			json_object_set_new(extra, "attempt", json_integer((json_int_t)s.attempt));
			st = txn_service_entry(&t, reshare ? "reshared" : "rehearsed", c,
			                       "all custodians opened the canary", extra, NULL, NULL, e);
		}
		if (st == QB_OK)
			st = txn_commit(&t, e);
		if (st == QB_OK)
			reply_entry(reply, 201, seq, leaf, t.now_ns);
		txn_end(&t);
	}
	accepted_free(&a);
	return st;
}
