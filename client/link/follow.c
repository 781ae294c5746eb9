/* Following the ledger. */
#include "client/link/heads.h"

#include <inttypes.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/link/journal.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

#define COPY_MAX ((size_t)4 << 30)
#define PAGE     500

enum qb_status follow_take(struct follow *f, const uint8_t *frame, size_t n, struct qb_error *e)
{
	struct entry leaf;
	struct ledger_hash h;
	uint8_t key[32];
	enum qb_status st = entry_decode(frame, n, &leaf, e);
	if (st == QB_OK && leaf.seq != f->n)
		st = qb_fail(e, QB_CRYPTO, "ledger", "do not trust this ledger",
		             "leaf %" PRIu64 " stands in place %" PRIu64, leaf.seq, f->n);
	if (st == QB_OK)
		st = view_author_key(&f->view, &leaf, key, e);
	if (st == QB_OK)
		st = entry_verify(&leaf, key, e);
	hash_leaf(&h, frame, n);
	if (st == QB_OK)
		st = view_apply(&f->view, &leaf, h.b, e);
	if (st != QB_OK)
		return st;
	if (f->n == f->cap) {
		f->cap = f->cap > 0 ? 2 * f->cap : 256;
		f->frame = qb_realloc(f->frame, f->cap, sizeof *f->frame);
		f->leaf = qb_realloc(f->leaf, f->cap, sizeof *f->leaf);
	}
	f->frame[f->n] = (struct buf){0};
	buf_put(&f->frame[f->n], frame, n);
	f->leaf[f->n++] = h;
	tree_append(&f->range, &h);
	return QB_OK;
}

void follow_root(const struct follow *f, uint64_t n, struct ledger_hash *out)
{
	struct tree_range t = {0};
	if (n == f->n) {
		tree_root(&f->range, out);
		return;
	}
	for (uint64_t i = 0; i < n; i++)
		tree_append(&t, &f->leaf[i]);
	tree_root(&t, out);
}

/* The head of earlier runs: leaves may have been lost since, but not the memory that they were there. */
static enum qb_status recall_head(struct follow *f, const struct home *h, struct qb_error *e)
{
	struct ledger_hash root;
	enum qb_status st = heads_kept(h, &f->head, NULL);
	f->has_head = st == QB_OK;
	if (st == QB_NOT_FOUND)
		return QB_OK;
	if (st == QB_OK && f->head.size <= f->n) {
		follow_root(f, f->head.size, &root);
		st = hash_equal(&root, &f->head.root) ? QB_OK : QB_CRYPTO;
	}
	return st == QB_OK ? st
	                   : qb_fail(e, QB_CRYPTO, h->dir, "restore both from one backup, and compare with a colleague",
	                             "head.txt does not belong to ledger.bin");
}

enum qb_status follow_open(struct follow *f, const struct home *h, struct qb_error *e)
{
	*f = (struct follow){0};
	char *path = home_path(h, "ledger.bin");
	struct buf b = {0};
	enum qb_status st = QB_OK;
	if (access(path, F_OK) == 0)
		st = file_read(path, COPY_MAX, &b, e);
	struct cursor c = cursor_over(b.data, b.len);
	while (st == QB_OK && c.left > 0) {
		uint32_t n = cursor_u32(&c);
		const uint8_t *p = cursor_take(&c, n);
		if (p == NULL)
			break;
		st = follow_take(f, p, n, e);
		f->on_disk += 4 + (size_t)n;
		f->n_on_disk = f->n;
	}
	buf_free(&b);
	qb_free(path);
	if (st == QB_OK && h->has_service)
		st = recall_head(f, h, e);
	if (st != QB_OK)
		follow_close(f);
	return st;
}

void follow_close(struct follow *f)
{
	for (uint64_t i = 0; i < f->n; i++)
		buf_free(&f->frame[i]);
	qb_free(f->frame);
	qb_free(f->leaf);
	qb_free(f->other);
	view_free(&f->view);
	*f = (struct follow){0};
}

static void frames_from(const struct follow *f, uint64_t first, struct buf *out)
{
	for (uint64_t i = first; i < f->n; i++) {
		buf_u32(out, (uint32_t)f->frame[i].len);
		buf_put(out, f->frame[i].data, f->frame[i].len);
	}
}

/*
 * New leaves go to the end of the copy, which is written anew when it does not end where it should. What another
 * command has written meanwhile stays. The head follows, so that it never speaks of leaves that are not there.
 */
