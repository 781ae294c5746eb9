/*
 * A complaint about a bad share: the accuser shows the point shared with the dealer and proves that it is the right
 * one, so that anyone can decrypt that share and judge who is at fault. It discloses this one share and no key.
 */
#ifndef QB_CUSTODY_COMPLAINT_H
#define QB_CUSTODY_COMPLAINT_H

#include "server/custody/deal.h"

#define COMPLAINT_BYTES 108 /* "QBX1" | accused u32 | by u32 | Z 32 | c 32 | z 32 */

enum complaint_verdict { COMPLAINT_SENDER_GUILTY = 1, COMPLAINT_FALSE = 2 };

/* About a deal of key generation or of resharing: g from keygen_dealing or reshare_dealing. */
enum qb_status complaint_dealing_make(const struct dealing *g, const struct deal *d, uint32_t by,
                                      const struct party_key *me, struct buf *out, struct qb_error *e) QB_MUST_USE;

/*
 * Given:    d               the accused's deal, parsed; its signature is checked here (what is wrong with a signed
 *                           deal besides a share, dealing_check says without any complaint)
 *           p, n            the complaint
 * Returned: *verdict
 * Errors:   QB_FORMAT       not a complaint about this deal
 *           QB_CRYPTO       the accused did not sign this deal, so nobody can be judged by it
 *           A false proof or a good share is no error: the verdict is COMPLAINT_FALSE.
 */
enum qb_status complaint_dealing_judge(const struct dealing *g, const struct deal *d, const uint8_t *p, size_t n,
                                       enum complaint_verdict *verdict, struct qb_error *e) QB_MUST_USE;

/* The same for key generation. */
enum qb_status complaint_make(const struct keygen_context *c, const struct deal *d, uint32_t by,
                              const struct party_key *me, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status complaint_judge(const struct keygen_context *c, const struct deal *d, const uint8_t *p, size_t n,
                               enum complaint_verdict *verdict, struct qb_error *e) QB_MUST_USE;

#endif
