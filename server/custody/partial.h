/*
 * Partial openings: one custodian's D_i = s_i R for one record, one purpose and one authorising ledger entry, with the
 * proof that it is right; and their combination in the exponent. The group's private key is never assembled anywhere.
 */
#ifndef QB_CUSTODY_PARTIAL_H
#define QB_CUSTODY_PARTIAL_H

#include "server/custody/record.h"

/* What an opening is for. Each purpose opens certain types only, so that one can't be passed off as another. */
enum partial_purpose {
	PARTIAL_SPOT = 1,      /* slot, play note */
	PARTIAL_TRUTH = 2,     /* full opening: seed, slot */
	PARTIAL_CLAIMS = 3,    /* full opening: claim, guess, milestone, incident */
	PARTIAL_DELIVERY = 4,  /* full opening: play report, play note */
	PARTIAL_REHEARSAL = 5, /* canary */
};
bool partial_purpose_opens(enum partial_purpose purpose, enum record_type type);
/* The purpose under which a full opening (canary: a rehearsal) opens this type; 0 when none does. */
enum partial_purpose partial_full_purpose(enum record_type type);

/* What permits it: spot: the request's hidden-entry commitment (64 bytes); all others: a ledger leaf hash (32). */
struct partial_authority {
	enum partial_purpose purpose;
	uint8_t hash[64];
};
size_t partial_hash_bytes(enum partial_purpose purpose); /* 64 or 32; 0 for an unknown purpose */

#define PARTIAL_BYTES                                                                                                  \
	236 /* "QBP1" | i u32 | purpose u32 | record id 64 | hash 64 (zero-filled) | D 32 | c 32 | z 32                \
	     */

struct partial {
	uint32_t i;
	struct partial_authority authority;
	uint8_t record_id[RECORD_ID_BYTES];
	uint8_t d[POINT_BYTES];
};

/*
 * Given:    rec             passed record_check with this group
 *           i, share        own index and s_i; s_i G must be Y_i
 * Returned: out             PARTIAL_BYTES are appended
 * Errors:   QB_REFUSED      the purpose does not open this type of record
 *           QB_CRYPTO       the share is not this group's
 */
enum qb_status partial_make(const struct custody_group *g, const struct record *rec, uint32_t i,
                            const struct secret *share, const struct partial_authority *authority, struct buf *out,
                            struct qb_error *e) QB_MUST_USE;

/* The first half of it, once for many records, and the second: share passed partial_share_check for i. */
enum qb_status partial_share_check(const struct custody_group *g, uint32_t i, const struct secret *share,
                                   struct qb_error *e) QB_MUST_USE;
enum qb_status partial_make_checked(const struct custody_group *g, const struct record *rec, uint32_t i,
                                    const struct secret *share, const struct partial_authority *authority,
                                    struct buf *out, struct qb_error *e) QB_MUST_USE;

/* Errors: QB_FORMAT; QB_CRYPTO with the custodian at fault in `where`; QB_REFUSED for a purpose that does not fit. */
enum qb_status partial_check(const struct custody_group *g, const struct record *rec,
                             const struct partial_authority *authority, const uint8_t *p, size_t n, struct partial *out,
                             struct qb_error *e) QB_MUST_USE;

/*
 * Z = sum of lambda_i D_i over the first k of the given partials.
 *
 * Given:    partials        passed partial_check for the same record and authority, different custodians
 * Errors:   QB_CRYPTO       fewer than k, a repeated custodian, or partials about different things
 */
enum qb_status partial_combine(const struct custody_group *g, const struct partial *partials, size_t n,
                               uint8_t z[static POINT_BYTES], struct qb_error *e) QB_MUST_USE;
/* partial_combine and record_open; z is wiped. */
enum qb_status partial_open(const struct custody_group *g, const struct record *rec, const struct partial *partials,
                            size_t n, struct buf *content, struct qb_error *e) QB_MUST_USE;
/*
 * The same in an opening of many records by many authors. What a party sealed to nobody's key, under a proof that
 * holds, opens to nothing: that is its author's doing, and must not keep the others' records shut. The seed and the
 * slots are the sealer's, and have to open.
 *
 * Returned: *opens          false: the openings are right, and there is no content
 * Errors:   as partial_open, but for the case above
 */
enum qb_status partial_open_filed(const struct custody_group *g, const struct record *rec,
                                  const struct partial *partials, size_t n, struct buf *content, bool *opens,
                                  struct qb_error *e) QB_MUST_USE;
/* What stands for H(content) of such a record in the hash of all contents: H of the content, or zeros. */
void partial_content_hash(const struct buf *content, bool opens, uint8_t out[static 64]);

#endif
