/*
 * What a sealer gives for one slot, as both of its ends read it; and slot keys at rest. The key is boxed to the
 * service's storage key inside the sealer already, bound to campaign and slot, so that it is never in the clear between
 * the two.
 */
#ifndef QB_OPS_SEAL_OUTPUT_H
#define QB_OPS_SEAL_OUTPUT_H

#include "server/base/buf.h"
#include "server/base/err.h"
#include "server/base/secret.h"
#include "server/custody/box.h"
#include "server/custody/recipe.h"

/* The body of a SEALER_RECORD; pointers are into the message. */
struct sealed_message {
	int64_t slot; /* -1: the seed record */
	const uint8_t *commitment, *boxed_key, *record;
	uint32_t boxed_key_n, record_n;
	struct cursor recipes;
};
enum qb_status sealed_message_read(const struct buf *message, struct sealed_message *out,
                                   struct qb_error *e) QB_MUST_USE;
/* The next recipe; false at the end, or when the rest is malformed (then m->recipes.bad). */
bool sealed_message_recipe(struct sealed_message *m, uint8_t *station, uint8_t *place, const uint8_t **recipe,
                           uint32_t *n);

enum qb_status slot_key_box(const uint8_t storage_point[static POINT_BYTES], const uint8_t campaign[static 16],
                            int64_t slot, const uint8_t key[static SLOT_KEY_BYTES], struct buf *out,
                            struct qb_error *e) QB_MUST_USE;
enum qb_status slot_key_open(const struct secret *storage_key, const uint8_t campaign[static 16], int64_t slot,
                             const struct buf *boxed, struct secret **out, struct qb_error *e) QB_MUST_USE;

#endif
