/*
 * A party's own key pair: an Ed25519 signing key and a ristretto255 exchange key. The exchange key is a point of our
 * group, and not X25519, because complaints prove equal discrete logarithms with it.
 */
#ifndef QB_CUSTODY_PARTY_H
#define QB_CUSTODY_PARTY_H

#include "server/base/err.h"
#include "server/base/secret.h"
#include "server/custody/group.h"

struct party_public {
	uint8_t sign[SIGN_PUBLIC];
	uint8_t exchange[POINT_BYTES];
};
struct party_key {
	struct secret *seed;     /* Ed25519 seed, 32 bytes */
	struct secret *exchange; /* scalar, 32 bytes */
};

void party_key_new(struct party_key *out);
/* From bytes in a key file. QB_CRYPTO when the scalar is not canonical or zero. */
enum qb_status party_key_from(const uint8_t seed[static 32], const uint8_t exchange[static 32], struct party_key *out,
                              struct qb_error *e) QB_MUST_USE;
void party_key_free(struct party_key *key);
void party_key_public(const struct party_key *key, struct party_public *out);
/* QB_CRYPTO unless the exchange key is a valid point and the signing key a canonical, prime-order one. */
enum qb_status party_public_check(const struct party_public *p, const char *whose, struct qb_error *e) QB_MUST_USE;

/* T("quietbell/1/key/fingerprint", sign, exchange), first 16 bytes; people compare them as 8 groups of 4 hex, or as
 * words (words.h). */
#define PARTY_FINGERPRINT_BYTES 16
#define PARTY_FINGERPRINT_TEXT  40
void party_fingerprint_bytes(const struct party_public *p, uint8_t out[static PARTY_FINGERPRINT_BYTES]);
void party_fingerprint(const struct party_public *p, char out[static PARTY_FINGERPRINT_TEXT]);

#endif
