/*
 * Reducing one pipeline's claims (audit clause A1): which are malformed, late or superseded, and which stand. Kept
 * apart from the matching since revision chains are where a claim file can be adversarial.
 */
#ifndef QB_AUDIT_CHAIN_H
#define QB_AUDIT_CHAIN_H

#include "server/audit/match.h"

/*
 * Given:    in          all claims
 *           mine, n     indices of one pipeline's claims
 * Returned: fates[i] of each: status MALFORMED, LATE or SUPERSEDED, or UNEXPLAINED as the mark of a claim that stands,
 *           with first_submitted_gps set
 * Errors:   QB_FORMAT   a claim_id twice
 */
enum qb_status audit_reduce_claims(const struct audit_input *in, const size_t *mine, size_t n, struct audit_fate *fates,
                                   struct qb_error *e) QB_MUST_USE;

#endif
