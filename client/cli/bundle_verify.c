/*
 * The checks of what stands in a bundle: ledger, head, key, records, hidden entries, openings. The list that they are
 * on is in bundle_checklist.c, the order of the steps in bundle_order.c, what follows from the seed in bundle_redraw.c.
 */
#include "client/cli/bundle_verify.h"

#include <inttypes.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/custody/batch.h"
#include "server/base/text.h"

static enum qb_status no(struct qb_error *e, const char *what)
{
	return qb_fail(e, QB_NO, "bundle", "do not rely on it; ask the custodians for their mirrors", "%s", what);
}

/* What the file says about itself: cheap, and it finds nearly every accident before a signature is looked at. */
enum qb_status verify_fingerprints(struct verified *v, struct qb_error *e)
{
	const struct bundle *b = v->bundle;
	static const size_t field[] = {RECORD_HEADER_BYTES, POINT_BYTES, POINT_BYTES, SCALAR_BYTES, SCALAR_BYTES};
	struct head *h = QB_NEW(struct head);
	struct tree_range range = {0};
	struct ledger_hash leaf, root;
	enum qb_status st = head_parse((const char *)b->head.data, b->head.len, h, e);
	for (uint64_t i = 0; i < b->n_frames; i++) {
		hash_leaf(&leaf, b->frame[i].data, b->frame[i].len);
		tree_append(&range, &leaf);
	}
	tree_root(&range, &root);
	if (st == QB_OK && (h->size != b->n_frames || !hash_equal(&root, &h->root)))
		st = no(e, "the leaves do not have the root of the signed head");
	for (size_t i = 0; st == QB_OK && i < b->records.n; i++) {
		const struct buf *x = &b->records.item[i].bytes;
		struct transcript t;
		uint8_t id[64];
		size_t at = 0;
		transcript_begin(&t, "quietbell/1/record/id");
		for (size_t f = 0; f < sizeof field / sizeof field[0] && at + field[f] <= x->len; at += field[f++])
			transcript_field(&t, x->data + at, field[f]);
		transcript_field(&t, x->data + at, x->len - at);
		transcript_end(&t, id);
		if (memcmp(id, b->record_id[i], 64) != 0)
			st = no(e, "a record is not the one that is listed");
	}
	verify_note(v, "the root of %" PRIu64 " entries, %zu records", b->n_frames, b->records.n);
	qb_free(h);
	return st;
}

enum qb_status verify_ledger(struct verified *v, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (uint64_t i = 0; st == QB_OK && i < v->bundle->n_frames; i++)
		st = follow_take(&v->follow, v->bundle->frame[i].data, v->bundle->frame[i].len, e);
	char id[33];
	hex_encode(id, v->bundle->campaign, 16);
	v->k = st == QB_OK ? view_campaign(&v->follow.view, id) : NULL;
	verify_note(v, "%" PRIu64 " entries of %d parties", v->follow.n, v->follow.view.n_parties);
	return st == QB_OK && v->k == NULL ? no(e, "the ledger does not have the bundle's campaign") : st;
}

static void add_name(char list[static 200], const char *name)
{
	size_t n = strlen(list);
	(void)snprintf(list + n, 200 - n, "%s%s", n > 0 ? ", " : "", name);
}

enum qb_status verify_head(struct verified *v, struct qb_error *e)
{
	struct head *h = QB_NEW(struct head);
	struct ledger_hash root;
	size_t valid = 0;
	bool counted[CUSTODY_MAX] = {false};
	char names[200] = "";
	enum qb_status st = head_parse((const char *)v->bundle->head.data, v->bundle->head.len, h, e);
	if (st == QB_OK)
		st = head_verify(h, v->follow.view.service_key, NULL, 0, NULL, e);
	/*
	 * Other people's cosignatures are checked too: an altered line is refused, whoever it is said to be from. A
	 * custodian counts once, whichever of his keys he had at the time.
	 */
	for (size_t i = 0; st == QB_OK && i < h->n_cosigners; i++) {
		const struct view_party *p = view_party_by_id(&v->follow.view, h->cosigner[i].key_id);
		struct buf text = {0};
		head_signed_text(h, &text);
		const uint8_t *key = view_signing_key(&v->follow.view, h->cosigner[i].key_id);
		if (p == NULL || !sign_verify(key, text.data, text.len, h->cosigner[i].signature))
			st = no(e, "a cosignature is false");
		int who = st == QB_OK ? custodian_index(v->k, p->name) : -1;
		if (who >= 0 && !counted[who]) {
			counted[who] = true;
			valid++;
			add_name(names, p->name);
		}
		buf_free(&text);
	}
	tree_root(&v->follow.range, &root);
	if (st == QB_OK && (h->size != v->follow.n || !hash_equal(&root, &h->root)))
		st = no(e, "the leaves do not have the root of the signed head");
	if (st == QB_OK && valid < head_quorum((size_t)v->k->n))
		st = no(e, "too few custodians cosigned the head");
	verify_note(v, "%zu of %d custodians signed (%s), %zu are needed", valid, v->k->n, names,
	            head_quorum((size_t)v->k->n));
	qb_free(h);
	return st;
}

