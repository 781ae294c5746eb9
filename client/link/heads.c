/* Comparing heads, and the evidence when two of them can't be of one ledger. */
#include "client/link/heads.h"

#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define EVIDENCE_MAX ((size_t)1 << 20)

static char *head_text(const struct head *h)
{
	struct buf b = {0};
	head_format(h, &b);
	char *text = qb_memdup(b.data, b.len);
	buf_free(&b);
	return text;
}

/* ---- heads of files and answers ---- */

enum qb_status heads_keep(const struct home *h, const struct head *head, struct qb_error *e)
{
	struct buf b = {0};
	char *path = home_path(h, "head.txt");
	head_format(head, &b);
	enum qb_status st = file_write(path, 0600, b.data, b.len, e);
	buf_free(&b);
	qb_free(path);
	return st;
}

enum qb_status heads_file(const char *path, const uint8_t service_key[static 32], struct head *out, struct qb_error *e)
{
	struct buf b = {0};
	enum qb_status st = file_read(path, HEAD_TEXT_MAX, &b, e);
	if (st == QB_OK)
		st = head_parse((const char *)b.data, b.len, out, e);
	if (st == QB_OK)
		st = head_verify(out, service_key, NULL, 0, NULL, e);
	buf_free(&b);
	return st;
}

enum qb_status heads_kept(const struct home *h, struct head *out, struct qb_error *e)
{
	char *path = home_path(h, "head.txt");
	enum qb_status st = access(path, F_OK) == 0 ? heads_file(path, h->service_key, out, e)
	                                            : qb_fail(e, QB_NOT_FOUND, path, NULL, "no head was seen yet");
	qb_free(path);
	return st;
}

/* Whoever is enrolled must have signed what bears the name; of others nothing is known yet. */
static enum qb_status check_cosigners(const struct view *v, const struct head *h, struct qb_error *e)
{
	struct buf text = {0};
	enum qb_status st = QB_OK;
	head_signed_text(h, &text);
	for (size_t i = 0; st == QB_OK && i < h->n_cosigners; i++) {
		const uint8_t *key = view_signing_key(v, h->cosigner[i].key_id);
		if (key != NULL && !sign_verify(key, text.data, text.len, h->cosigner[i].signature))
			st = qb_fail(e, QB_CRYPTO, "ledger", "do not trust this service; tell the custodians",
			             "a cosignature under the head of size %" PRIu64 " is false", h->size);
	}
	buf_free(&text);
	return st;
}

static int by_size(const void *a, const void *b)
{
	const struct head *x = a, *y = b;
	return (x->size > y->size) - (x->size < y->size);
}

enum qb_status heads_read(struct follow *f, const uint8_t service_key[static 32], const json_t *list,
                          struct qb_error *e)
{
	size_t n = json_array_size(list);
	enum qb_status st = QB_OK;
	qb_free(f->other);
	f->other = NULL;
	f->n_others = 0;
	if (!json_is_array(list) || n > HEADS_MAX)
		return qb_fail(e, QB_FORMAT, "ledger", "do not trust this service",
		               "the service does not say which heads others cosigned");
	f->other = QB_NEW_ARRAY(struct head, n);
	for (size_t i = 0; st == QB_OK && i < n; i++) {
		const char *text = json_string_value(json_array_get(list, i));
		st = head_parse(text != NULL ? text : "", text != NULL ? strlen(text) : 0, &f->other[i], e);
		if (st == QB_OK)
			st = head_verify(&f->other[i], service_key, NULL, 0, NULL, e);
		if (st == QB_OK)
			st = check_cosigners(&f->view, &f->other[i], e);
	}
	if (st == QB_OK && n > 0)
		qsort(f->other, n, sizeof *f->other, by_size);
	f->n_others = st == QB_OK ? n : 0;
	return st;
}