static enum qb_status save(struct follow *f, const struct home *h, struct qb_error *e)
{
	struct buf b = {0};
	bool done = true;
	size_t size = 0;
	char *path = home_path(h, "ledger.bin");
	frames_from(f, f->n_on_disk, &b);
	size_t whole = f->on_disk + b.len;
	enum qb_status st = b.len > 0 ? journal_append(path, f->on_disk, b.data, b.len, &done, &size, e) : QB_OK;
	if (st == QB_OK && !done && size < whole) {
		buf_clear(&b);
		frames_from(f, 0, &b);
		st = file_write(path, 0600, b.data, b.len, e);
	}
	if (st == QB_OK) {
		f->on_disk = whole;
		f->n_on_disk = f->n;
	}
	buf_free(&b);
	qb_free(path);
	return st == QB_OK ? heads_keep(h, &f->head, e) : st;
}

static enum qb_status fetch_head(struct follow *f, struct link *l, struct head *out, struct qb_error *e)
{
	json_t *doc;
	const char *text;
	enum qb_status st = link_get(l, "/v1/ledger/head", &doc, e);
	if (st == QB_OK)
		st = json_str(doc, "head", "head", &text, e);
	if (st == QB_OK)
		st = head_parse(text, strlen(text), out, e);
	if (st == QB_OK)
		st = head_verify(out, l->home->service_key, NULL, 0, NULL, e);
	if (st == QB_OK)
		st = heads_read(f, l->home->service_key, json_object_get(doc, "cosigned"), e);
	json_decref(doc);
	return st;
}

/* Leaves that were fetched and are not believed yet. */
struct fetched {
	struct buf *frame; /* owned */
	size_t n, cap;
};

static enum qb_status fetch_page(const struct follow *f, struct link *l, uint64_t to, struct fetched *x,
                                 struct qb_error *e)
{
	json_t *doc, *v;
	size_t i;
	uint64_t at = f->n + x->n, left = to - at;
	char *path = text_printf("/v1/ledger/entries?from=%" PRIu64 "&limit=%" PRIu64, at, left < PAGE ? left : PAGE);
	enum qb_status st = link_get(l, path, &doc, e);
	qb_free(path);
	if (st == QB_OK && json_array_size(json_object_get(doc, "entries")) == 0)
		st = qb_fail(e, QB_CRYPTO, "ledger", "do not trust this service", "the service withholds leaf %" PRIu64,
		             at);
	json_array_foreach(json_object_get(doc, "entries"), i, v)
	{
		if (st != QB_OK || f->n + x->n >= to)
			break;
		if (x->n == x->cap) {
			x->cap = x->cap > 0 ? 2 * x->cap : 256;
			x->frame = qb_realloc(x->frame, x->cap, sizeof *x->frame);
		}
		x->frame[x->n] = (struct buf){0};
		if (!json_is_string(v) || !base64_decode(json_string_value(v), &x->frame[x->n++]))
			st = qb_fail(e, QB_FORMAT, "ledger", NULL, "a leaf is not base64");
	}
	json_decref(doc);
	return st;
}

static enum qb_status contradiction(const struct follow *f, const struct link *l, const char *word,
                                    const struct head *theirs, struct qb_error *e, const char *what)
{
	char *path = NULL, *mend = NULL;
	enum qb_status st = QB_OK;
	if (f->has_head)
		st = heads_evidence(f, l->home, word, &f->head, theirs, &path, e);
	mend = path != NULL
	           ? text_printf("do not trust this service; tell the custodians, and show them both heads: %s", path)
	           : qb_strdup("do not trust this service; tell the custodians");
	if (st == QB_OK)
		st = qb_fail(e, QB_CRYPTO, "ledger", mend, "%s", what);
	qb_free(path);
	qb_free(mend);
	return st;
}

/* A head continues what was seen when the leaves seen and the new ones together have its root. */
static enum qb_status check_continues(const struct follow *f, const struct link *l, const struct head *h,
                                      const struct fetched *x, struct qb_error *e)
{
	struct tree_range t = f->range;
	struct ledger_hash root, leaf;
	bool same = true;
	for (size_t i = 0; i < x->n; i++) {
		hash_leaf(&leaf, x->frame[i].data, x->frame[i].len);
		tree_append(&t, &leaf);
		if (f->has_head && t.size == f->head.size) {
			tree_root(&t, &root);
			same = same && hash_equal(&root, &f->head.root);
		}
	}
	tree_root(&t, &root);
	if (same && hash_equal(&root, &h->root))
		return QB_OK;
	char *what = text_printf(
	    "the head of size %" PRIu64 " is not the root of the leaves seen: there are two histories", h->size);
	enum qb_status st = contradiction(f, l, HEADS_TWO_HISTORIES, h, e, what);
	qb_free(what);
	return st;
}

