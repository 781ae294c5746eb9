/* RFC 9162's leaf and node hashes over libsodium's SHA-256. */
#include "server/ledger/hash.h"

#include <sodium.h>

#include "server/base/check.h"

_Static_assert(crypto_hash_sha256_BYTES == LEDGER_HASH_BYTES, "SHA-256 size");

static void prefixed(struct ledger_hash *out, uint8_t prefix, const void *a, size_t na, const void *b, size_t nb)
{
	crypto_hash_sha256_state s;
	CHECK(crypto_hash_sha256_init(&s) == 0);
	CHECK(crypto_hash_sha256_update(&s, &prefix, 1) == 0);
	CHECK(na == 0 || crypto_hash_sha256_update(&s, a, na) == 0);
	CHECK(nb == 0 || crypto_hash_sha256_update(&s, b, nb) == 0);
	CHECK(crypto_hash_sha256_final(&s, out->b) == 0);
}

void hash_empty(struct ledger_hash *out)
{
	CHECK(crypto_hash_sha256(out->b, NULL, 0) == 0);
}

void hash_leaf(struct ledger_hash *out, const void *p, size_t n)
{
	prefixed(out, 0x00, p, n, NULL, 0);
}

void hash_node(struct ledger_hash *out, const struct ledger_hash *left, const struct ledger_hash *right)
{
	prefixed(out, 0x01, left->b, sizeof left->b, right->b, sizeof right->b);
}

bool hash_equal(const struct ledger_hash *a, const struct ledger_hash *b)
{
	return sodium_memcmp(a->b, b->b, sizeof a->b) == 0;
}
