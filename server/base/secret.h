/*
 * Secrets in guarded memory that no printing or JSON path accepts, and the few libsodium primitives that more than one
 * room needs: randomness, transcripts T(...), Ed25519. All of libsodium's other uses are in ledger and custody.
 */
#ifndef QB_BASE_SECRET_H
#define QB_BASE_SECRET_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/err.h"

struct secret; /* opaque: guarded, locked, wiped when freed */

/* Must succeed before anything else here or in custody is used; sets RLIMIT_CORE to 0. Safe to repeat. */
enum qb_status secret_setup(struct qb_error *e) QB_MUST_USE;
struct secret *secret_new(size_t n); /* zeros */
struct secret *secret_random(size_t n);
struct secret *secret_from(const void *p, size_t n); /* copies; wipe the original yourself */
uint8_t *secret_bytes(struct secret *s);
const uint8_t *secret_view(const struct secret *s);
size_t secret_size(const struct secret *s);
void secret_free(struct secret **s); /* wipes, nulls */

/*
 * From here on these bytes, or this verdict, are no secret any more: they go out, or what is done next shows them. Does
 * nothing but in the test that follows secrets through this code (tests/unit/custody/taint_test.c): there everything
 * that comes from a secret and was not published may neither decide a branch nor an address.
 */
void secret_publish(const void *p, size_t n);
bool secret_verdict(bool b);

void wipe(void *p, size_t n);
bool same_bytes(const void *a, const void *b, size_t n); /* constant time */
void random_bytes(void *p, size_t n);

/*
 * Transcript hash T(label, f1, f2, ...) = BLAKE2b-512 over le64(length) || bytes of the label and of every field.
 * Usage: transcript_begin(&t, "quietbell/1/..."); transcript_field(...)...; transcript_end(&t, out).
 * The state is 64-byte aligned as libsodium 1.0.18 needs; it is wiped by transcript_end.
 */
struct transcript {
	_Alignas(64) unsigned char state[384];
};
void transcript_begin(struct transcript *t, const char *label);
void transcript_field(struct transcript *t, const void *p, size_t n);
void transcript_u64(struct transcript *t, uint64_t v);     /* a field of 8 bytes, little-endian */
void transcript_text(struct transcript *t, const char *s); /* a field: its bytes without the end */
void transcript_end(struct transcript *t, uint8_t out[static 64]);
/* H: plain BLAKE2b-512. */
void blake2b_512(uint8_t out[static 64], const void *p, size_t n);

/* Ed25519. The secret key is the 32-byte seed in a struct secret. */
#define SIGN_PUBLIC  32
#define SIGN_BYTES   64
#define KEY_ID_BYTES 16
void sign_public(const struct secret *seed, uint8_t pk[static 32]);
void sign_bytes(const struct secret *seed, const void *p, size_t n, uint8_t sig[static 64]);
bool sign_verify(const uint8_t pk[static 32], const void *p, size_t n, const uint8_t sig[static 64]);
/* First 16 bytes of T("quietbell/1/key/id", signing key). */
void sign_key_id(const uint8_t pk[static 32], uint8_t id[static 16]);

#endif
