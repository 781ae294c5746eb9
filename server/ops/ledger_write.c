/* Transactions: new leaves are stored, read back, hashed into the tree and covered by a signed head, all or nothing. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/ops/internal.h"

enum qb_status txn_begin(struct txn *t, struct ops *o, const char *use_case_name, struct qb_error *e)
{
	*t = (struct txn){.o = o, .now_ns = now_locked(o)};
	return store_begin(o->store, use_case_name, e);
}

static enum qb_status append(struct txn *t, struct entry *en, int64_t *seq, uint8_t *leaf_hash, struct qb_error *e)
{
	struct pending_leaf p = {0};
	en->seq = t->o->size + t->n;
	en->received_gps_ns = t->now_ns;
	enum qb_status st = entry_encode(en, &p.frame, e);
	if (st == QB_OK)
		hash_leaf(&p.hash, p.frame.data, p.frame.len);
	if (st == QB_OK)
		st = store_leaf_append(t->o->store, en->seq, p.frame.data, p.frame.len, p.hash.b, e);
	if (st != QB_OK) {
		buf_free(&p.frame);
		return st;
	}
	if ((t->n & (t->n - 1)) == 0) /* grows at powers of two */
		t->leaf = qb_realloc(t->leaf, t->n > 0 ? 2 * t->n : 1, sizeof *t->leaf);
	t->leaf[t->n++] = p;
	if (seq != NULL)
		*seq = (int64_t)en->seq;
	if (leaf_hash != NULL)
		memcpy(leaf_hash, p.hash.b, 32);
	return QB_OK;
}

enum qb_status txn_entry(struct txn *t, const uint8_t author[static 16], const char *text,
                         const uint8_t signature[static 64], int64_t *seq, uint8_t *leaf_hash, struct qb_error *e)
{
	struct entry en = {.kind = ENTRY_PUBLIC, .body = (const uint8_t *)text, .body_len = strlen(text)};
	memcpy(en.author, author, 16);
	memcpy(en.signature, signature, 64);
	return append(t, &en, seq, leaf_hash, e);
}

enum qb_status txn_service_entry(struct txn *t, const char *type, const struct campaign *c, const char *why,
                                 json_t *extra, int64_t *seq, uint8_t *leaf_hash, struct qb_error *e)
{
	char *text = NULL;
	uint8_t signature[64];
	enum qb_status st =
	    wire_entry_compose(type, "service", c != NULL ? c->id : NULL, t->now_ns, why, extra, &text, e);
	json_decref(extra);
	if (st == QB_OK) {
		entry_sign_body(t->o->service_seed, text, strlen(text), signature);
		st = txn_entry(t, t->o->service_id, text, signature, seq, leaf_hash, e);
	}
	qb_free(text);
	return st;
}

enum qb_status txn_hidden_leaf(struct txn *t, const uint8_t commitment[static 64], int64_t *seq, struct qb_error *e)
{
	struct entry en = {.kind = ENTRY_HIDDEN, .body = commitment, .body_len = ENTRY_COMMITMENT_BYTES};
	entry_sign(&en, t->o->service_seed);
	return append(t, &en, seq, NULL, e);
}

static enum qb_status sign_head(struct txn *t, const struct tree_range *range, struct qb_error *e)
{
	struct head h = {.size = range->size, .time_gps_ns = t->now_ns};
	tree_root(range, &h.root);
	head_sign(&h, t->o->service_seed);
	struct buf text = {0};
	head_format(&h, &text);
	enum qb_status st = store_head_put(t->o->store, h.size, (const char *)text.data, e);
	buf_free(&text);
	return st;
}

static void remember_leaf(struct ops *o, const struct ledger_hash *hash)
{
	if (o->size == o->cap) {
		o->cap = o->cap > 0 ? 2 * o->cap : 1024;
		o->leaf = qb_realloc(o->leaf, o->cap, sizeof *o->leaf);
	}
	o->leaf[o->size++] = *hash;
}

enum qb_status txn_commit(struct txn *t, struct qb_error *e)
{
	struct ops *o = t->o;
	struct tree_range range = o->range;
	for (size_t i = 0; i < t->n; i++)
		tree_append(&range, &t->leaf[i].hash);
	enum qb_status st = t->n > 0 ? sign_head(t, &range, e) : QB_OK;
	if (st == QB_OK)
		st = store_commit(o->store, e);
	if (st != QB_OK)
		return st;
	o->range = range;
	for (size_t i = 0; i < t->n; i++) {
		struct entry en;
		remember_leaf(o, &t->leaf[i].hash);
		/* The use case checked everything before; a leaf that can't be applied now would be our own bug. */
		CHECK(entry_decode(t->leaf[i].frame.data, t->leaf[i].frame.len, &en, e) == QB_OK);
		CHECK(view_apply(&o->view, &en, t->leaf[i].hash.b, e) == QB_OK);
	}
	pthread_cond_broadcast(&o->changed);
	return QB_OK;
}

void txn_end(struct txn *t)
{
	store_rollback(t->o->store);
	for (size_t i = 0; i < t->n; i++)
		buf_free(&t->leaf[i].frame);
	qb_free(t->leaf);
	*t = (struct txn){.o = t->o};
}