int heads_custodians(const struct view *v, const struct campaign *k, const struct head *head)
{
	bool counted[CUSTODY_MAX] = {false};
	struct buf text = {0};
	int n = 0;
	head_signed_text(head, &text);
	for (size_t i = 0; i < head->n_cosigners; i++) {
		const struct view_party *p = view_party_by_id(v, head->cosigner[i].key_id);
		const uint8_t *key = view_signing_key(v, head->cosigner[i].key_id);
		int who = p != NULL ? custodian_index(k, p->name) : -1;
		if (who < 0 || counted[who] || !sign_verify(key, text.data, text.len, head->cosigner[i].signature))
			continue;
		counted[who] = true;
		n++;
	}
	buf_free(&text);
	return n;
}

/* ---- evidence ---- */

static void add_proof(const struct follow *f, const struct head *ours, const struct head *theirs, json_t *doc)
{
	struct tree_array array;
	struct tree_proof proof;
	struct ledger_hash prefix;
	struct tree_leaves leaves = tree_from_array(&array, f->leaf, f->n);
	if (theirs->size == 0 || theirs->size >= ours->size || ours->size > f->n ||
	    tree_consistency(&leaves, theirs->size, ours->size, &proof, NULL) != QB_OK)
		return;
	follow_root(f, theirs->size, &prefix);
	json_t *list = json_array();
	for (size_t i = 0; i < proof.n; i++)
		json_array_append_new(list, json_hex_new(proof.hash[i].b, LEDGER_HASH_BYTES));
	json_object_set_new(doc, "prefix_root", json_hex_new(prefix.b, LEDGER_HASH_BYTES));
	json_object_set_new(doc, "consistency", list);
}

enum qb_status heads_evidence(const struct follow *f, const struct home *h, const char *what, const struct head *ours,
                              const struct head *theirs, char **path, struct qb_error *e)
{
	json_t *doc = json_object();
	char *a = head_text(ours), *b = head_text(theirs);
	char *name = text_printf("evidence-%" PRIu64 "-%" PRIu64 ".json", ours->size, theirs->size);
	json_object_set_new(doc, "evidence", json_string(what));
	json_object_set_new(doc, "service_key", json_hex_new(h->service_key, 32));
	json_object_set_new(doc, "ours", json_string(a));
	json_object_set_new(doc, "theirs", json_string(b));
	add_proof(f, ours, theirs, doc);
	char *text = json_pretty(doc);
	*path = home_path(h, name);
	enum qb_status st = file_write(*path, 0600, text, strlen(text), e);
	qb_free(text);
	qb_free(name);
	qb_free(a);
	qb_free(b);
	json_decref(doc);
	return st;
}

enum qb_status heads_compare(const struct follow *f, const struct home *h, const struct head *theirs,
                             const char *said_by, struct qb_error *e)
{
	struct ledger_hash root;
	char *path = NULL, *mend;
	bool longer = theirs->size > f->n;
	if (!longer) {
		follow_root(f, theirs->size, &root);
		if (hash_equal(&root, &theirs->root))
			return QB_OK;
	}
	const char *what = !longer                                     ? HEADS_TWO_HISTORIES
	                   : f->head.time_gps_ns > theirs->time_gps_ns ? HEADS_ROLLED_BACK
	                                                               : HEADS_WITHHELD;
	enum qb_status st = QB_OK;
	if (f->has_head)
		st = heads_evidence(f, h, what, &f->head, theirs, &path, e);
	if (st != QB_OK) {
		qb_free(path);
		return st;
	}
	mend = text_printf("do not trust this service; tell the custodians, and show them both heads: %s",
	                   path != NULL ? path : "the copy and the other's head");
	if (!longer)
		st = qb_fail(e, QB_CRYPTO, "ledger", mend,
		             "the head of size %" PRIu64 " of %s is not of this ledger: the service has shown two "
		             "histories",
		             theirs->size, said_by);
	else
		st = qb_fail(e, QB_CRYPTO, "ledger", mend,
		             "the head of %s has %" PRIu64 " leaves, and the service shows this client only %" PRIu64
		             ": it was rolled back, or withholds the rest",
		             said_by, theirs->size, f->n);
	qb_free(mend);
	qb_free(path);
	return st;
}

