/* Party key pairs and the fingerprint that people compare. */
#include "server/custody/party.h"

#include <sodium.h>
#include <stdio.h>
#include <string.h>

#include "server/base/check.h"

void party_key_new(struct party_key *out)
{
	out->seed = secret_random(32);
	out->exchange = secret_new(SCALAR_BYTES);
	group_scalar_random(secret_bytes(out->exchange));
}

enum qb_status party_key_from(const uint8_t seed[static 32], const uint8_t exchange[static 32], struct party_key *out,
                              struct qb_error *e)
{
	*out = (struct party_key){0};
	if (!group_scalar_ok(exchange))
		return qb_fail(e, QB_CRYPTO, "party key", NULL, "the exchange key is not a valid scalar");
	out->seed = secret_from(seed, 32);
	out->exchange = secret_from(exchange, SCALAR_BYTES);
	return QB_OK;
}

void party_key_free(struct party_key *key)
{
	secret_free(&key->seed);
	secret_free(&key->exchange);
}

void party_key_public(const struct party_key *key, struct party_public *out)
{
	sign_public(key->seed, out->sign);
	CHECK(group_mul_base(out->exchange, secret_view(key->exchange)));
}

enum qb_status party_public_check(const struct party_public *p, const char *whose, struct qb_error *e)
{
	if (crypto_core_ed25519_is_valid_point(p->sign) != 1)
		return qb_fail(e, QB_CRYPTO, whose, "ask for the public key again and compare its fingerprint",
		               "the signing key is not a valid Ed25519 key");
	if (!group_point_ok(p->exchange))
		return qb_fail(e, QB_CRYPTO, whose, "ask for the public key again and compare its fingerprint",
		               "the exchange key is not a valid point");
	return QB_OK;
}

void party_fingerprint_bytes(const struct party_public *p, uint8_t out[static PARTY_FINGERPRINT_BYTES])
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/key/fingerprint");
	transcript_field(&t, p->sign, sizeof p->sign);
	transcript_field(&t, p->exchange, sizeof p->exchange);
	transcript_end(&t, h);
	memcpy(out, h, PARTY_FINGERPRINT_BYTES);
}

void party_fingerprint(const struct party_public *p, char out[static PARTY_FINGERPRINT_TEXT])
{
	uint8_t h[PARTY_FINGERPRINT_BYTES];
	party_fingerprint_bytes(p, h);
	for (size_t i = 0; i < 8; i++)
		snprintf(out + 5 * i, 6, "%02x%02x%s", h[2 * i], h[2 * i + 1], i < 7 ? "-" : "");
}
