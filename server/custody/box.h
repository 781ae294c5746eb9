/*
 * A small message encrypted to one exchange point, for one named purpose: contributions to the sealer, spot partials to
 * custodians, the answer to the asker. The sender is not authenticated here; what travels inside proves itself.
 *
 *   "QBB1" | E 32 | ciphertext of ( length u32 | content | zeros ) + 16
 */
#ifndef QB_CUSTODY_BOX_H
#define QB_CUSTODY_BOX_H

#include "server/base/buf.h"
#include "server/custody/group.h"

#define BOX_OVERHEAD_BYTES 56
#define BOX_CONTENT_MAX    ((size_t)1 << 20)
#define BOX_SEALER         "contribution-to-sealer"
#define BOX_SPOT_PARTIAL   "spot-partial-to-custodian"
#define BOX_ANSWER         "answer-to-asker"

/*
 * Given:    to                exchange point of the recipient
 *           purpose           one of the words above, or another; both sides must say the same
 *           ad, ad_n          associated data, bound but not sent (campaign, request ...)
 *           padded            content is filled up to this length, so that the size says nothing; n <= padded
 * Returned: out               padded + BOX_OVERHEAD_BYTES are appended
 * Errors:   QB_RANGE, QB_CRYPTO (to is not ok)
 */
enum qb_status box_seal(const uint8_t to[static POINT_BYTES], const char *purpose, const void *ad, size_t ad_n,
                        const void *content, size_t n, size_t padded, struct buf *out, struct qb_error *e) QB_MUST_USE;
/* Errors: QB_FORMAT; QB_CRYPTO for another recipient, purpose or associated data, or altered bytes. */
enum qb_status box_open(const struct secret *exchange, const char *purpose, const void *ad, size_t ad_n,
                        const uint8_t *p, size_t len, struct buf *content, struct qb_error *e) QB_MUST_USE;

#endif
