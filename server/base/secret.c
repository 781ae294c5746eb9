/* Guarded memory, randomness, transcripts and Ed25519 over libsodium. */
#include "server/base/secret.h"

#include <sodium.h>
#include <string.h>
#include <sys/resource.h>

#include "server/base/alloc.h"
#include "server/base/buf.h"
#include "server/base/check.h"
#include "server/base/json.h"

struct secret {
	uint8_t *bytes; /* sodium_malloc: guard pages, locked, canary */
	size_t n;
};

_Static_assert(sizeof(crypto_generichash_blake2b_state) <= sizeof(struct transcript), "transcript state too small");
_Static_assert(crypto_sign_SEEDBYTES == 32 && crypto_sign_PUBLICKEYBYTES == SIGN_PUBLIC, "Ed25519 sizes");

enum qb_status secret_setup(struct qb_error *e)
{
	if (sodium_init() < 0)
		return qb_fail(e, QB_FAULT, NULL, "check the libsodium installation", "libsodium can't be started");
	struct rlimit none = {0, 0};
	if (setrlimit(RLIMIT_CORE, &none) != 0)
		return qb_fail(e, QB_FAULT, NULL, NULL, "core dumps can't be switched off");
	json_wipe_on_free();
	return QB_OK;
}

struct secret *secret_new(size_t n)
{
	struct secret *s = QB_NEW(struct secret);
	s->bytes = sodium_malloc(n > 0 ? n : 1);
	CHECK(s->bytes != NULL && "out of lockable memory");
	memset(s->bytes, 0, n);
	s->n = n;
	return s;
}

struct secret *secret_random(size_t n)
{
	struct secret *s = secret_new(n);
	randombytes_buf(s->bytes, n);
	return s;
}

struct secret *secret_from(const void *p, size_t n)
{
	struct secret *s = secret_new(n);
	if (n > 0)
		memcpy(s->bytes, p, n);
	return s;
}

uint8_t *secret_bytes(struct secret *s)
{
	return s->bytes;
}

const uint8_t *secret_view(const struct secret *s)
{
	return s->bytes;
}

size_t secret_size(const struct secret *s)
{
	return s->n;
}

void secret_free(struct secret **s)
{
	if (*s == NULL)
		return;
	sodium_free((*s)->bytes); /* wipes */
	qb_free(*s);
	*s = NULL;
}

/* Defined by that test alone. */
extern void secret_published(const void *p, size_t n) __attribute__((weak));

void secret_publish(const void *p, size_t n)
{
	if (secret_published != NULL)
		secret_published(p, n);
}

bool secret_verdict(bool b)
{
	secret_publish(&b, sizeof b);
	return b;
}

void wipe(void *p, size_t n)
{
	sodium_memzero(p, n);
}

bool same_bytes(const void *a, const void *b, size_t n)
{
	return secret_verdict(sodium_memcmp(a, b, n) == 0);
}

void random_bytes(void *p, size_t n)
{
	randombytes_buf(p, n);
}

static crypto_generichash_blake2b_state *state_of(struct transcript *t)
{
	return (crypto_generichash_blake2b_state *)(void *)t->state;
}

void transcript_begin(struct transcript *t, const char *label)
{
	CHECK(crypto_generichash_blake2b_init(state_of(t), NULL, 0, 64) == 0);
	transcript_text(t, label);
}

void transcript_field(struct transcript *t, const void *p, size_t n)
{
	uint8_t le[8];
	le64_store(le, n);
	CHECK(crypto_generichash_blake2b_update(state_of(t), le, sizeof le) == 0);
	CHECK(n == 0 || crypto_generichash_blake2b_update(state_of(t), p, n) == 0);
}

void transcript_u64(struct transcript *t, uint64_t v)
{
	uint8_t le[8];
	le64_store(le, v);
	transcript_field(t, le, sizeof le);
}

void transcript_text(struct transcript *t, const char *s)
{
	transcript_field(t, s, strlen(s));
}

void transcript_end(struct transcript *t, uint8_t out[static 64])
{
	CHECK(crypto_generichash_blake2b_final(state_of(t), out, 64) == 0);
	wipe(t, sizeof *t);
}

void blake2b_512(uint8_t out[static 64], const void *p, size_t n)
{
	CHECK(crypto_generichash_blake2b(out, 64, p, n, NULL, 0) == 0);
}

void sign_public(const struct secret *seed, uint8_t pk[static 32])
{
	CHECK(seed->n == crypto_sign_SEEDBYTES);
	uint8_t sk[crypto_sign_SECRETKEYBYTES];
	CHECK(crypto_sign_seed_keypair(pk, sk, seed->bytes) == 0);
	secret_publish(pk, SIGN_PUBLIC);
	wipe(sk, sizeof sk);
}

void sign_bytes(const struct secret *seed, const void *p, size_t n, uint8_t sig[static 64])
{
	CHECK(seed->n == crypto_sign_SEEDBYTES);
	uint8_t pk[SIGN_PUBLIC], sk[crypto_sign_SECRETKEYBYTES];
	CHECK(crypto_sign_seed_keypair(pk, sk, seed->bytes) == 0);
	CHECK(crypto_sign_detached(sig, NULL, p, n, sk) == 0);
	secret_publish(sig, SIGN_BYTES);
	wipe(sk, sizeof sk);
}

bool sign_verify(const uint8_t pk[static 32], const void *p, size_t n, const uint8_t sig[static 64])
{
	return crypto_sign_verify_detached(sig, p, n, pk) == 0;
}

void sign_key_id(const uint8_t pk[static 32], uint8_t id[static 16])
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/key/id");
	transcript_field(&t, pk, SIGN_PUBLIC);
	transcript_end(&t, h);
	memcpy(id, h, KEY_ID_BYTES);
}
