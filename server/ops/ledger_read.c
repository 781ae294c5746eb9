/* The ledger as clients read it, cosignatures, and the rehearsal clock. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/internal.h"

#define ENTRIES_PER_PAGE 1000
#define COSIGNED_HEADS   256
#define PAGE_BYTES       ((size_t)8 << 20)

static enum qb_status add_cosigner(void *state, const uint8_t key_id[static 16], const uint8_t signature[static 64],
                                   struct qb_error *e)
{
	struct head_signature s;
	memcpy(s.key_id, key_id, 16);
	memcpy(s.signature, signature, 64);
	return head_add(state, &s, e);
}

enum qb_status head_with_cosignatures(struct ops *o, uint64_t size, struct buf *out, struct qb_error *e)
{
	struct head *h = QB_NEW(struct head);
	struct buf text = {0};
	enum qb_status st = store_head_get(o->store, size, &text, e);
	if (st == QB_OK)
		st = head_parse((const char *)text.data, text.len, h, e);
	if (st == QB_OK)
		st = store_cosignatures(o->store, size, add_cosigner, h, e);
	if (st == QB_OK)
		head_format(h, out);
	buf_free(&text);
	qb_free(h);
	return st;
}

/* The newest head that each custodian and analyst cosigned, each head once: what one client was shown, others see. */
static enum qb_status add_cosigned(struct ops *o, json_t *list, struct qb_error *e)
{
	uint64_t *sizes = QB_NEW_ARRAY(uint64_t, (size_t)o->view.n_parties);
	size_t n = 0;
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < o->view.n_parties && n < COSIGNED_HEADS; i++) {
		const struct view_party *p = o->view.party[i];
		uint64_t size = 0;
		if (p->role == ROLE_CUSTODIAN || p->role == ROLE_ANALYST)
			st = store_cosigned_newest(o->store, p->key_id, &size, e);
		bool known = size == 0;
		for (size_t k = 0; k < n; k++)
			known = known || sizes[k] == size;
		if (st != QB_OK || known)
			continue;
		struct buf text = {0};
		sizes[n++] = size;
		st = head_with_cosignatures(o, size, &text, e);
		if (st == QB_OK)
			json_array_append_new(list, json_string((const char *)text.data));
		buf_free(&text);
	}
	qb_free(sizes);
	return st;
}

enum qb_status case_head(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	struct buf head = {0};
	(void)c;
	(void)call;
	json_t *cosigned = json_array();
	enum qb_status st = head_with_cosignatures(o, o->size, &head, e);
	if (st == QB_OK)
		st = add_cosigned(o, cosigned, e);
	if (st == QB_OK) {
		reply->http_status = 200;
		reply->doc = json_object();
		json_object_set_new(reply->doc, "head", json_string((const char *)head.data));
		json_object_set(reply->doc, "cosigned", cosigned);
	}
	json_decref(cosigned);
	buf_free(&head);
	return st;
}

struct page {
	json_t *list;
	size_t bytes;
	uint64_t next;
};

static enum qb_status add_entry(void *state, uint64_t seq, const uint8_t *frame, size_t n,
                                const uint8_t leaf_hash[static 32], struct qb_error *e)
{
	struct page *p = state;
	(void)leaf_hash;
	(void)e;
	if (p->bytes > PAGE_BYTES)
		return QB_OK;
	char *text = base64_encode(frame, n);
	json_array_append_new(p->list, json_string(text));
	p->bytes += strlen(text);
	p->next = seq + 1;
	qb_free(text);
	return QB_OK;
}

enum qb_status case_entries(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e)
{
	int64_t from, limit;
	(void)c;
	if (!query_int(call->query, "from", 0, INT64_MAX, 0, &from) ||
	    !query_int(call->query, "limit", 1, ENTRIES_PER_PAGE, 500, &limit))
		return qb_fail(e, QB_RANGE, "query", "from=0.. and limit=1..1000", "is out of range");
	struct page p = {.list = json_array(), .next = (uint64_t)from};
	enum qb_status st = store_leaves(o->store, (uint64_t)from, (uint64_t)limit, add_entry, &p, e);
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "entries", p.list);
	json_object_set_new(reply->doc, "next", p.next < o->size ? json_integer((json_int_t)p.next) : json_null());
	return st;
}

static void reply_proof(struct ops_reply *reply, const struct tree_proof *proof)
{
	json_t *list = json_array();
	for (size_t i = 0; i < proof->n; i++)
		json_array_append_new(list, json_hex_new(proof->hash[i].b, 32));
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "hashes", list);
}