enum qb_status verify_key(struct verified *v, struct qb_error *e)
{
	enum qb_status st = campaign_certified_group(v->k, &v->group, e);
	verify_note(v, "%d custodians, %d needed; key generations that failed before: %d; resharings: %d", v->k->n,
	            v->k->k, v->k->n_failures, (int)v->k->epoch - 1);
	return st;
}

static int compare_ids(const void *a, const void *b)
{
	return memcmp(a, b, 64);
}

/* The ids of records that public entries of these types, or published hidden entries, name. */
struct ids {
	uint8_t (*id)[64];
	size_t n;
};

static void ids_add(struct ids *x, const struct wire_entry *en)
{
	if ((x->n & (x->n - 1)) == 0)
		x->id = qb_realloc(x->id, x->n > 0 ? 2 * x->n : 1, 64);
	wire_entry_hex(en, "record_id", x->id[x->n++], 64);
}

static enum qb_status filed_ids(const struct verified *v, struct ids *out, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	*out = (struct ids){0};
	for (uint64_t i = 0; st == QB_OK && i < v->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		st = entry_decode(v->follow.frame[i].data, v->follow.frame[i].len, &leaf, e);
		if (st != QB_OK || leaf.kind == ENTRY_HIDDEN)
			continue;
		if ((st = wire_entry_parse((const char *)leaf.body, leaf.body_len, &en, e)) != QB_OK)
			continue;
		if (en.has_campaign && memcmp(en.campaign, v->k->id, 16) == 0 &&
		    (strcmp(en.type->type, "play-note") == 0 || strcmp(en.type->type, "play-report") == 0))
			ids_add(out, &en);
		wire_entry_free(&en);
	}
	for (size_t i = 0; st == QB_OK && i < v->bundle->n_hidden; i++) {
		struct wire_entry en;
		st = wire_entry_parse((const char *)v->bundle->hidden[i].entry.data, v->bundle->hidden[i].entry.len,
		                      &en, e);
		if (st == QB_OK && json_object_get(en.doc, "record_id") != NULL)
			ids_add(out, &en);
		if (st == QB_OK)
			wire_entry_free(&en);
	}
	if (out->n > 0)
		qsort(out->id, out->n, 64, compare_ids);
	return st;
}