static enum qb_status evidence_head(const json_t *doc, const char *which, const uint8_t key[static 32],
                                    struct head *out, struct qb_error *e)
{
	const char *text;
	enum qb_status st = json_str(doc, which, "evidence", &text, e);
	if (st == QB_OK)
		st = head_parse(text, strlen(text), out, e);
	return st == QB_OK ? head_verify(out, key, NULL, 0, NULL, e) : st;
}

static enum qb_status prefix_differs(const json_t *doc, const struct head *ours, const struct head *theirs,
                                     char why[static 200], struct qb_error *e)
{
	const json_t *list = json_object_get(doc, "consistency");
	struct tree_proof proof = {.n = json_array_size(list)};
	struct ledger_hash prefix;
	enum qb_status st = json_hex(doc, "prefix_root", "evidence", prefix.b, LEDGER_HASH_BYTES, e);
	if (st == QB_OK && proof.n > TREE_PROOF_MAX)
		st = qb_fail(e, QB_FORMAT, "evidence: consistency", NULL, "is longer than any proof");
	for (size_t i = 0; st == QB_OK && i < proof.n; i++) {
		const char *hex = json_string_value(json_array_get(list, i));
		if (hex == NULL || !hex_decode(proof.hash[i].b, LEDGER_HASH_BYTES, hex))
			st = qb_fail(e, QB_FORMAT, "evidence: consistency", NULL, "is no list of hashes");
	}
	if (st == QB_OK &&
	    tree_check_consistency(theirs->size, &prefix, ours->size, &ours->root, &proof, NULL) != QB_OK)
		st = qb_fail(e, QB_NO, "evidence", NULL, "its proof does not hold");
	if (st == QB_OK && hash_equal(&prefix, &theirs->root))
		st = qb_fail(e, QB_NO, "evidence", NULL, "one ledger has both heads");
	if (st == QB_OK)
		(void)snprintf(why, 200,
		               "the first %" PRIu64 " of the %" PRIu64
		               " leaves of one head have another root than the other head",
		               theirs->size, ours->size);
	return st;
}

enum qb_status heads_evidence_check(const char *text, size_t n, uint8_t key[static 32], char why[static 200],
                                    struct qb_error *e)
{
	json_t *doc = NULL;
	struct head *pair = QB_NEW_ARRAY(struct head, 2), *ours = &pair[0], *theirs = &pair[1];
	enum qb_status st = n <= EVIDENCE_MAX ? json_read(text, n, "evidence", &doc, e)
	                                      : qb_fail(e, QB_FORMAT, NULL, NULL, "is too large");
	if (st == QB_OK)
		st = json_hex(doc, "service_key", "evidence", key, 32, e);
	if (st == QB_OK)
		st = evidence_head(doc, "ours", key, ours, e);
	if (st == QB_OK)
		st = evidence_head(doc, "theirs", key, theirs, e);
	if (st == QB_OK && ours->size == theirs->size) {
		(void)snprintf(why, 200, "both heads have %" PRIu64 " leaves, and their roots differ", ours->size);
		if (hash_equal(&ours->root, &theirs->root))
			st = qb_fail(e, QB_NO, "evidence", NULL, "both heads are the same");
	} else if (st == QB_OK && theirs->size < ours->size) {
		st = prefix_differs(doc, ours, theirs, why, e);
	} else if (st == QB_OK) {
		(void)snprintf(why, 200, "the head that was signed later has fewer leaves: %" PRIu64 " after %" PRIu64,
		               ours->size, theirs->size);
		if (ours->time_gps_ns <= theirs->time_gps_ns)
			st = qb_fail(e, QB_NO, "evidence", "ask the service for its newest head and compare it",
			             "the larger head may be the newer one: by themselves the two prove nothing");
	}
	json_decref(doc);
	qb_free(pair);
	return st;
}
