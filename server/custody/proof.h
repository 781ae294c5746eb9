/*
 * Zero-knowledge proofs over ristretto255: possession of a scalar (Schnorr 1991) and equality of two discrete
 * logarithms (Chaum & Pedersen 1993). What a proof is about is given by a statement callback, so that one core serves
 * records, partial openings and complaints, and can be held to outside vectors.
 */
#ifndef QB_CUSTODY_PROOF_H
#define QB_CUSTODY_PROOF_H

#include "server/base/err.h"
#include "server/custody/group.h"

/* Proof that log_base1(image1) = log_base2(image2). base1 NULL means G. */
struct proof_points {
	const uint8_t *base1, *image1, *base2, *image2;
};
/* Challenge c over the statement and the commitments A, A'; must cover every point of the statement. */
struct proof_statement {
	void (*challenge)(const void *state, const uint8_t a1[static POINT_BYTES], const uint8_t a2[static POINT_BYTES],
	                  uint8_t c[static SCALAR_BYTES]);
	const void *state;
};
struct proof {
	uint8_t c[SCALAR_BYTES], z[SCALAR_BYTES]; /* z = w + c x */
};

/*
 * The statement is yours; the nonce w must be hedged (proof_nonce) or the record's deterministic one, and used once.
 *
 * Given:    points            all ok
 *           x, w              secret scalar and nonce, canonical, non-zero
 * Returned: *out
 * Errors:   false             an input is not ok, or c or z came out zero (try another nonce)
 */
bool proof_equal_make(const struct proof_points *points, const struct proof_statement *statement,
                      const uint8_t x[static SCALAR_BYTES], const uint8_t w[static SCALAR_BYTES],
                      struct proof *out) QB_MUST_USE;
/* True only if c and z are canonical and non-zero, all points ok, and the challenge comes out the same. */
bool proof_equal_check(const struct proof_points *points, const struct proof_statement *statement,
                       const struct proof *proof) QB_MUST_USE;

/* Hedged nonce T("quietbell/1/nonce/<use>", x, 32 fresh random bytes, statement) mod l, never zero. */
void proof_nonce(const char *label, const uint8_t x[static SCALAR_BYTES], const void *statement, size_t n,
                 uint8_t w[static SCALAR_BYTES]);

#endif
