/* The full opening: one partial opening per record, in the order of positions, by both cores. */
#include "client/cli/opening_join.h"

#include <stdio.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "client/cli/keygen.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/custody/batch.h"

#define RECORDS_MAX 4000000

static enum qb_status read_item(const json_t *j, struct sealed_item *out, struct qb_error *e)
{
	const char *text;
	int64_t type;
	const char *station = json_string_value(json_object_get(j, "station"));
	enum qb_status st = json_int(j, "position", "record", 0, INT64_MAX, &out->position, e);
	if (st == QB_OK)
		st = json_int(j, "slot", "record", -1, INT64_MAX, &out->slot, e);
	if (st == QB_OK)
		st = json_int(j, "type", "record", 0, RECORD_TYPES - 1, &type, e);
	if (st == QB_OK)
		st = json_str(j, "by", "record", &text, e);
	if (st != QB_OK)
		return st;
	out->type = (int)type;
	(void)snprintf(out->by, sizeof out->by, "%s", text);
	(void)snprintf(out->station, sizeof out->station, "%s", station != NULL ? station : "");
	if ((st = json_str(j, "record", "record", &text, e)) == QB_OK && !base64_decode(text, &out->bytes))
		st = qb_fail(e, QB_FORMAT, "record", NULL, "is not base64");
	return st;
}

enum qb_status items_fetch(struct cli_call *c, const struct campaign *k, struct sealed_items *out)
{
	json_int_t from = 0;
	enum qb_status st = QB_OK;
	*out = (struct sealed_items){0};
	while (st == QB_OK && from >= 0) {
		json_t *doc, *j;
		size_t i;
		char *path = text_printf("/v1/campaigns/%s/records?from=%lld&limit=200", k->name, (long long)from);
		st = link_get(&c->link, path, &doc, &c->error);
		qb_free(path);
		json_array_foreach(json_object_get(doc, "records"), i, j)
		{
			if (st != QB_OK || out->n >= RECORDS_MAX)
				break;
			if ((out->n & (out->n - 1)) == 0)
				out->item = qb_realloc(out->item, out->n > 0 ? 2 * out->n : 1, sizeof *out->item);
			out->item[out->n] = (struct sealed_item){0};
			st = read_item(j, &out->item[out->n++], &c->error);
		}
		const json_t *next = json_object_get(doc, "next");
		from = json_is_integer(next) ? json_integer_value(next) : -1;
		json_decref(doc);
	}
	return st;
}

const struct record **items_records(const struct sealed_items *items)
{
	const struct record **list = QB_NEW_ARRAY(const struct record *, items->n);
	for (size_t i = 0; i < items->n; i++)
		list[i] = &items->item[i].rec;
	return list;
}

void items_free(struct sealed_items *items)
{
	for (size_t i = 0; i < items->n; i++)
		buf_free(&items->item[i].bytes);
	qb_free(items->item);
	*items = (struct sealed_items){0};
}

static enum qb_status out_of_place(const struct sealed_item *x, struct qb_error *e)
{
	return qb_fail(e, QB_CRYPTO, "record", "do not open; tell the other custodians",
	               "the %s at position %lld is not the one that the ledger fixed",
	               record_type_word((enum record_type)x->type), (long long)x->position);
}

enum qb_status item_check(const struct campaign *k, const struct view *v, const struct custody_group *g,
                          struct sealed_item *x, struct qb_error *e)
{
	enum qb_status st = record_check(g, x->bytes.data, x->bytes.len, &x->rec, e);
	return st == QB_OK ? item_place(k, v, x, e) : st;
}

enum qb_status items_check(const struct custody_group *g, struct sealed_items *items, struct qb_error *e)
{
	const struct buf **bytes = QB_NEW_ARRAY(const struct buf *, items->n);
	struct record *rec = QB_NEW_ARRAY(struct record, items->n);
	for (size_t i = 0; i < items->n; i++)
		bytes[i] = &items->item[i].bytes;
	enum qb_status st = batch_records(g, bytes, items->n, 0, rec, NULL, e);
	for (size_t i = 0; st == QB_OK && i < items->n; i++)
		items->item[i].rec = rec[i];
	qb_free(bytes);
	qb_free(rec);
	return st;
}

enum qb_status item_place(const struct campaign *k, const struct view *v, const struct sealed_item *x,
                          struct qb_error *e)
{
	const struct record_header *h = &x->rec.header;
	if ((int)h->type != x->type || partial_full_purpose(h->type) == 0 || h->type == RECORD_CANARY)
		return out_of_place(x, e);
	if (h->type == RECORD_SEED)
		return memcmp(x->rec.id, k->seed_record_id, 64) == 0 ? QB_OK : out_of_place(x, e);
	if (h->type == RECORD_SLOT) {
		if (x->slot < 0 || x->slot >= k->n_slots || h->index != (uint64_t)x->slot ||
		    memcmp(x->rec.id, k->slot[x->slot].record_id, 64) != 0)
			return out_of_place(x, e);
		return QB_OK;
	}
	const struct view_party *author = view_party_by_id(v, h->author);
	if (author == NULL || strcmp(author->name, x->by) != 0 || campaign_role(k, author) == ROLE_NONE)
		return out_of_place(x, e);
	return QB_OK;
}

