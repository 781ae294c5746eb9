/* Following the ledger. */
#include "client/link/follow.h"

#include <inttypes.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

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
			st = qb_fail(e, QB_FORMAT, path, "remove it, so that it is fetched anew",
			             "the copy of the ledger is damaged");
		else
			st = follow_take(f, p, n, e);
	}
	buf_free(&b);
	qb_free(path);
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
	view_free(&f->view);
	*f = (struct follow){0};
}

static enum qb_status save(const struct follow *f, const struct home *h, struct qb_error *e)
{
	struct buf b = {0};
	char *path = home_path(h, "ledger.bin");
	for (uint64_t i = 0; i < f->n; i++) {
		buf_u32(&b, (uint32_t)f->frame[i].len);
		buf_put(&b, f->frame[i].data, f->frame[i].len);
	}
	enum qb_status st = file_write(path, 0600, b.data, b.len, e);
	buf_free(&b);
	qb_free(path);
	return st;
}

static enum qb_status fetch_head(struct link *l, struct head *out, struct qb_error *e)
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
	json_decref(doc);
	return st;
}

static enum qb_status fetch_leaves(struct follow *f, struct link *l, uint64_t to, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	while (st == QB_OK && f->n < to) {
		json_t *doc, *v;
		size_t i;
		uint64_t left = to - f->n;
		char *path =
		    text_printf("/v1/ledger/entries?from=%" PRIu64 "&limit=%" PRIu64, f->n, left < PAGE ? left : PAGE);
		st = link_get(l, path, &doc, e);
		qb_free(path);
		if (st == QB_OK && json_array_size(json_object_get(doc, "entries")) == 0)
			st = qb_fail(e, QB_CRYPTO, "ledger", "do not trust this service",
			             "the service withholds leaf %" PRIu64, f->n);
		json_array_foreach(json_object_get(doc, "entries"), i, v)
		{
			struct buf b = {0};
			if (st == QB_OK && f->n < to) {
				if (!json_is_string(v) || !base64_decode(json_string_value(v), &b))
					st = qb_fail(e, QB_FORMAT, "ledger", NULL, "a leaf is not base64");
				else
					st = follow_take(f, b.data, b.len, e);
			}
			buf_free(&b);
		}
		json_decref(doc);
	}
	return st;
}

/* The root of the first n leaves, which we hold. */
static void root_of(struct follow *f, uint64_t n, struct ledger_hash *out)
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

enum qb_status follow_update(struct follow *f, struct link *l, struct qb_error *e)
{
	struct head *h = QB_NEW(struct head);
	struct ledger_hash root;
	uint64_t before = f->n;
	enum qb_status st = fetch_head(l, h, e);
	if (st == QB_OK && h->size < before)
		st = qb_fail(e, QB_CRYPTO, "ledger", "do not trust this service; tell the custodians",
		             "the service shows %" PRIu64 " leaves, fewer than the %" PRIu64
		             " seen before: it was rolled back",
		             h->size, before);
	if (st == QB_OK)
		st = fetch_leaves(f, l, h->size, e);
	if (st == QB_OK) {
		root_of(f, h->size, &root);
		if (!hash_equal(&root, &h->root))
			st = qb_fail(e, QB_CRYPTO, "ledger", "do not trust this service; tell the custodians",
			             "the head of size %" PRIu64
			             " is not the root of the leaves seen: there are two histories",
			             h->size);
	}
	if (st == QB_OK) {
		f->head = *h;
		f->has_head = true;
		if (f->n > before)
			st = save(f, l->home, e);
	}
	qb_free(h);
	return st;
}

enum qb_status follow_cosign(struct follow *f, struct link *l, struct qb_error *e)
{
	struct head_signature s;
	head_cosign(&f->head, l->home->key.seed, &s);
	json_t *body = json_object();
	json_object_set_new(body, "size", json_integer((json_int_t)f->head.size));
	json_object_set_new(body, "root", json_hex_new(f->head.root.b, 32));
	json_object_set_new(body, "signature", json_hex_new(s.signature, SIGN_BYTES));
	enum qb_status st = link_post(l, "/v1/ledger/cosignatures", body, NULL, e);
	json_decref(body);
	return st;
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
