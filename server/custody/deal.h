/*
 * A custodian's one message of key generation: commitments to a secret polynomial, proof of possession, and everyone's
 * share encrypted, all under one signature. Making, parsing and checking it; what follows from all deals is keygen.h.
 */
#ifndef QB_CUSTODY_DEAL_H
#define QB_CUSTODY_DEAL_H

#include "server/custody/keygen.h"

#define DEAL_SHARE_BYTES (SCALAR_BYTES + 16)
#define DEAL_BYTES_MAX   (16 + 64 + CUSTODY_MAX * (POINT_BYTES + DEAL_SHARE_BYTES) + 3 * 32 + 64)

/*
 * "QBD1" | from u32 | n u32 | k u32 | ctx 64 | C_0..C_(k-1) 32 each | R_pop 32 | z_pop 32 | E 32 |
 * ciphertexts to 1..n, 48 each | signature 64
 */
struct deal {
	uint32_t from, n, k;
	uint8_t ctx[64];
	uint8_t commitment[CUSTODY_MAX][POINT_BYTES]; /* exactly k */
	uint8_t pop_r[POINT_BYTES], pop_z[SCALAR_BYTES];
	uint8_t ephemeral[POINT_BYTES];
	uint8_t share[CUSTODY_MAX][DEAL_SHARE_BYTES]; /* share[j-1]: f(j) encrypted to custodian j */
	uint8_t signature[SIGN_BYTES];
	uint8_t hash[64]; /* T of all fields but the signature: what is signed */
};

/* Custodian i's fresh deal. The polynomial and the ephemeral are wiped before it returns. */
enum qb_status deal_make(const struct keygen_context *c, uint32_t i, const struct party_key *me, struct buf *out,
                         struct qb_error *e) QB_MUST_USE;

/* Format only: exact length, exactly c->k commitments, the context's ctx. Errors: QB_FORMAT, nobody is blamed. */
enum qb_status deal_parse(const struct keygen_context *c, const uint8_t *p, size_t n, struct deal *out,
                          struct qb_error *e) QB_MUST_USE;
void deal_encode(const struct deal *d, struct buf *out);
void deal_hash(const struct deal *d, uint8_t out[static 64]);

/*
 * What anyone can check: the signature first, since without it nobody can be blamed; then every point and scalar, and
 * possession. Errors: QB_CRYPTO, the custodian in `where`.
 */
enum qb_status deal_check(const struct keygen_context *c, const struct deal *d, struct qb_error *e) QB_MUST_USE;

/*
 * Custodian `to` opens their share of d and holds it against the commitments.
 *
 * Returned: *share          f_from(to), 32 bytes; the caller frees it
 * Errors:   QB_CRYPTO       does not decrypt, or does not fit: file a complaint (complaint.h)
 */
enum qb_status deal_take(const struct keygen_context *c, const struct deal *d, uint32_t to, const struct party_key *me,
                         struct secret **share, struct qb_error *e) QB_MUST_USE;

/* The same with the shared point Z that a complaint discloses. */
enum qb_status deal_take_with(const struct keygen_context *c, const struct deal *d, uint32_t to,
                              const uint8_t z[static POINT_BYTES], uint8_t share[static SCALAR_BYTES],
                              struct qb_error *e) QB_MUST_USE;

#endif