enum qb_status join_confirm(struct cli_call *c, const char *what)
{
	char line[16] = "";
	cli_note(c, "%s", what);
	if (cli_option(c, "yes") != NULL)
		return QB_OK;
	FILE *tty = fopen("/dev/tty", "r+");
	if (tty == NULL)
		return qb_fail(&c->error, QB_USAGE, NULL, "give --yes", "there is no terminal to ask on");
	fprintf(tty, "Open? Type yes: ");
	fflush(tty);
	bool yes = fgets(line, sizeof line, tty) != NULL && strcmp(line, "yes\n") == 0;
	fclose(tty);
	return yes ? QB_OK : qb_fail(&c->error, QB_REFUSED, "opening", NULL, "not opened: the answer was not yes");
}

static enum qb_status make_shares(struct cli_call *c, const struct custody_group *g, const struct sealed_items *items,
                                  const struct secret *share, uint32_t index, const uint8_t *leaf, uint8_t *out)
{
	const struct record **list = items_records(items);
	struct batch b = {.group = g, .record = list, .n = items->n};
	memcpy(b.leaf, leaf, 32);
	enum qb_status st = batch_make(&b, index, share, out, NULL, &c->error);
	qb_free(list);
	return st;
}

static enum qb_status send_shares(struct cli_call *c, const struct campaign *k, const struct opening *op,
                                  const uint8_t *shares, size_t count)
{
	uint8_t hash[64];
	char id[33], *text = base64_encode(shares, count * PARTIAL_BYTES);
	json_t *extra = json_object(), *more = json_object();
	hex_encode(id, op->id, 16);
	blake2b_512(hash, shares, count * PARTIAL_BYTES);
	json_object_set_new(extra, "opening", json_string(id));
	json_object_set_new(extra, "count", json_integer((json_int_t)count));
	json_object_set_new(extra, "shares_hash", json_hex_new(hash, 64));
	json_object_set_new(more, "shares", json_string(text));
	char *path = text_printf("/v1/campaigns/%s/openings/%s/shares", k->name, id);
	enum qb_status st =
	    cli_post_entry(c, path, "opening-shares", k->id, "the request was checked", extra, more, NULL);
	qb_free(path);
	qb_free(text);
	return st;
}

/* ---- prepared parts wait, encrypted, for the time to reveal ---- */

static enum qb_status prepared_path(struct cli_call *c, const struct campaign *k, const struct opening *op, char **out)
{
	char id[33], *name;
	hex_encode(id, op->id, 16);
	name = text_printf("prepared-%s.qbk", id);
	enum qb_status st = home_campaign_path(&c->home, k->id, name, out, &c->error);
	qb_free(name);
	return st;
}

static enum qb_status keep_prepared(struct cli_call *c, const char *path, const uint8_t *shares, size_t n)
{
	struct secret *payload = secret_from(shares, n);
	enum qb_status st =
	    keyfile_write(path, KEYFILE_OTHER, c->link.rehearsal ? KEYFILE_INTERACTIVE : KEYFILE_MODERATE,
	                  c->home.passphrase, payload, &c->error);
	secret_free(&payload);
	return st;
}

static enum qb_status hand_over(struct cli_call *c, const struct campaign *k, const struct opening *op,
                                const char *path)
{
	struct secret *payload = NULL;
	struct keyfile_info info;
	enum qb_status st =
	    keyfile_read(path, KEYFILE_OTHER, c->home.passphrase, c->link.rehearsal, &payload, &info, &c->error);
	if (st == QB_OK && info.payload_bytes % PARTIAL_BYTES != 0)
		st = qb_fail(&c->error, QB_FORMAT, path, "remove it and join again", "holds no partial openings");
	if (st == QB_OK)
		st = send_shares(c, k, op, secret_view(payload), info.payload_bytes / PARTIAL_BYTES);
	if (st == QB_OK) {
		(void)unlink(path);
		cli_print(c, "%s gave partial openings of %zu records\n", c->home.name,
		          info.payload_bytes / PARTIAL_BYTES);
	}
	secret_free(&payload);
	return st;
}

/* Waits on the service's clock, which alone decides when the time has come. */
static enum qb_status wait_for_reveal(struct cli_call *c, int64_t reveal_ns)
{
	struct timespec pause = {0, 200000000};
	enum qb_status st = QB_OK;
	while (st == QB_OK && c->link.now_gps_ns < reveal_ns) {
		json_t *doc = NULL;
		nanosleep(&pause, NULL);
		st = link_get(&c->link, "/v1/service", &doc, &c->error);
		if (st == QB_OK)
			st = json_gps(doc, "now_gps", "service", &c->link.now_gps_ns, &c->error);
		json_decref(doc);
	}
	return st;
}

