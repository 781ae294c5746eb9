/*
 * The Merkle tree of RFC 9162 over leaf hashes: roots, proofs, and the verifiers that a client or an auditor runs. It
 * stores nothing; leaves come from an array or from a callback.
 */
#ifndef QB_LEDGER_TREE_H
#define QB_LEDGER_TREE_H

#include "server/base/err.h"
#include "server/ledger/hash.h"

/* A tree is at most 2^63 leaves, so that no proof is longer than this. */
#define TREE_PROOF_MAX  64
#define TREE_LEAVES_MAX (UINT64_C(1) << 63)

struct tree_proof {
	size_t n;
	struct ledger_hash hash[TREE_PROOF_MAX];
};

/* Where leaf hashes come from. `get` may fail (a store can); its error is passed on. */
struct tree_leaves {
	enum qb_status (*get)(void *state, uint64_t index, struct ledger_hash *out, struct qb_error *e);
	void *state;
	uint64_t size; /* how many there are */
};

/* Leaves of an array; the array stays the caller's and must outlive the result. */
struct tree_array {
	const struct ledger_hash *leaf;
};
struct tree_leaves tree_from_array(struct tree_array *a, const struct ledger_hash *leaf, uint64_t n);

/*
 * A tree that only grows, kept as the roots of its complete subtrees (at most 64 hashes). Starts as all zeros.
 */
struct tree_range {
	uint64_t size;
	struct ledger_hash
	    edge[64]; /* edge[h]: root of the complete subtree of 2^h leaves, where bit h of size is set */
};
void tree_append(struct tree_range *t, const struct ledger_hash *leaf);
void tree_root(const struct tree_range *t, struct ledger_hash *out);

/*
 * Root of the first n leaves, and proofs about them.
 *
 * Given:    leaves          as above
 *           n, index        n <= leaves->size; index < n; 0 < first <= second <= leaves->size
 * Returned: *out
 * Errors:   QB_RANGE, or what `get` reports
 * Owns:     nothing
 * Ref:      RFC 9162 2.1.1, 2.1.3.1, 2.1.4.1
 */
enum qb_status tree_root_of(const struct tree_leaves *leaves, uint64_t n, struct ledger_hash *out,
                            struct qb_error *e) QB_MUST_USE;
enum qb_status tree_inclusion(const struct tree_leaves *leaves, uint64_t index, uint64_t n, struct tree_proof *out,
                              struct qb_error *e) QB_MUST_USE;
enum qb_status tree_consistency(const struct tree_leaves *leaves, uint64_t first, uint64_t second,
                                struct tree_proof *out, struct qb_error *e) QB_MUST_USE;

/*
 * The verifiers: QB_OK, or QB_NO with the reason. A proof that is too long, too short, or about sizes that make no
 * sense is a plain no.
 *
 * Ref:      RFC 9162 2.1.3.2, 2.1.4.2
 */
enum qb_status tree_check_inclusion(const struct ledger_hash *leaf, uint64_t index, uint64_t size,
                                    const struct tree_proof *proof, const struct ledger_hash *root,
                                    struct qb_error *e) QB_MUST_USE;
enum qb_status tree_check_consistency(uint64_t first, const struct ledger_hash *first_root, uint64_t second,
                                      const struct ledger_hash *second_root, const struct tree_proof *proof,
                                      struct qb_error *e) QB_MUST_USE;

#endif
