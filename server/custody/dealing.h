/*
 * Verifiable dealing of a secret among n, of whom k are needed (Feldman 1987): commitments to a polynomial, proof of
 * possession of its constant term, and everyone's share encrypted, in one signed message. Key generation (deal.h) and
 * resharing (reshare.h) are both made of such messages; they differ in who deals to whom, and in magic and labels.
 */
#ifndef QB_CUSTODY_DEALING_H
#define QB_CUSTODY_DEALING_H

#include "server/base/buf.h"
#include "server/base/err.h"
#include "server/custody/group.h"
#include "server/custody/party.h"
#include "server/custody/sealed_share.h"

#define DEAL_SHARE_BYTES SEALED_SHARE_BYTES
#define DEAL_BYTES_MAX   (16 + 64 + CUSTODY_MAX * (POINT_BYTES + DEAL_SHARE_BYTES) + 3 * 32 + 64)

enum deal_kind { DEAL_KEYGEN, DEAL_RESHARE };

/*
 * Who deals to whom: obtained from keygen_dealing or reshare_dealing, and pointing into that context. Recipients are
 * numbered 1..n; dealers have the numbers in index, or 1..dealers when it is NULL.
 */
struct dealing {
	enum deal_kind kind;
	const uint8_t *ctx; /* 64 bytes */
	uint32_t n, k;
	const struct party_public *to; /* to[j-1] is recipient j */
	uint32_t dealers;
	const uint32_t *index;
	const struct party_public *dealer; /* in the order of index */
};

/*
 * magic 4 | from u32 | n u32 | k u32 | ctx 64 | C_0..C_(k-1) 32 each | R_pop 32 | z_pop 32 | E 32 |
 * ciphertexts to 1..n, 48 each | signature 64.  Magic: "QBD1" key generation, "QBS1" resharing.
 */
struct deal {
	enum deal_kind kind;
	uint32_t from, n, k;
	uint8_t ctx[64];
	uint8_t commitment[CUSTODY_MAX][POINT_BYTES]; /* exactly k */
	uint8_t pop_r[POINT_BYTES], pop_z[SCALAR_BYTES];
	uint8_t ephemeral[POINT_BYTES];
	uint8_t share[CUSTODY_MAX][DEAL_SHARE_BYTES]; /* share[j-1]: f(j) encrypted to recipient j */
	uint8_t signature[SIGN_BYTES];
	uint8_t hash[64]; /* T of all fields but the signature: what is signed */
};

/* The place of dealer number `from` in the order of g->index, or g->dealers when there is none. */
uint32_t dealing_place(const struct dealing *g, uint32_t from);

/*
 * A fresh deal. The polynomial and the ephemeral are wiped before it returns.
 *
 * Given:    from, me        number and keys of the dealer
 *           constant        f(0), a valid scalar; NULL: a fresh random one
 * Returned: out             the message is appended
 * Errors:   QB_RANGE        these are not that dealer's keys
 *           QB_CRYPTO       constant is not a valid scalar
 */
enum qb_status dealing_make(const struct dealing *g, uint32_t from, const struct party_key *me,
                            const struct secret *constant, struct buf *out, struct qb_error *e) QB_MUST_USE;

/* Format only: exact length, exactly k commitments, this ctx. Errors: QB_FORMAT, nobody is blamed. */
enum qb_status dealing_parse(const struct dealing *g, const uint8_t *p, size_t n, struct deal *out,
                             struct qb_error *e) QB_MUST_USE;
void deal_encode(const struct deal *d, struct buf *out);
void deal_hash(const struct deal *d, uint8_t out[static 64]);

/*
 * What anyone can check: the signature first, since without it nobody can be blamed; then every point and scalar, and
 * possession. Errors: QB_CRYPTO, the dealer in `where`.
 */
enum qb_status dealing_check(const struct dealing *g, const struct deal *d, struct qb_error *e) QB_MUST_USE;
/* QB_CRYPTO that blames d's sender for `what`, which must be a thing that the sender signed. */
enum qb_status dealing_blame(const struct deal *d, const char *what, struct qb_error *e) QB_MUST_USE;

/*
 * Recipient `to` opens their share of d and holds it against the commitments.
 *
 * Returned: *share          f_from(to), 32 bytes; the caller frees it
 * Errors:   QB_CRYPTO       does not decrypt, or does not fit: file a complaint (complaint.h)
 */
enum qb_status dealing_take(const struct dealing *g, const struct deal *d, uint32_t to, const struct party_key *me,
                            struct secret **share, struct qb_error *e) QB_MUST_USE;

/* The same with the shared point Z that a complaint discloses. */
enum qb_status dealing_take_with(const struct dealing *g, const struct deal *d, uint32_t to,
                                 const uint8_t z[static POINT_BYTES], uint8_t share[static SCALAR_BYTES],
                                 struct qb_error *e) QB_MUST_USE;

#endif