/* Every record is the one that the ledger fixed, and every one that the ledger fixed is there. */
enum qb_status verify_records(struct verified *v, struct qb_error *e)
{
	struct ids filed;
	int64_t slots = 0, others = 0, seeds = 0, notes = 0;
	enum qb_status st = filed_ids(v, &filed, e);
	if (st == QB_OK)
		st = items_check(&v->group, &v->bundle->records, e);
	for (size_t i = 0; st == QB_OK && i < v->bundle->records.n; i++) {
		struct sealed_item *x = &v->bundle->records.item[i];
		const struct view_party *p = view_party_by_id(&v->follow.view, v->bundle->author[i]);
		(void)snprintf(x->by, sizeof x->by, "%s", p != NULL ? p->name : "service");
		st = item_place(v->k, &v->follow.view, x, e);
		if (st == QB_OK && (memcmp(x->rec.id, v->bundle->record_id[i], 64) != 0 ||
		                    memcmp(x->rec.header.author, v->bundle->author[i], 16) != 0))
			st = no(e, "a record's listed id or author is not its own");
		if (st != QB_OK)
			break;
		bool own = x->rec.header.type == RECORD_SLOT || x->rec.header.type == RECORD_SEED;
		bool note = x->rec.header.type == RECORD_PLAY_NOTE || x->rec.header.type == RECORD_PLAY_REPORT;
		if (!own && (filed.n == 0 || bsearch(x->rec.id, filed.id, filed.n, 64, compare_ids) == NULL))
			st = no(e, "a record was never entered in the ledger");
		uint64_t station = x->rec.header.index / 16 % 16;
		if (st == QB_OK && note &&
		    ((int64_t)(x->rec.header.index / 256) != x->slot ||
		     station >= (uint64_t)v->k->plan->network->n_stations ||
		     strcmp(v->k->plan->network->stations[station].name, x->station) != 0))
			st = no(e, "a note or report stands under another slot or station");
		if (st == QB_OK && !note &&
		    (x->station[0] != '\0' || (!own && x->slot != -1) ||
		     (x->rec.header.type == RECORD_SEED && x->slot != -1)))
			st = no(e, "a record stands under a slot or station that is not its own");
		slots += x->rec.header.type == RECORD_SLOT;
		seeds += x->rec.header.type == RECORD_SEED;
		others += !own;
		notes += note;
	}
	if (st == QB_OK && (slots != v->k->n_slots || seeds != 1 || others != (int64_t)filed.n))
		st = no(e, "records that the ledger fixed are missing, or stand twice");
	verify_note(v, "%" PRId64 " slots, the seed, %" PRId64 " notes and reports of drivers, %" PRId64 " others",
	            slots, notes, others - notes);
	qb_free(filed.id);
	return st;
}

static enum qb_status check_one_hidden(struct verified *v, const struct bundle_hidden *h, struct qb_error *e)
{
	uint8_t commitment[64];
	struct entry leaf;
	struct wire_entry en;
	struct entry_promise p = {.received_gps_ns = h->received_gps_ns, .batch_due_gps_ns = h->due_gps_ns};
	const struct view_party *author = view_party_by_id(&v->follow.view, h->author);
	entry_hide(h->nonce, h->entry.data, h->entry.len, commitment);
	memcpy(p.campaign, v->k->id, 16);
	memcpy(p.commitment, h->commitment, 64);
	memcpy(p.signature, h->promise, 64);
	if (memcmp(commitment, h->commitment, 64) != 0 || h->seq < 0 || (uint64_t)h->seq >= v->follow.n ||
	    author == NULL)
		return no(e, "a hidden entry is not what its commitment hides");
	enum qb_status st = entry_decode(v->follow.frame[h->seq].data, v->follow.frame[h->seq].len, &leaf, e);
	if (st == QB_OK && (leaf.kind != ENTRY_HIDDEN || memcmp(leaf.body, commitment, 64) != 0))
		st = no(e, "a hidden entry's commitment is not in the ledger where it should be");
	if (st == QB_OK && (h->seq >= v->k->closing_seq || leaf.received_gps_ns < h->received_gps_ns))
		st = no(e, "a hidden entry came after the closing, or stands in the ledger before it was received");
	if (st == QB_OK)
		st = entry_promise_verify(&p, v->follow.view.service_key, e);
	if (st == QB_OK &&
	    !entry_verify_body(view_signing_key(&v->follow.view, h->author), h->entry.data, h->entry.len, h->signature))
		st = no(e, "a hidden entry's signature is not its author's");
	if (st == QB_OK && (st = wire_entry_parse((const char *)h->entry.data, h->entry.len, &en, e)) == QB_OK) {
		if (strcmp(en.by, author->name) != 0 || memcmp(en.campaign, v->k->id, 16) != 0 || !en.type->hidden ||
		    (en.type->roles & ROLE_BIT(campaign_role_then(v->k, author, h->received_gps_ns))) == 0)
			st = no(e, "a hidden entry's author may not author it");
		wire_entry_free(&en);
	}
	return st;
}

static int by_seq(const void *a, const void *b)
{
	const struct bundle_hidden *const *x = a, *const *y = b;
	return ((*x)->seq > (*y)->seq) - ((*x)->seq < (*y)->seq);
}

