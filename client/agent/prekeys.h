/*
 * A driver's one-time keys: one scalar a slot in one file, each encrypted to the driver's own exchange key at a fixed
 * place, so that the private half of a past slot can be overwritten alone. Whoever takes the host later cannot open
 * the recipes of slots that are over.
 *
 *   "QBPK" | version u32 = 1 | place u32 | 0 u32 | campaign 16 | station 64 | count u64 | zeros to 128 |
 *   count points, 32 each | count boxes, PREKEYS_BOX_BYTES each (all zeros: erased)
 *
 * A box (server/custody/box.h) has the purpose PREKEYS_PURPOSE and the header's 128 bytes and the slot as associated
 * data.
 */
#ifndef QB_AGENT_PREKEYS_H
#define QB_AGENT_PREKEYS_H

#include "server/base/buf.h"
#include "server/custody/box.h"
#include "server/custody/party.h"
#include "server/custody/recipe.h"

#define PREKEYS_HEADER_BYTES 128
#define PREKEYS_BOX_BYTES    (SCALAR_BYTES + BOX_OVERHEAD_BYTES)
#define PREKEYS_PURPOSE      "prekey-at-rest"

struct prekeys;

struct prekeys_for {
	uint8_t campaign[CAMPAIGN_ID_BYTES];
	char station[64];
	enum recipe_place place;
	int64_t count; /* slots */
};

/*
 * Makes the file with fresh keys, mode 0600, in one atomic step.
 *
 * Errors:   QB_CONFLICT   it is there already; QB_IO; QB_RANGE for a count that no plan has
 */
enum qb_status prekeys_create(const char *path, const struct prekeys_for *what, const struct party_key *me,
                              struct qb_error *e) QB_MUST_USE;

/*
 * Errors:   QB_NOT_FOUND  no such file
 *           QB_REFUSED    group or others may read it
 *           QB_FORMAT     damaged, or another campaign's, station's or place's
 */
enum qb_status prekeys_open(const char *path, const struct prekeys_for *what, struct prekeys **out,
                            struct qb_error *e) QB_MUST_USE;
void prekeys_close(struct prekeys **p);

/* The public halves, count x 32 bytes, appended: what is uploaded. */
enum qb_status prekeys_points(const struct prekeys *p, struct buf *out, struct qb_error *e) QB_MUST_USE;

/*
 * Returned: *out          the scalar, which fits its public half; the caller frees it
 * Errors:   QB_NOT_FOUND  erased
 *           QB_CRYPTO     another party's file, or altered
 */
enum qb_status prekeys_take(const struct prekeys *p, int64_t slot, const struct party_key *me, struct secret **out,
                            struct qb_error *e) QB_MUST_USE;

/* Overwrites a slot's box with zeros and waits until the disk has it. Erasing again is no error. */
enum qb_status prekeys_erase(struct prekeys *p, int64_t slot, struct qb_error *e) QB_MUST_USE;

#endif
