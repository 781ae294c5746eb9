/* One derivation and one padding for all ciphertexts of this room. */
#include "server/custody/aead.h"

#include <sodium.h>
#include <string.h>

#include "server/base/check.h"

_Static_assert(crypto_aead_xchacha20poly1305_ietf_ABYTES == AEAD_TAG_BYTES, "tag size");
_Static_assert(crypto_aead_xchacha20poly1305_ietf_KEYBYTES == 32 && crypto_aead_xchacha20poly1305_ietf_NPUBBYTES == 24,
               "key and nonce size");

void aead_seal(struct transcript *t, const void *ad, size_t ad_n, const uint8_t *plain, size_t n, uint8_t *out)
{
	uint8_t material[64];
	transcript_end(t, material);
	CHECK(crypto_aead_xchacha20poly1305_ietf_encrypt(out, NULL, plain, n, ad, ad_n, NULL, material + 32,
	                                                 material) == 0);
	secret_publish(out, n + AEAD_TAG_BYTES);
	wipe(material, sizeof material);
}

bool aead_open(struct transcript *t, const void *ad, size_t ad_n, const uint8_t *ct, size_t n, uint8_t *out)
{
	uint8_t material[64];
	transcript_end(t, material);
	bool ok = n >= AEAD_TAG_BYTES && crypto_aead_xchacha20poly1305_ietf_decrypt(out, NULL, NULL, ct, n, ad, ad_n,
	                                                                            material + 32, material) == 0;
	ok = secret_verdict(ok);
	if (!ok && n > AEAD_TAG_BYTES)
		memset(out, 0, n - AEAD_TAG_BYTES);
	wipe(material, sizeof material);
	return ok;
}

void pad_content(const void *content, size_t n, size_t capacity, uint8_t *out)
{
	CHECK(n <= capacity && capacity <= UINT32_MAX);
	for (int i = 0; i < 4; i++)
		out[i] = (uint8_t)(n >> (8 * i));
	if (n > 0)
		memcpy(out + 4, content, n);
	memset(out + 4 + n, 0, capacity - n);
}

static bool content_length(const uint8_t *padded, size_t capacity, size_t *n)
{
	secret_publish(padded, 4); /* its reader goes on with as many bytes */
	*n = (size_t)padded[0] | (size_t)padded[1] << 8 | (size_t)padded[2] << 16 | (size_t)padded[3] << 24;
	return *n <= capacity && secret_verdict(sodium_is_zero(padded + 4 + *n, capacity - *n) == 1);
}

bool unpad_content(const uint8_t *padded, size_t capacity, struct buf *out)
{
	size_t n;
	if (!content_length(padded, capacity, &n))
		return false;
	buf_put(out, padded + 4, n);
	return true;
}

bool unpad_here(uint8_t *padded, size_t capacity, size_t *n)
{
	if (!content_length(padded, capacity, n))
		return false;
	memmove(padded, padded + 4, *n);
	memset(padded + *n, 0, 4);
	return true;
}
