/*
 * Repair of one lost share: k custodians give the one who lost it exactly that share again, and nobody learns any
 * other. Each helper splits lambda_i(l) s_i into random summands, one for each helper; each helper adds up what they
 * got and sends the sum to the one who lost it, whose share is the sum of the sums. Nothing about the group changes.
 */
#ifndef QB_CUSTODY_REPAIR_H
#define QB_CUSTODY_REPAIR_H

#include "server/custody/keygen.h"
#include "server/custody/sealed_share.h"

#define REPAIR_SPLIT_BYTES_MAX                                                                                         \
	(4 + 8 + 64 + CUSTODY_MAX * (POINT_BYTES + SEALED_SHARE_BYTES) + POINT_BYTES + SIGN_BYTES)
#define REPAIR_SUM_BYTES (4 + 4 + 64 + POINT_BYTES + SEALED_SHARE_BYTES + SIGN_BYTES)

/* What all must agree on before the first message. Obtained from repair_context_init; refers to nothing outside. */
struct repair_context {
	struct custody_group group;
	uint64_t attempt;
	uint32_t lost;                          /* number of the custodian whose share is lost */
	struct party_public receiver;           /* their keys, which may be new ones */
	uint32_t helper[CUSTODY_MAX];           /* exactly group.k numbers, ascending, lost not among them */
	struct party_public party[CUSTODY_MAX]; /* the helpers' keys, in that order */
	/* T(campaign, epoch, attempt, th, lost, receiver's signing key, exchange key, k, then per helper: number,
	 * signing key, exchange key) */
	uint8_t ctx[64];
};

/*
 * First message, from each helper: "QBF1" | from u32 | k u32 | ctx 64 | D_1..D_k 32 each | E 32 | ciphertexts to the
 * helpers, 48 each | signature 64.  Summand p is for the helper at place p of the context's list; D_p = d_p G.
 */
struct repair_split {
	uint32_t from, k;
	uint8_t ctx[64];
	uint8_t commitment[CUSTODY_MAX][POINT_BYTES];
	uint8_t ephemeral[POINT_BYTES];
	uint8_t summand[CUSTODY_MAX][SEALED_SHARE_BYTES];
	uint8_t signature[SIGN_BYTES];
	uint8_t hash[64]; /* T of all fields but the signature: what is signed */
};

/* Second message, from each helper: "QBG1" | from u32 | splits 64 | E 32 | ciphertext 48 | signature 64. */
struct repair_sum {
	uint32_t from;
	uint8_t splits[64]; /* T over all first messages, so that all must have seen the same ones */
	uint8_t ephemeral[POINT_BYTES];
	uint8_t sum[SEALED_SHARE_BYTES];
	uint8_t signature[SIGN_BYTES];
	uint8_t hash[64];
};

/*
 * Given:    helper          g->k different numbers 1..n, ascending, without lost; party: their keys, in that order
 * Errors:   QB_RANGE        lost, helpers
 *           QB_CRYPTO       a key is not valid
 */
enum qb_status repair_context_init(struct repair_context *out, const struct custody_group *g, uint64_t attempt,
                                   uint32_t lost, const struct party_public *receiver, const uint32_t *helper,
                                   const struct party_public *party, struct qb_error *e) QB_MUST_USE;

/*
 * Helper i's first message. The summands are wiped before it returns.
 *
 * Errors:   QB_RANGE        not a helper, or not their keys
 *           QB_CRYPTO       the share is not this group's
 */
enum qb_status repair_split_make(const struct repair_context *c, uint32_t i, const struct party_key *me,
                                 const struct secret *share, struct buf *out, struct qb_error *e) QB_MUST_USE;
/* Format only. Errors: QB_FORMAT, nobody is blamed. */
enum qb_status repair_split_parse(const struct repair_context *c, const uint8_t *p, size_t n, struct repair_split *out,
                                  struct qb_error *e) QB_MUST_USE;
/* Signature, points, and that the summands make up lambda_i(l) Y_i. Errors: QB_CRYPTO, the helper in `where`. */
enum qb_status repair_split_check(const struct repair_context *c, const struct repair_split *d,
                                  struct qb_error *e) QB_MUST_USE;

/*
 * Helper j's second message, after all first ones: checks them all, adds up the summands meant for j.
 *
 * Given:    splits          k of them, in the order of c->helper
 * Errors:   QB_RANGE        not a helper, or not their keys
 *           QB_CRYPTO       a message is false, or the summand in it: the helper at fault in `where`
 */
enum qb_status repair_sum_make(const struct repair_context *c, const struct repair_split *splits, uint32_t j,
                               const struct party_key *me, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status repair_sum_parse(const struct repair_context *c, const uint8_t *p, size_t n, struct repair_sum *out,
                                struct qb_error *e) QB_MUST_USE;
/* Signature, E, and that it is about these first messages. Errors: QB_CRYPTO. */
enum qb_status repair_sum_check(const struct repair_context *c, const struct repair_split *splits,
                                const struct repair_sum *d, struct qb_error *e) QB_MUST_USE;

/*
 * The custodian who lost the share puts it together again.
 *
 * Given:    splits, sums    k of each, in the order of c->helper
 *           me              the receiver's keys
 * Returned: *share          s_l, with s_l G == Y_l checked; the caller frees it
 * Errors:   QB_CRYPTO       the helper at fault in `where`
 */
enum qb_status repair_share(const struct repair_context *c, const struct repair_split *splits,
                            const struct repair_sum *sums, const struct party_key *me, struct secret **share,
                            struct qb_error *e) QB_MUST_USE;

#endif
