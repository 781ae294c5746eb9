/* Recipes, slot keys and what follows from them; see fetch.h. */
#include "client/agent/fetch.h"

#include <string.h>

#include "client/agent/watch.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

static enum qb_status fetch_recipe(struct driver *d, int64_t slot, struct buf *out, struct qb_error *e)
{
	json_t *doc = NULL;
	const char *text;
	char *path = text_printf("/v1/campaigns/%s/recipes/%lld", d->campaign->name, (long long)slot);
	enum qb_status st = link_get(&d->link, path, &doc, e);
	if (st == QB_OK)
		st = json_str(doc, "recipe", "recipe", &text, e);
	buf_clear(out);
	if (st == QB_OK && (!base64_decode(text, out) || out->len != RECIPE_BYTES))
		st = qb_fail(e, QB_FORMAT, path, NULL, "the service's recipe does not have the length of a recipe");
	if (st == QB_OK)
		watch_contact(d);
	json_decref(doc);
	qb_free(path);
	return st;
}

enum qb_status fetch_ahead(struct driver *d, int64_t from, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	int64_t to = from + DRIVER_READY_AHEAD;
	if (to > d->campaign->n_slots)
		to = d->campaign->n_slots;
	if (d->ready_to < from)
		d->ready_to = from;
	while (st == QB_OK && d->ready_to < to && watch_observing(d->opt.state_file)) {
		st = fetch_recipe(d, d->ready_to, &d->recipe[d->ready_to % DRIVER_READY_AHEAD], e);
		if (st == QB_OK)
			d->ready_to++;
	}
	return st;
}

static enum qb_status fetch_key(struct driver *d, int64_t slot, uint8_t key[static SLOT_KEY_BYTES], struct qb_error *e)
{
	json_t *doc = NULL;
	char *path = text_printf("/v1/campaigns/%s/recipes/%lld/key", d->campaign->name, (long long)slot);
	enum qb_status st = link_get(&d->link, path, &doc, e);
	if (st == QB_OK)
		st = json_hex(doc, "key", "slot key", key, SLOT_KEY_BYTES, e);
	/* jansson's copy of the digits goes too. */
	json_t *digits = json_object_get(doc, "key");
	if (json_is_string(digits))
		wipe((char *)(uintptr_t)json_string_value(digits), json_string_length(digits));
	json_decref(doc);
	qb_free(path);
	return st;
}

static enum qb_status unwrap(struct driver *d, int64_t slot, const uint8_t key[static SLOT_KEY_BYTES],
                             struct drill_recipe *out, struct qb_error *e)
{
	const struct recipe_address at = {.slot = (uint64_t)slot, .station = (uint64_t)d->station, .place = d->place};
	const struct buf *wrapped = &d->recipe[slot % DRIVER_READY_AHEAD];
	struct secret *prekey = NULL;
	struct buf content = {0};
	enum qb_status st = prekeys_take(d->prekeys, slot, &d->home.key, &prekey, e);
	if (st == QB_OK)
		st = recipe_unwrap(d->group.ctx, d->group.campaign, &at, wrapped->data, wrapped->len, prekey, key,
		                   d->campaign->slot[slot].slot_key_commitment, &content, e);
	if (st == QB_OK)
		st = drill_recipe_decode(content.data, content.len, out, e);
	if (st == QB_OK)
		st = drive_check_recipe(out, d->campaign->id, d->campaign->plan, slot, d->station, e);
	secret_free(&prekey);
	buf_wipe(&content);
	return st;
}

enum qb_status fetch_drive(struct driver *d, int64_t slot, struct drive *out, struct qb_error *e)
{
	struct drill_recipe recipe;
	uint8_t key[SLOT_KEY_BYTES];
	enum qb_status st = fetch_key(d, slot, key, e);
	if (st != QB_OK)
		return st;
	watch_contact(d);
	if (slot >= d->ready_to)
		st = qb_fail(e, QB_REFUSED, NULL, NULL, "the recipe was not fetched");
	if (st == QB_OK)
		st = unwrap(d, slot, key, &recipe, e);
	if (st == QB_OK)
		st = drive_make(&recipe, d->campaign->plan, d->station, out, e);
	wipe(key, sizeof key);
	wipe(&recipe, sizeof recipe);
	return st == QB_CONFLICT || st == QB_UNREACHABLE ? QB_FAULT : st;
}