static enum qb_status check_not_behind(const struct follow *f, const struct link *l, const struct head *h,
                                       struct qb_error *e)
{
	uint64_t seen = f->has_head && f->head.size > f->n ? f->head.size : f->n;
	if (h->size >= seen)
		return QB_OK;
	char *what = text_printf("the service shows %" PRIu64 " leaves, fewer than the %" PRIu64
	                         " seen before: it was rolled back",
	                         h->size, seen);
	enum qb_status st = contradiction(f, l, HEADS_ROLLED_BACK, h, e, what);
	qb_free(what);
	return st;
}

/* What others cosigned must be a part of this ledger; the heads are in the order of their sizes. */
static enum qb_status check_others(const struct follow *f, const struct link *l, struct qb_error *e)
{
	struct tree_range t = {0};
	struct ledger_hash root;
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < f->n_others; i++) {
		const struct head *h = &f->other[i];
		while (t.size < h->size && t.size < f->n)
			tree_append(&t, &f->leaf[t.size]);
		tree_root(&t, &root);
		if (t.size != h->size || !hash_equal(&root, &h->root))
			st = heads_compare(f, l->home, h, "another party", e);
	}
	return st;
}

enum qb_status follow_update(struct follow *f, struct link *l, struct qb_error *e)
{
	struct head *h = QB_NEW(struct head);
	struct fetched x = {0};
	bool fresh;
	enum qb_status st = fetch_head(f, l, h, e);
	if (st == QB_OK)
		st = check_not_behind(f, l, h, e);
	while (st == QB_OK && f->n + x.n < h->size)
		st = fetch_page(f, l, h->size, &x, e);
	if (st == QB_OK)
		st = check_continues(f, l, h, &x, e);
	for (size_t i = 0; st == QB_OK && i < x.n; i++)
		st = follow_take(f, x.frame[i].data, x.frame[i].len, e);
	if (st == QB_OK) {
		fresh = !f->has_head || f->head.size != h->size || f->head.n_cosigners != h->n_cosigners;
		f->head = *h;
		f->has_head = true;
		st = check_others(f, l, e);
		if (st == QB_OK && (fresh || f->n_on_disk < f->n))
			st = save(f, l->home, e);
	}
	for (size_t i = 0; i < x.n; i++)
		buf_free(&x.frame[i]);
	qb_free(x.frame);
	qb_free(h);
	return st;
}

static bool cosigned_by(const struct head *h, const uint8_t key_id[static 16])
{
	for (size_t i = 0; i < h->n_cosigners; i++) {
		if (memcmp(h->cosigner[i].key_id, key_id, 16) == 0)
			return true;
	}
	return false;
}

static enum qb_status cosign_one(struct head *h, struct link *l, struct qb_error *e)
{
	struct head_signature s;
	if (cosigned_by(h, l->home->key_id))
		return QB_OK;
	head_cosign(h, l->home->key.seed, &s);
	json_t *body = json_object();
	json_object_set_new(body, "size", json_integer((json_int_t)h->size));
	json_object_set_new(body, "root", json_hex_new(h->root.b, 32));
	json_object_set_new(body, "signature", json_hex_new(s.signature, SIGN_BYTES));
	enum qb_status st = link_post(l, "/v1/ledger/cosignatures", body, NULL, e);
	json_decref(body);
	return st == QB_OK ? head_add(h, &s, e) : st;
}

enum qb_status follow_cosign(struct follow *f, struct link *l, struct qb_error *e)
{
	enum qb_status st = cosign_one(&f->head, l, e);
	struct head *other = f->n_others > 0 ? &f->other[f->n_others - 1] : NULL;
	if (st == QB_OK && other != NULL && other->size != f->head.size)
		st = cosign_one(other, l, e);
	return st == QB_OK ? heads_keep(l->home, &f->head, e) : st;
}

enum qb_status follow_entry(const struct follow *f, uint64_t seq, struct entry *leaf, struct wire_entry *out,
                            struct qb_error *e)
{
	if (seq >= f->n)
		return qb_fail(e, QB_NOT_FOUND, "ledger", NULL, "there is no leaf %" PRIu64, seq);
	enum qb_status st = entry_decode(f->frame[seq].data, f->frame[seq].len, leaf, e);
	if (st == QB_OK && leaf->kind == ENTRY_HIDDEN)
		return qb_fail(e, QB_NOT_FOUND, "ledger", NULL, "leaf %" PRIu64 " is hidden", seq);
	if (st == QB_OK)
		st = wire_entry_parse((const char *)leaf->body, leaf->body_len, out, e);
	return st;
}
