/*
 * Hidden entries: a receipt at once, the commitment in the ledger with the next batch. A batch has 16 leaves every
 * `batch` of the plan, filled up with random ones, so that the ledger does not tell that something happened.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define BATCHES_AT_ONCE 16

struct pending {
	uint8_t (*commitment)[64];
	size_t n;
};

static enum qb_status collect(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct pending *p = state;
	(void)e;
	if (h->seq >= 0)
		return QB_OK;
	p->commitment = qb_realloc(p->commitment, p->n + 1, 64);
	memcpy(p->commitment[p->n++], h->commitment, 64);
	return QB_OK;
}

static enum qb_status pending_of(struct ops *o, const struct campaign *c, struct pending *out, struct qb_error *e)
{
	*out = (struct pending){0};
	return store_hidden_all(o->store, c->id, collect, out, e);
}

enum qb_status hidden_take(struct txn *t, struct campaign *c, const struct ops_call *call, const struct accepted *a,
                           struct ops_reply *reply, uint8_t commitment[static 64], struct qb_error *e)
{
	struct ops *o = t->o;
	struct store_hidden h = {.entry = (const uint8_t *)a->text, .entry_n = strlen(a->text), .seq = NO_SEQ};
	struct pending waiting;
	enum qb_status st = json_hex(call->body, "nonce", "request", h.nonce, 32, e);
	if (st != QB_OK || (st = pending_of(o, c, &waiting, e)) != QB_OK)
		return st;
	/* Overflow waits for a later batch, and the promise says so. */
	int64_t batches = 1 + (int64_t)(waiting.n / HIDDEN_BATCH);
	qb_free(waiting.commitment);
	entry_hide(h.nonce, h.entry, h.entry_n, h.commitment);
	memcpy(h.campaign, c->id, 16);
	memcpy(h.signature, a->signature, 64);
	memcpy(h.author, call->who->key_id, 16);
	h.received_gps_ns = t->now_ns;
	int64_t since = t->now_ns > c->last_batch_ns ? t->now_ns - c->last_batch_ns : 0;
	h.due_gps_ns = c->last_batch_ns + (since / c->plan->batch_ns + batches) * c->plan->batch_ns;
	struct entry_promise promise = {.received_gps_ns = h.received_gps_ns, .batch_due_gps_ns = h.due_gps_ns};
	memcpy(promise.campaign, c->id, 16);
	memcpy(promise.commitment, h.commitment, 64);
	entry_promise_sign(&promise, o->service_seed);
	memcpy(h.promise, promise.signature, 64);
	if ((st = store_hidden_put(o->store, &h, e)) != QB_OK)
		return st;
	memcpy(commitment, h.commitment, 64);
	reply->http_status = 201;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "id", json_hex_new(h.commitment, 16));
	json_object_set_new(reply->doc, "commitment", json_hex_new(h.commitment, 64));
	json_object_set_new(reply->doc, "received_gps", json_gps_new(h.received_gps_ns));
	json_object_set_new(reply->doc, "batch_due_gps", json_gps_new(h.due_gps_ns));
	json_object_set_new(reply->doc, "promise", json_hex_new(h.promise, 64));
	return QB_OK;
}

static void batch_key(const struct campaign *c, char out[static 48])
{
	char hex[33];
	hex_encode(hex, c->id, 16);
	(void)snprintf(out, 48, "batch-%s", hex);
}

static enum qb_status batch_time_put(struct ops *o, const struct campaign *c, int64_t at_ns, struct qb_error *e)
{
	char key[48], value[32];
	batch_key(c, key);
	return store_setting_put(o->store, key, clock_gps_text(at_ns, value, sizeof value), e);
}

enum qb_status hidden_batch_time_load(struct ops *o, struct campaign *c, struct qb_error *e)
{
	char key[48];
	struct buf value = {0};
	batch_key(c, key);
	enum qb_status st = store_setting_get(o->store, key, &value, NULL);
	if (st == QB_OK && !clock_gps_parse((const char *)value.data, &c->last_batch_ns))
		st = qb_fail(e, QB_FAULT, "store", "restore a backup", "the time of the last batch can't be read");
	buf_free(&value);
	return st == QB_NOT_FOUND ? QB_OK : st;
}