/* None is left out: at the closing the service fixed how many there are, and which. */
enum qb_status verify_hidden(struct verified *v, struct qb_error *e)
{
	size_t n = v->bundle->n_hidden;
	const struct bundle_hidden **sorted = QB_NEW_ARRAY(const struct bundle_hidden *, n);
	uint8_t(*commitments)[64] = qb_alloc(n, 64), hash[64];
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < n; i++) {
		sorted[i] = &v->bundle->hidden[i];
		st = check_one_hidden(v, sorted[i], e);
	}
	if (st == QB_OK && n > 0)
		qsort(sorted, n, sizeof *sorted, by_seq);
	for (size_t i = 0; st == QB_OK && i < n; i++)
		memcpy(commitments[i], sorted[i]->commitment, 64);
	view_hidden_summary((const uint8_t(*)[64])commitments, n, hash);
	if (st == QB_OK && (v->k->hidden_count != (int64_t)n || memcmp(hash, v->k->hidden_hash, 64) != 0))
		st = no(e, "hidden entries that were fixed at the closing are missing, or there are others");
	verify_note(v, "%zu entries, as many as were fixed at the closing", n);
	qb_free(sorted);
	qb_free(commitments);
	return st;
}

/* Prekeys and recipes against the hashes that were entered before anything was played. */
enum qb_status verify_recipes(struct verified *v, struct qb_error *e)
{
	struct transcript all;
	uint8_t sealed[64], hash[64], want[64];
	size_t prekeys = 0, first = 0, end = 0;
	enum qb_status st = QB_OK;
	transcript_begin(&all, "quietbell/1/recipe/all");
	for (int64_t n = 0; n < v->k->n_slots; n++, first = end) {
		while (end < v->bundle->n_recipes && v->bundle->recipe[end].slot == n)
			end++;
		/* the sealer's order: station of the network, then place; the table is sorted by name */
		for (int i = 0; i < v->k->plan->network->n_stations; i++) {
			for (size_t r = first; r < end; r++) {
				const struct bundle_blob *x = &v->bundle->recipe[r];
				if (strcmp(x->name, v->k->plan->network->stations[i].name) == 0)
					transcript_field(&all, x->bytes.data, x->bytes.len);
			}
		}
	}
	transcript_end(&all, sealed);
	if (end != v->bundle->n_recipes)
		return no(e, "there are recipes of slots that the campaign does not have");
	for (uint64_t i = 0; st == QB_OK && i < v->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		if (follow_entry(&v->follow, i, &leaf, &en, NULL) != QB_OK)
			continue;
		bool ours = en.has_campaign && memcmp(en.campaign, v->k->id, 16) == 0;
		if (ours && strcmp(en.type->type, "sealed") == 0) {
			wire_entry_hex(&en, "recipes_hash", want, 64);
			if (memcmp(sealed, want, 64) != 0)
				st = no(e, "the recipes are not those that were sealed");
		}
		if (ours && strcmp(en.type->type, "prekeys") == 0) {
			for (size_t p = 0; p < v->bundle->n_prekeys; p++) {
				const struct bundle_blob *x = &v->bundle->prekey[p];
				if (strcmp(x->name, wire_entry_text(&en, "station")) != 0 ||
				    x->place != wire_entry_int(&en, "place"))
					continue;
				blake2b_512(hash, x->bytes.data, x->bytes.len);
				wire_entry_hex(&en, "points_hash", want, 64);
				if (memcmp(hash, want, 64) != 0)
					st = no(e, "one-time keys are not those that a driver left");
				prekeys++;
			}
		}
		wire_entry_free(&en);
	}
	verify_note(v, "%zu recipes, %zu lists of one-time keys", v->bundle->n_recipes, v->bundle->n_prekeys);
	return st == QB_OK && prekeys != v->bundle->n_prekeys ? no(e, "one-time keys that no driver left") : st;
}

/* Who sealed something that nobody can open, under a proof that holds. */
static void note_shut(struct verified *v)
{
	size_t shut = 0, at;
	for (size_t r = 0; r < v->bundle->records.n; r++)
		shut += !v->opens[r];
	if (shut == 0)
		return;
	at = strlen(v->note);
	(void)snprintf(v->note + at, sizeof v->note - at,
	               "; %zu of %zu records were sealed so that nothing opens them:", shut, v->bundle->records.n);
	for (size_t r = 0; r < v->bundle->records.n; r++) {
		const struct sealed_item *x = &v->bundle->records.item[r];
		at = strlen(v->note);
		if (!v->opens[r])
			(void)snprintf(v->note + at, sizeof v->note - at, " a %s by %s;",
			               record_type_word((enum record_type)x->type), x->by);
	}
	at = strlen(v->note);
	v->note[at - 1] = v->note[at - 1] == ';' ? '\0' : v->note[at - 1];
}

