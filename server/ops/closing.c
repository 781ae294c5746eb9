/* The end of the analysis: closing flushes every promise first; reviewers sign the audit; the bundle goes out. */
#include <string.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define BUNDLE_MAX      ((size_t)2 << 30)
#define SERVICE_VERSION "1.0"

/* The closing itself, also of a campaign that ends before its time: then every key that is left is erased with it. */
static enum qb_status close_now(struct ops *o, struct campaign *c, const struct ops_call *call,
                                const struct accepted *a, bool early, struct ops_reply *reply, struct qb_error *e)
{
	struct txn t;
	int64_t seq;
	uint8_t leaf[32];
	enum qb_status st = txn_begin(&t, o, a->entry.type->type, e);
	if (st != QB_OK)
		return st;
	st = hidden_batches(&t, c, true, e);
	if (st == QB_OK)
		st = hidden_summary(&t, c, e);
	if (st == QB_OK)
		st = txn_entry(&t, call->who->key_id, a->text, a->signature, &seq, leaf, e);
	if (st == QB_OK && early)
		st = store_slot_keys_erase_below(o->store, c->id, c->n_slots, e);
	if (st == QB_OK)
		st = txn_commit(&t, e);
	if (st == QB_OK && early)
		c->erased_below = c->n_slots;
	if (st == QB_OK)
		reply_entry(reply, 201, seq, leaf, t.now_ns);
	txn_end(&t);
	return st;
}

static enum qb_status needs_reason(const struct accepted *a, struct qb_error *e)
{
	return strcmp(a->entry.why, "-") != 0 ? QB_OK
	                                      : qb_fail(e, QB_REFUSED, a->entry.type->type, "give --reason",
	                                                "an end before the time needs a reason");
}

enum qb_status case_close(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                          struct qb_error *e)
{
	struct accepted a;
	int64_t end = c->plan->slots.end_gps_ns;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	bool early = strcmp(a.entry.type->type, "early-closing") == 0, running = now_locked(o) < end;
	if (c->state != C_SEALED) {
		st = qb_fail(e, QB_CONFLICT, "close", NULL, "the campaign is %s", campaign_word(c));
	} else if (running && !early) {
		reply->until_gps_ns = end;
		st = qb_fail(e, QB_CONFLICT, "close", "wait for the end of the stretch, or give --early and a reason",
		             "the campaign still runs");
	} else if (early && !running) {
		st = qb_fail(e, QB_CONFLICT, "close", "close it without --early", "the stretch is over");
	} else if (early) {
		st = needs_reason(&a, e);
	}
	if (st == QB_OK)
		st = close_now(o, c, call, &a, early, reply, e);
	accepted_free(&a);
	return st;
}

enum qb_status case_abandon(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	if (c->state > C_SEALED)
		st = qb_fail(e, QB_CONFLICT, "abandon", NULL, "the campaign is %s", campaign_word(c));
	else if (c->state == C_SEALED && campaign_role(c, call->who) != ROLE_REVIEWER)
		st =
		    qb_fail(e, QB_REFUSED, "abandon", "ask a reviewer", "a sealed campaign is a reviewer's to abandon");
	else
		st = needs_reason(&a, e);
	if (st == QB_OK)
		st = c->state == C_SEALED ? close_now(o, c, call, &a, true, reply, e)
		                          : enter_one(o, "abandonment", call, &a, reply, e);
	if (st == QB_OK)
		seal_job_cancel(o, c);
	accepted_free(&a);
	return st;
}

enum qb_status case_sign(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	if (c->state != C_OPENED)
		st = qb_fail(e, QB_CONFLICT, "signature", "open the campaign first", "there is no audit to sign yet");
	if (st == QB_OK)
		st = enter_one(o, "audit-signature", call, &a, reply, e);
	accepted_free(&a);
	return st;
}

enum qb_status case_bundle(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                           struct qb_error *e)
{
	uint8_t ids[CUSTODY_MAX][16];
	uint64_t size = 0;
	struct buf head = {0};
	int64_t opened = NO_SEQ;
	(void)call;
	if (c->state != C_OPENED)
		return qb_fail(e, QB_CONFLICT, "bundle", "close and open it first", "the campaign is %s",
		               campaign_word(c));
	for (int i = 0; i < c->n; i++)
		memcpy(ids[i], c->custodian[i].party->key_id, 16);
	for (int i = 0; i < c->n_openings; i++) {
		if (c->opening[i].scope == SCOPE_FULL && c->opening[i].opened)
			opened = c->opening[i].seq;
	}
	int needed = (int)head_quorum((size_t)c->n);
	enum qb_status st = store_cosigned_size(o->store, (const uint8_t(*)[16])ids, c->n, needed, &size, e);
	if (st == QB_OK && (int64_t)size <= opened)
		st = qb_fail(e, QB_CONFLICT, "bundle", "let the custodians run quietbell ledger head",
		             "no head that covers the opening has the cosignatures of %d custodians", needed);
	if (st == QB_OK)
		st = head_with_cosignatures(o, size, &head, e);
	char *path = text_printf("%s/bundle.tmp", o->data_dir);
	if (st == QB_OK)
		st = store_bundle_write(o->store, c->id, size, (const char *)head.data, SERVICE_VERSION, path, e);
	if (st == QB_OK)
		st = file_read(path, BUNDLE_MAX, &reply->bytes, e);
	(void)unlink(path);
	if (st == QB_OK) {
		reply->http_status = 200;
		reply->content_type = qb_strdup("application/vnd.sqlite3");
	}
	qb_free(path);
	buf_free(&head);
	return st;
}
