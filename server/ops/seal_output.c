/* Reading what a sealer gave, and boxing slot keys. */
#include "server/ops/seal_output.h"

#include <string.h>

enum qb_status sealed_message_read(const struct buf *message, struct sealed_message *out, struct qb_error *e)
{
	struct cursor c = cursor_over(message->data, message->len);
	*out = (struct sealed_message){0};
	out->slot = cursor_i64(&c);
	out->commitment = cursor_take(&c, 64);
	out->boxed_key_n = cursor_u32(&c);
	out->boxed_key = cursor_take(&c, out->boxed_key_n);
	out->record_n = cursor_u32(&c);
	out->record = cursor_take(&c, out->record_n);
	out->recipes = c;
	if (c.bad || out->commitment == NULL || out->record == NULL)
		return qb_fail(e, QB_FORMAT, "sealing", NULL, "the sealer's message is malformed");
	return QB_OK;
}

bool sealed_message_recipe(struct sealed_message *m, uint8_t *station, uint8_t *place, const uint8_t **recipe,
                           uint32_t *n)
{
	if (m->recipes.bad || m->recipes.left == 0)
		return false;
	*station = cursor_u8(&m->recipes);
	*place = cursor_u8(&m->recipes);
	*n = cursor_u32(&m->recipes);
	*recipe = cursor_take(&m->recipes, *n);
	return !m->recipes.bad && *recipe != NULL;
}

static void address(const uint8_t campaign[static 16], int64_t slot, uint8_t ad[static 24])
{
	memcpy(ad, campaign, 16);
	le64_store(ad + 16, (uint64_t)slot);
}

enum qb_status slot_key_box(const uint8_t storage_point[static POINT_BYTES], const uint8_t campaign[static 16],
                            int64_t slot, const uint8_t key[static SLOT_KEY_BYTES], struct buf *out, struct qb_error *e)
{
	uint8_t ad[24];
	address(campaign, slot, ad);
	return box_seal(storage_point, "slot-key-at-rest", ad, sizeof ad, key, SLOT_KEY_BYTES, SLOT_KEY_BYTES, out, e);
}

enum qb_status slot_key_open(const struct secret *storage_key, const uint8_t campaign[static 16], int64_t slot,
                             const struct buf *boxed, struct secret **out, struct qb_error *e)
{
	uint8_t ad[24];
	struct buf key = {0};
	address(campaign, slot, ad);
	enum qb_status st = box_open(storage_key, "slot-key-at-rest", ad, sizeof ad, boxed->data, boxed->len, &key, e);
	if (st == QB_OK && key.len != SLOT_KEY_BYTES)
		st = qb_fail(e, QB_FAULT, "slot key", NULL, "has a bad length");
	if (st == QB_OK)
		*out = secret_from(key.data, key.len);
	buf_wipe(&key);
	return st;
}
