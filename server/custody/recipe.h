/*
 * Wrapped recipes: what one station's driver needs for one slot, sealed to a one-time prekey of that driver inside a
 * layer under the slot's key. Reading ahead needs both; the slot-key commitment keeps the service from swapping the
 * key.
 */
#ifndef QB_CUSTODY_RECIPE_H
#define QB_CUSTODY_RECIPE_H

#include "server/custody/keygen.h"

#define RECIPE_CONTENT_BYTES      4096 /* capacity; every wrapped recipe has the same size */
#define RECIPE_BYTES              (4 + 4 + 8 + 8 + 32 + 4 + RECIPE_CONTENT_BYTES + 16 + 16)
#define SLOT_KEY_BYTES            32
#define SLOT_KEY_COMMITMENT_BYTES 64

enum recipe_place { RECIPE_MAIN = 0, RECIPE_SPARE = 1, RECIPE_PLACES };

/* Which recipe: station is its position in the plan's network, from 0. */
struct recipe_address {
	uint64_t slot, station;
	enum recipe_place place;
};

/* T("quietbell/1/slot/key-commitment", campaign, slot, K_slot); its first half is the slot record's auxiliary field. */
void recipe_key_commitment(const uint8_t campaign[static CAMPAIGN_ID_BYTES], uint64_t slot,
                           const uint8_t slot_key[static SLOT_KEY_BYTES],
                           uint8_t out[static SLOT_KEY_COMMITMENT_BYTES]);
/* QB_CRYPTO unless slot_key is the committed one. */
enum qb_status recipe_key_check(const uint8_t campaign[static CAMPAIGN_ID_BYTES], uint64_t slot,
                                const uint8_t slot_key[static SLOT_KEY_BYTES],
                                const uint8_t commitment[static SLOT_KEY_COMMITMENT_BYTES],
                                struct qb_error *e) QB_MUST_USE;

/*
 * "QBY1" | place u32 | slot u64 | station u64 | outer ciphertext of ( R 32 | inner ciphertext of padded content )
 *
 * Given:    prekey            the driver's one-time point for this slot and place
 *           scalar            recipe scalar from the slot secret: used for this recipe only
 *           slot_key          K_slot
 *           content, n        at most RECIPE_CONTENT_BYTES
 * Returned: out               RECIPE_BYTES are appended
 * Errors:   QB_RANGE, QB_CRYPTO (prekey or scalar not ok)
 */
enum qb_status recipe_wrap(const uint8_t ctx[static 64], const struct recipe_address *at,
                           const uint8_t prekey[static POINT_BYTES], const uint8_t scalar[static SCALAR_BYTES],
                           const uint8_t slot_key[static SLOT_KEY_BYTES], const void *content, size_t n,
                           struct buf *out, struct qb_error *e) QB_MUST_USE;

/*
 * Given:    campaign, commitment   the slot-key commitment from the ledger: checked before anything is decrypted
 *           prekey_secret          scalar of the prekey
 * Returned: content                appended
 * Errors:   QB_FORMAT; QB_CRYPTO   wrong slot key, wrong prekey, altered, or another slot's, station's or place's
 */
enum qb_status recipe_unwrap(const uint8_t ctx[static 64], const uint8_t campaign[static CAMPAIGN_ID_BYTES],
                             const struct recipe_address *at, const uint8_t *p, size_t n,
                             const struct secret *prekey_secret, const uint8_t slot_key[static SLOT_KEY_BYTES],
                             const uint8_t commitment[static SLOT_KEY_COMMITMENT_BYTES], struct buf *content,
                             struct qb_error *e) QB_MUST_USE;

/* T("quietbell/1/recipe/hash", the wrapped recipe's bytes): this is in the truth record. */
void recipe_hash(const uint8_t *p, size_t n, uint8_t out[static 64]);

/* A fresh one-time prekey; the secret goes to the driver's own store and is erased after use. */
struct secret *recipe_prekey_new(uint8_t prekey[static POINT_BYTES]);

#endif