enum qb_status case_inclusion(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                              struct qb_error *e)
{
	int64_t seq, size;
	struct tree_array array;
	struct tree_proof proof;
	(void)c;
	if (!query_int(call->query, "seq", 0, (int64_t)o->size - 1, 0, &seq) ||
	    !query_int(call->query, "size", seq + 1, (int64_t)o->size, (int64_t)o->size, &size))
		return qb_fail(e, QB_RANGE, "query", "seq below size, size at most the ledger's", "is out of range");
	struct tree_leaves leaves = tree_from_array(&array, o->leaf, o->size);
	enum qb_status st = tree_inclusion(&leaves, (uint64_t)seq, (uint64_t)size, &proof, e);
	if (st == QB_OK)
		reply_proof(reply, &proof);
	return st;
}

enum qb_status case_consistency(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                                struct qb_error *e)
{
	int64_t first, second;
	struct tree_array array;
	struct tree_proof proof;
	(void)c;
	if (!query_int(call->query, "first", 1, (int64_t)o->size, 1, &first) ||
	    !query_int(call->query, "second", first, (int64_t)o->size, (int64_t)o->size, &second))
		return qb_fail(e, QB_RANGE, "query", "0 < first <= second <= the ledger's size", "is out of range");
	struct tree_leaves leaves = tree_from_array(&array, o->leaf, o->size);
	enum qb_status st = tree_consistency(&leaves, (uint64_t)first, (uint64_t)second, &proof, e);
	if (st == QB_OK)
		reply_proof(reply, &proof);
	return st;
}

enum qb_status case_cosign(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                           struct qb_error *e)
{
	static const char *const keys[] = {"size", "root", "signature", NULL};
	int64_t size;
	uint8_t root[32], signature[64];
	struct buf text = {0}, covered = {0};
	struct head *h = QB_NEW(struct head);
	(void)c;
	enum qb_status st = json_only(call->body, keys, "request", e);
	if (st == QB_OK)
		st = json_int(call->body, "size", "request", 1, (int64_t)o->size, &size, e);
	if (st == QB_OK)
		st = json_hex(call->body, "root", "request", root, 32, e);
	if (st == QB_OK)
		st = json_hex(call->body, "signature", "request", signature, 64, e);
	if (st == QB_OK)
		st = store_head_get(o->store, (uint64_t)size, &text, e);
	if (st == QB_OK)
		st = head_parse((const char *)text.data, text.len, h, e);
	if (st == QB_OK)
		head_signed_text(h, &covered);
	if (st == QB_OK && (memcmp(root, h->root.b, 32) != 0 ||
	                    !sign_verify(call->who->signing_key, covered.data, covered.len, signature)))
		st = qb_fail(e, QB_CRYPTO, "cosignature", "fetch the head again", "is not a signature under this head");
	if (st == QB_OK)
		st = store_begin(o->store, "cosign", e);
	if (st == QB_OK)
		st = store_cosignature_put(o->store, (uint64_t)size, call->who->key_id, signature, e);
	if (st == QB_OK)
		st = store_commit(o->store, e);
	store_rollback(o->store);
	if (st == QB_OK) {
		reply->http_status = 201;
		reply->doc = json_object();
		json_object_set_new(reply->doc, "size", json_integer(size));
	}
	buf_free(&text);
	buf_free(&covered);
	qb_free(h);
	return st;
}

enum qb_status case_clock(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                          struct qb_error *e)
{
	static const char *const keys[] = {"to_gps", NULL};
	int64_t to;
	char text[32];
	(void)c;
	enum qb_status st = json_only(call->body, keys, "request", e);
	if (st == QB_OK)
		st = json_gps(call->body, "to_gps", "request", &to, e);
	if (st == QB_OK && !o->rehearsal_clock)
		st = qb_fail(e, QB_REFUSED, "clock", NULL, "this service runs on the system clock");
	if (st == QB_OK && to < o->rehearsal_now_ns)
		st = qb_fail(e, QB_REFUSED, "clock", NULL, "a clock is never set back");
	if (st == QB_OK)
		st = store_begin(o->store, "clock", e);
	if (st == QB_OK)
		st = store_setting_put(o->store, "rehearsal-now", clock_gps_text(to, text, sizeof text), e);
	if (st == QB_OK)
		st = store_commit(o->store, e);
	store_rollback(o->store);
	if (st != QB_OK)
		return st;
	o->rehearsal_now_ns = to;
	pthread_cond_broadcast(&o->changed);
	for (int i = 0; st == QB_OK && i < o->view.n_campaigns; i++)
		st = campaign_due(o, o->view.campaign[i], e);
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "now_gps", json_gps_new(to));
	return st;
}
