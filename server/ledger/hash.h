/*
 * The two hashes of the ledger's tree, RFC 9162 2.1.1. They stand apart so that the tree knows no cryptographic
 * library.
 */
#ifndef QB_LEDGER_HASH_H
#define QB_LEDGER_HASH_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define LEDGER_HASH_BYTES 32

struct ledger_hash {
	uint8_t b[LEDGER_HASH_BYTES];
};

void hash_empty(struct ledger_hash *out);                         /* SHA-256 of nothing: the root of an empty tree */
void hash_leaf(struct ledger_hash *out, const void *p, size_t n); /* SHA-256(0x00 || p) */
void hash_node(struct ledger_hash *out, const struct ledger_hash *left,
               const struct ledger_hash *right); /* SHA-256(0x01 || left || right); out may alias */
bool hash_equal(const struct ledger_hash *a, const struct ledger_hash *b);

#endif