/* One batch: up to 16 of the pending from `first` on, fillers for the rest, in random order. */
static enum qb_status enter_batch(struct txn *t, const struct pending *p, size_t first, struct qb_error *e)
{
	size_t place[HIDDEN_BATCH];
	for (size_t i = 0; i < HIDDEN_BATCH; i++)
		place[i] = i;
	for (size_t i = HIDDEN_BATCH - 1; i > 0; i--) {
		uint64_t r;
		random_bytes(&r, sizeof r);
		size_t j = (size_t)(r % (i + 1)), swap = place[i];
		place[i] = place[j];
		place[j] = swap;
	}
	for (size_t i = 0; i < HIDDEN_BATCH; i++) {
		uint8_t filler[64];
		size_t which = first + place[i];
		bool real = which < p->n;
		random_bytes(filler, sizeof filler);
		int64_t seq;
		enum qb_status st = txn_hidden_leaf(t, real ? p->commitment[which] : filler, &seq, e);
		if (st == QB_OK && real)
			st = store_hidden_entered(t->o->store, p->commitment[which], (uint64_t)seq, e);
		if (st != QB_OK)
			return st;
	}
	return QB_OK;
}

bool hidden_due(const struct ops *o, const struct campaign *c, int64_t now_ns)
{
	(void)o;
	return c->state == C_SEALED && now_ns >= c->last_batch_ns + c->plan->batch_ns;
}

enum qb_status hidden_batches(struct txn *t, struct campaign *c, bool flush, struct qb_error *e)
{
	struct pending p;
	size_t first = 0;
	int64_t last = c->last_batch_ns;
	enum qb_status st = pending_of(t->o, c, &p, e);
	/* After a long silence (a rehearsal clock that jumps, a service that was down) only so many batches are made up
	 * for; how many depends on the clock alone. */
	int64_t due = t->now_ns > last ? (t->now_ns - last) / c->plan->batch_ns : 0;
	last += due * c->plan->batch_ns;
	for (int64_t i = 0; st == QB_OK && i < due && i < BATCHES_AT_ONCE; i++) {
		st = enter_batch(t, &p, first, e);
		first += HIDDEN_BATCH;
	}
	while (st == QB_OK && flush && first < p.n) {
		st = enter_batch(t, &p, first, e);
		first += HIDDEN_BATCH;
	}
	qb_free(p.commitment);
	if (st == QB_OK)
		st = batch_time_put(t->o, c, last, e);
	if (st == QB_OK)
		c->last_batch_ns = last;
	return st;
}

struct entered {
	uint8_t commitment[64];
	int64_t seq;
};
struct all_entered {
	struct entered *x;
	size_t n;
};

static enum qb_status collect_entered(void *state, const struct store_hidden *h, struct qb_error *e)
{
	struct all_entered *all = state;
	(void)e;
	if (h->seq < 0)
		return QB_OK;
	all->x = qb_realloc(all->x, all->n + 1, sizeof *all->x);
	memcpy(all->x[all->n].commitment, h->commitment, 64);
	all->x[all->n++].seq = h->seq;
	return QB_OK;
}

static int by_seq(const void *a, const void *b)
{
	const struct entered *x = a, *y = b;
	return (x->seq > y->seq) - (x->seq < y->seq);
}

enum qb_status hidden_summary(struct txn *t, const struct campaign *c, struct qb_error *e)
{
	struct all_entered all = {0};
	uint8_t hash[64];
	enum qb_status st = store_hidden_all(t->o->store, c->id, collect_entered, &all, e);
	if (all.n > 0)
		qsort(all.x, all.n, sizeof *all.x, by_seq);
	uint8_t(*commitments)[64] = qb_alloc(all.n, 64);
	for (size_t i = 0; i < all.n; i++)
		memcpy(commitments[i], all.x[i].commitment, 64);
	view_hidden_summary((const uint8_t(*)[64])commitments, all.n, hash);
	if (st == QB_OK) {
		json_t *extra = json_object();
		json_object_set_new(extra, "count", json_integer((json_int_t)all.n));
		json_object_set_new(extra, "commitments_hash", json_hex_new(hash, 64));
		st = txn_service_entry(t, "hidden-summary", c, "the analysis closes", extra, NULL, NULL, e);
	}
	qb_free(commitments);
	qb_free(all.x);
	return st;
}
