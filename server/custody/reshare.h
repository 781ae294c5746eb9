/*
 * Resharing (Desmedt & Jajodia 1997): k of the present custodians deal their shares on to a new set, so that people can
 * leave and join, and k change, while the group key and every record sealed to it stay what they are. The key itself
 * is never assembled. Old shares still open until their holders erase them; so do those of an abandoned attempt.
 */
#ifndef QB_CUSTODY_RESHARE_H
#define QB_CUSTODY_RESHARE_H

#include "server/custody/dealing.h"
#include "server/custody/keygen.h"

/* What all must agree on before the first message. Obtained from reshare_context_init; refers to nothing outside. */
struct reshare_context {
	struct custody_group old;
	uint64_t epoch, attempt;                /* epoch = old.epoch + 1 */
	uint32_t dealer[CUSTODY_MAX];           /* exactly old.k numbers of old custodians, ascending */
	struct party_public from[CUSTODY_MAX];  /* their keys, in that order */
	uint32_t n, k;                          /* of the new set */
	struct party_public party[CUSTODY_MAX]; /* party[j-1] is new custodian j */
	/* T(campaign, epoch, attempt, old th, S, old k, then per dealer: number, signing key, exchange key; n, k, then
	 * for j=1..n: signing key, exchange key) */
	uint8_t ctx[64];
};

/*
 * Given:    old             the present group
 *           dealer          old->k different numbers 1..old->n, ascending; from: those custodians' keys, in that order
 *           n, k, party     the new set, under the rules of keygen_parties_check; people may be in both
 * Errors:   QB_RANGE        n, k, dealers, epoch
 *           QB_CRYPTO       a key is not valid, or two custodians of one set share one
 */
enum qb_status reshare_context_init(struct reshare_context *out, const struct custody_group *old, uint64_t attempt,
                                    const uint32_t *dealer, const struct party_public *from, uint32_t n, uint32_t k,
                                    const struct party_public *party, struct qb_error *e) QB_MUST_USE;

/* Chosen old custodians deal to all new ones: for the functions of dealing.h and complaint.h. Points into c. */
struct dealing reshare_dealing(const struct reshare_context *c);

/*
 * Old custodian i deals their share on.
 *
 * Given:    i, me, share    a chosen dealer's number, keys and s_i; s_i G must be the old Y_i
 * Returned: out             the message is appended; format: dealing.h
 * Errors:   QB_RANGE        not a chosen dealer, or not their keys
 *           QB_CRYPTO       the share is not this group's
 */
enum qb_status reshare_make(const struct reshare_context *c, uint32_t i, const struct party_key *me,
                            const struct secret *share, struct buf *out, struct qb_error *e) QB_MUST_USE;
/* Format only. Errors: QB_FORMAT, nobody is blamed. */
enum qb_status reshare_parse(const struct reshare_context *c, const uint8_t *p, size_t n, struct deal *out,
                             struct qb_error *e) QB_MUST_USE;
/* What anyone can check, C_0 == Y_i of the old group included. Errors: QB_CRYPTO, the dealer in `where`. */
enum qb_status reshare_check(const struct reshare_context *c, const struct deal *d, struct qb_error *e) QB_MUST_USE;
/* New custodian `to` opens and checks their part of one deal. QB_CRYPTO: file a complaint (complaint_dealing_make). */
enum qb_status reshare_take(const struct reshare_context *c, const struct deal *d, uint32_t to,
                            const struct party_key *me, struct secret **part, struct qb_error *e) QB_MUST_USE;

/*
 * Checks every deal as an outsider can and computes the new group: epoch, n, k, th and Y_j are new; S, ctx, seal_epoch,
 * seal_th and g2 are the old ones.
 *
 * Given:    deals           old.k of them, in the order of c->dealer
 * Errors:   QB_CRYPTO       with the dealer at fault in `where`; also when a sum vanishes or the group key would change
 */
enum qb_status reshare_group(const struct reshare_context *c, const struct deal *deals, struct custody_group *out,
                             struct qb_error *e) QB_MUST_USE;

/* The same for new custodian j, who also adds up their parts. Returned: *share = s'_j, s'_j G == Y'_j checked. */
enum qb_status reshare_share(const struct reshare_context *c, const struct deal *deals, uint32_t j,
                             const struct party_key *me, struct custody_group *out, struct secret **share,
                             struct qb_error *e) QB_MUST_USE;

/*
 * The new set's certificate has the form of keygen.h's and is signed and encoded by the functions there. This
 * recomputes everything from the old group, the signed deals and the pinned keys. Errors: QB_FORMAT, QB_CRYPTO.
 */
enum qb_status reshare_certificate_verify(const struct reshare_context *c, const struct deal *deals, const uint8_t *p,
                                          size_t n, struct custody_group *out, struct qb_error *e) QB_MUST_USE;

#endif