/* Before the time to reveal everything is checked and computed, but nothing leaves this machine. */
static enum qb_status reveal_or_wait(struct cli_call *c, const struct campaign *k, const struct opening *op, char *path)
{
	char when[CLOCK_PEOPLE_TEXT];
	if (c->link.now_gps_ns >= op->reveal_ns)
		return hand_over(c, k, op, path);
	cli_print(c, "%s is prepared; the parts are handed over at %s\n", c->home.name,
	          clock_people_text(op->reveal_ns, when, sizeof when));
	(void)fflush(stdout);
	if (cli_option(c, "wait") == NULL) {
		cli_note(c, "Join again at that time, or use --wait.\n");
		return QB_OK;
	}
	enum qb_status st = wait_for_reveal(c, op->reveal_ns);
	return st == QB_OK ? hand_over(c, k, op, path) : st;
}

/* The seed and every slot once, and as many notes and reports as the ledger has: what is left out would stay shut. */
static enum qb_status check_whole(struct cli_call *c, const struct campaign *k, const struct sealed_items *items)
{
	int64_t seeds = 0, slots = 0, filed = 0, entered = 0;
	bool *seen = QB_NEW_ARRAY(bool, (size_t)k->n_slots);
	for (size_t i = 0; i < items->n; i++) {
		const struct record_header *h = &items->item[i].rec.header;
		seeds += h->type == RECORD_SEED;
		filed += h->type == RECORD_PLAY_NOTE || h->type == RECORD_PLAY_REPORT;
		if (h->type == RECORD_SLOT && !seen[h->index]) {
			seen[h->index] = true;
			slots++;
		}
	}
	qb_free(seen);
	for (int64_t n = 0; n < k->n_slots; n++) {
		for (int s = 0; s < k->plan->network->n_stations; s++)
			entered += k->slot[n].notes[s] + (k->slot[n].reported >> s & 1);
	}
	if (seeds == 1 && slots == k->n_slots && filed == entered)
		return QB_OK;
	return qb_fail(&c->error, QB_CRYPTO, "records", "do not open; tell the other custodians",
	               "the service shows %lld of %lld slots, %lld seeds, and %lld of %lld notes and reports",
	               (long long)slots, (long long)k->n_slots, (long long)seeds, (long long)filed, (long long)entered);
}

static enum qb_status compute(struct cli_call *c, struct campaign *k, const struct opening *op, const char *path)
{
	struct custody_group *g = QB_NEW(struct custody_group);
	struct sealed_items items = {0};
	struct secret *share = NULL;
	uint8_t *shares = NULL;
	char what[400];
	enum qb_status st = campaign_certified_group(k, g, &c->error);
	if (st == QB_OK && k->state < C_CLOSED)
		st = qb_fail(&c->error, QB_REFUSED, "opening", NULL, "the ledger has no closing before this request");
	if (st == QB_OK)
		st = items_fetch(c, k, &items);
	if (st == QB_OK)
		st = items_check(g, &items, &c->error);
	for (size_t i = 0; st == QB_OK && i < items.n; i++)
		st = item_place(k, &c->follow.view, &items.item[i], &c->error);
	if (st == QB_OK)
		st = check_whole(c, k, &items);
	if (st == QB_OK) {
		const struct view_party *asker = view_party_by_id(&c->follow.view, op->asker);
		(void)snprintf(what, sizeof what,
		               "Full opening of %s, asked for by %s: %zu records, every slot, claim and report. This "
		               "ends the blind.\n",
		               k->name, asker != NULL ? asker->name : "?", items.n);
		st = join_confirm(c, what);
	}
	if (st == QB_OK)
		st = cli_share(c, k, g, &share);
	if (st == QB_OK) {
		shares = qb_alloc(items.n, PARTIAL_BYTES);
		st = make_shares(c, g, &items, share, (uint32_t)custodian_index(k, c->home.name) + 1, op->authority,
		                 shares);
	}
	if (st == QB_OK && c->link.now_gps_ns >= op->reveal_ns) {
		st = send_shares(c, k, op, shares, items.n);
		if (st == QB_OK)
			cli_print(c, "%s gave partial openings of %zu records\n", c->home.name, items.n);
	} else if (st == QB_OK) {
		st = keep_prepared(c, path, shares, items.n * PARTIAL_BYTES);
	}
	if (shares != NULL)
		wipe(shares, items.n * PARTIAL_BYTES);
	secret_free(&share);
	items_free(&items);
	qb_free(shares);
	qb_free(g);
	return st;
}

enum qb_status join_full(struct cli_call *c, struct campaign *k, const struct opening *op)
{
	char *path = NULL;
	bool at_once = c->link.now_gps_ns >= op->reveal_ns;
	enum qb_status st = prepared_path(c, k, op, &path);
	if (st != QB_OK)
		return st;
	bool prepared = access(path, F_OK) == 0;
	if (!prepared)
		st = compute(c, k, op, path);
	if (st == QB_OK && (prepared || !at_once))
		st = reveal_or_wait(c, k, op, path);
	qb_free(path);
	return st;
}