static bool is_entered(const struct bundle_blob *set, const struct wire_entry *en)
{
	uint8_t hash[64], entered[64];
	blake2b_512(hash, set->bytes.data, set->bytes.len);
	wire_entry_hex(en, "shares_hash", entered, 64);
	return memcmp(hash, entered, 64) == 0;
}

/* k custodians' partial openings, each with its proof, combined; the contents must hash to what was announced. */
enum qb_status verify_opening(struct verified *v, struct qb_error *e)
{
	const struct bundle_blob *set[CUSTODY_MAX];
	size_t n = 0, records = v->bundle->records.n;
	struct transcript t;
	struct batch_set share[CUSTODY_MAX];
	uint8_t hash[64], given[64];
	char names[200] = "";
	for (int i = 0; i < v->k->n_openings; i++) {
		if (v->k->opening[i].scope == SCOPE_FULL && v->k->opening[i].opened)
			v->opening = &v->k->opening[i];
	}
	if (v->opening == NULL)
		return no(e, "the campaign was not opened");
	for (size_t i = 0; i < v->bundle->n_shares; i++) {
		const struct bundle_blob *x = &v->bundle->share[i];
		if (memcmp(x->opening, v->opening->id, 16) != 0 || custodian_index(v->k, x->name) < 0 ||
		    x->bytes.len != records * PARTIAL_BYTES || n == CUSTODY_MAX)
			return no(e, "a set of partial openings is of another opening or incomplete");
		set[n++] = x;
		add_name(names, x->name);
	}
	if (n < (size_t)v->k->k)
		return no(e, "too few custodians opened");
	v->content = QB_NEW_ARRAY(struct buf, records);
	v->opens = QB_NEW_ARRAY(bool, records);
	const struct record **list = items_records(&v->bundle->records);
	struct batch b = {.group = &v->group, .record = list, .n = records};
	memcpy(b.leaf, v->opening->authority, 32);
	for (size_t i = 0; i < n; i++)
		share[i] = (struct batch_set){(uint32_t)custodian_index(v->k, set[i]->name) + 1, set[i]->bytes.data};
	enum qb_status st = batch_open(&b, share, n, v->content, v->opens, NULL, e);
	qb_free(list);
	transcript_begin(&t, "quietbell/1/opening/plaintexts");
	for (size_t r = 0; st == QB_OK && r < records; r++) {
		partial_content_hash(&v->content[r], v->opens[r], hash);
		transcript_field(&t, v->bundle->records.item[r].rec.id, 64);
		transcript_field(&t, hash, 64);
	}
	transcript_end(&t, hash);
	for (uint64_t i = 0; st == QB_OK && i < v->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		if (follow_entry(&v->follow, i, &leaf, &en, NULL) != QB_OK)
			continue;
		bool ours = en.has_campaign && memcmp(en.campaign, v->k->id, 16) == 0;
		if (ours && strcmp(en.type->type, "opened") == 0) {
			wire_entry_hex(&en, "plaintexts_hash", given, 64);
			if (memcmp(hash, given, 64) != 0)
				st = no(e, "the contents are not those that the service announced");
		}
		for (size_t j = 0; ours && strcmp(en.type->type, "opening-shares") == 0 && j < n; j++) {
			if (strcmp(set[j]->name, en.by) == 0 && !is_entered(set[j], &en))
				st = no(e, "partial openings are not those that their custodian entered");
		}
		wire_entry_free(&en);
	}
	verify_note(v, "%zu partial openings by %zu custodians (%s), %d are needed", n * records, n, names, v->k->k);
	note_shut(v);
	return st;
}

enum qb_status verify_sealer(struct verified *v, struct qb_error *e)
{
	if (!v->k->plan->has_sealer_host) {
		verify_note(v, "the plan names no machine for it: it ran on the service's own");
		return QB_OK;
	}
	verify_note(v, "two signatures of the machine that the plan names");
	if (!v->k->host_signed_key || !v->k->host_signed_output)
		return no(e, v->k->host_signed_key ? "the plan's sealer host did not sign what was sealed"
		                                   : "the plan's sealer host did not sign the sealer's key");
	return QB_OK;
}
