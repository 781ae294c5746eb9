/*
 * Distributed generation of a campaign's group key (Pedersen 1991, with Feldman 1987 commitments): what the custodians
 * agree on beforehand, what follows from their deals, and the certificate that all of them sign. The deals themselves
 * are in deal.h, complaints in complaint.h.
 */
#ifndef QB_CUSTODY_KEYGEN_H
#define QB_CUSTODY_KEYGEN_H

#include "server/base/buf.h"
#include "server/base/err.h"
#include "server/custody/group.h"
#include "server/custody/party.h"

#define CAMPAIGN_ID_BYTES 16

/* What all must agree on before the first message. Custodians are numbered 1..n; party[j-1] is custodian j. */
struct keygen_context {
	uint8_t campaign[CAMPAIGN_ID_BYTES];
	uint64_t epoch, attempt;
	uint32_t n, k;
	struct party_public party[CUSTODY_MAX];
	uint8_t ctx[64]; /* T(campaign, epoch, attempt, n, k, then signing key and exchange key of 1..n) */
};

/*
 * The public outcome: enough to seal, to check and to combine. Obtained only through the functions below and reshare.h.
 * A resharing changes who holds shares (epoch, n, k, th, Y_j: certificates and partial openings are bound to these),
 * never the key or what records are bound to (S, ctx, seal_epoch, seal_th, g2), so that every record stays what it was.
 */
struct custody_group {
	uint8_t campaign[CAMPAIGN_ID_BYTES];
	uint64_t epoch, seal_epoch;
	uint32_t n, k;
	uint8_t ctx[64]; /* of the key generation */
	uint8_t th[64], seal_th[64];
	uint8_t s[POINT_BYTES];              /* S, the group key */
	uint8_t g2[POINT_BYTES];             /* second generator of this group, from seal_th */
	uint8_t y[CUSTODY_MAX][POINT_BYTES]; /* y[j-1] = Y_j = s_j G */
};

struct deal;

/*
 * Given:    campaign, epoch (below 2^32), attempt, parties[n]
 *           n, k            2 <= k <= n-1, n <= CUSTODY_MAX
 * Returned: *out
 * Errors:   QB_RANGE        n, k, epoch
 *           QB_CRYPTO       a key is not valid, or two custodians share one
 */
enum qb_status keygen_context_init(struct keygen_context *out, const uint8_t campaign[static CAMPAIGN_ID_BYTES],
                                   uint64_t epoch, uint64_t attempt, uint32_t n, uint32_t k,
                                   const struct party_public *parties, struct qb_error *e) QB_MUST_USE;

/* The rules that every set of custodians must meet. Errors: QB_RANGE (n, k); QB_CRYPTO (a key, or two that share one).
 */
enum qb_status keygen_parties_check(uint32_t n, uint32_t k, const struct party_public *party,
                                    struct qb_error *e) QB_MUST_USE;

/*
 * Checks every deal as an outsider can and computes S, Y_j, th and the second generator.
 *
 * Given:    deals           n of them; deals[i-1] from custodian i
 * Errors:   QB_CRYPTO       with the custodian at fault in `where`; also when the aggregate has a vanishing top
 * coefficient
 */
enum qb_status keygen_group(const struct keygen_context *c, const struct deal *deals, struct custody_group *out,
                            struct qb_error *e) QB_MUST_USE;

/*
 * The same for a custodian, who also decrypts and checks the shares dealt to them and adds them up.
 *
 * Given:    i, me           own index 1..n and keys
 * Returned: *share          s_i, with s_i G == Y_i checked; the caller frees it
 */
enum qb_status keygen_share(const struct keygen_context *c, const struct deal *deals, uint32_t i,
                            const struct party_key *me, struct custody_group *out, struct secret **share,
                            struct qb_error *e) QB_MUST_USE;

/* The certificate: T(th, S, Y_1..Y_n), signed by all n. */
void keygen_certificate_hash(const struct custody_group *g, uint8_t out[static 64]);
void keygen_certificate_sign(const struct custody_group *g, const struct secret *seed,
                             uint8_t signature[static SIGN_BYTES]);
bool keygen_certificate_signed_by(const struct custody_group *g, const uint8_t pk[static SIGN_PUBLIC],
                                  const uint8_t signature[static SIGN_BYTES]);
/* "QBC1" | n u32 | k u32 | th 64 | S 32 | Y_1..Y_n 32 each | signatures of 1..n, 64 each; signature[j-1] is custodian
 * j's */
void keygen_certificate_encode(const struct custody_group *g, const uint8_t (*signature)[SIGN_BYTES], struct buf *out);
/* QB_FORMAT, QB_CRYPTO unless p says what g says and bears the signatures of party[0..n-1]. */
enum qb_status keygen_certificate_check(const struct custody_group *g, const struct party_public *party,
                                        const uint8_t *p, size_t n, struct qb_error *e) QB_MUST_USE;

/*
 * What a sealer, analyst, custodian or outside auditor runs before using S: everything is recomputed from the signed
 * deals and the pinned keys in c, and the certificate must say the same and bear all n signatures.
 *
 * Errors:   QB_FORMAT       certificate bytes malformed
 *           QB_CRYPTO       a deal, a value or a signature is false (named)
 */
enum qb_status keygen_certificate_verify(const struct keygen_context *c, const struct deal *deals, const uint8_t *p,
                                         size_t n, struct custody_group *out, struct qb_error *e) QB_MUST_USE;

#endif
