/* RFC 9162 tree over leaf hashes: the recursive definitions of section 2.1 in iterative or shallow form. */
#include "server/ledger/tree.h"

#include "server/base/check.h"

#include <string.h>

static enum qb_status array_get(void *state, uint64_t index, struct ledger_hash *out, struct qb_error *e)
{
	(void)e;
	const struct tree_array *a = state;
	*out = a->leaf[index];
	return QB_OK;
}

struct tree_leaves tree_from_array(struct tree_array *a, const struct ledger_hash *leaf, uint64_t n)
{
	a->leaf = leaf;
	return (struct tree_leaves){array_get, a, n};
}

void tree_append(struct tree_range *t, const struct ledger_hash *leaf)
{
	CHECK(t->size < TREE_LEAVES_MAX);
	struct ledger_hash carry = *leaf;
	int h = 0;
	for (; t->size >> h & 1; h++)
		hash_node(&carry, &t->edge[h], &carry);
	t->edge[h] = carry;
	t->size++;
}

void tree_root(const struct tree_range *t, struct ledger_hash *out)
{
	bool any = false;
	hash_empty(out);
	for (int h = 0; h < 64; h++) {
		if (!(t->size >> h & 1))
			continue;
		if (any)
			hash_node(out, &t->edge[h], out);
		else
			*out = t->edge[h];
		any = true;
	}
}

/* Root of leaves [from, from + n), n >= 1. */
static enum qb_status root_between(const struct tree_leaves *l, uint64_t from, uint64_t n, struct ledger_hash *out,
                                   struct qb_error *e)
{
	struct tree_range t = {0};
	for (uint64_t i = 0; i < n; i++) {
		struct ledger_hash leaf;
		enum qb_status s = l->get(l->state, from + i, &leaf, e);
		if (s != QB_OK)
			return s;
		tree_append(&t, &leaf);
	}
	tree_root(&t, out);
	return QB_OK;
}

/* Largest power of two smaller than n, n >= 2. */
static uint64_t split(uint64_t n)
{
	return UINT64_C(1) << (63 - __builtin_clzll(n - 1));
}

static enum qb_status add_between(const struct tree_leaves *l, uint64_t from, uint64_t n, struct tree_proof *out,
                                  struct qb_error *e)
{
	CHECK(out->n < TREE_PROOF_MAX);
	return root_between(l, from, n, &out->hash[out->n++], e);
}

static void reverse(struct tree_proof *p)
{
	for (size_t i = 0; i < p->n / 2; i++) {
		struct ledger_hash swap = p->hash[i];
		p->hash[i] = p->hash[p->n - 1 - i];
		p->hash[p->n - 1 - i] = swap;
	}
}

enum qb_status tree_root_of(const struct tree_leaves *leaves, uint64_t n, struct ledger_hash *out, struct qb_error *e)
{
	if (n > leaves->size || n > TREE_LEAVES_MAX)
		return qb_fail(e, QB_RANGE, "ledger tree", NULL, "there are fewer than %llu leaves",
		               (unsigned long long)n);
	return root_between(leaves, 0, n, out, e);
}

enum qb_status tree_inclusion(const struct tree_leaves *leaves, uint64_t index, uint64_t n, struct tree_proof *out,
                              struct qb_error *e)
{
	out->n = 0;
	if (index >= n || n > leaves->size || n > TREE_LEAVES_MAX)
		return qb_fail(e, QB_RANGE, "ledger tree", NULL, "there is no leaf %llu in a tree of %llu",
		               (unsigned long long)index, (unsigned long long)n);
	/* From the root down to the leaf, then turned round: RFC 9162 lists siblings from the leaf up. */
	uint64_t from = 0;
	while (n > 1) {
		uint64_t k = split(n);
		bool left = index - from < k;
		enum qb_status s = add_between(leaves, left ? from + k : from, left ? n - k : k, out, e);
		if (s != QB_OK)
			return s;
		from += left ? 0 : k;
		n = left ? k : n - k;
	}
	reverse(out);
	return QB_OK;
}

enum qb_status tree_consistency(const struct tree_leaves *leaves, uint64_t first, uint64_t second,
                                struct tree_proof *out, struct qb_error *e)
{
	out->n = 0;
	if (first == 0 || first > second || second > leaves->size || second > TREE_LEAVES_MAX)
		return qb_fail(e, QB_RANGE, "ledger tree", NULL, "no consistency proof from size %llu to %llu",
		               (unsigned long long)first, (unsigned long long)second);
	/* SUBPROOF(m, D_n, b): `whole` is b, true while the subtree looked at is still the complete first tree. */
	uint64_t from = 0, m = first, n = second;
	bool whole = true;
	while (m < n) {
		uint64_t k = split(n);
		bool left = m <= k;
		enum qb_status s = add_between(leaves, left ? from + k : from, left ? n - k : k, out, e);
		if (s != QB_OK)
			return s;
		if (left) {
			n = k;
		} else {
			from += k;
			m -= k;
			n -= k;
			whole = false;
		}
	}
	if (!whole) {
		enum qb_status s = add_between(leaves, from, m, out, e);
		if (s != QB_OK)
			return s;
	}
	reverse(out);
	return QB_OK;
}

static enum qb_status no(struct qb_error *e, const char *what)
{
	return qb_fail(e, QB_NO, "ledger proof", NULL, "%s", what);
}

enum qb_status tree_check_inclusion(const struct ledger_hash *leaf, uint64_t index, uint64_t size,
                                    const struct tree_proof *proof, const struct ledger_hash *root, struct qb_error *e)
{
	if (index >= size || size > TREE_LEAVES_MAX || proof->n > TREE_PROOF_MAX)
		return no(e, "the inclusion proof is about a leaf outside the tree");
	uint64_t fn = index, sn = size - 1;
	struct ledger_hash r = *leaf;
	for (size_t i = 0; i < proof->n; i++) {
		const struct ledger_hash *p = &proof->hash[i];
		if (sn == 0)
			return no(e, "the inclusion proof is too long");
		if ((fn & 1) || fn == sn) {
			hash_node(&r, p, &r);
			while (!(fn & 1) && fn != 0) {
				fn >>= 1;
				sn >>= 1;
			}
		} else {
			hash_node(&r, &r, p);
		}
		fn >>= 1;
		sn >>= 1;
	}
	if (sn != 0)
		return no(e, "the inclusion proof is too short");
	if (!hash_equal(&r, root))
		return no(e, "the inclusion proof does not lead to the root");
	return QB_OK;
}

/* RFC 9162 2.1.4.2 steps 3 to 7, for 0 < first < second. */
static enum qb_status check_growth(uint64_t first, const struct ledger_hash *first_root, uint64_t second,
                                   const struct ledger_hash *second_root, const struct tree_proof *proof,
                                   struct qb_error *e)
{
	bool power = (first & (first - 1)) == 0;
	size_t next = power ? 0 : 1;
	if (proof->n < (power ? 1U : 2U))
		return no(e, "the consistency proof is too short");
	uint64_t fn = first - 1, sn = second - 1;
	while (fn & 1) {
		fn >>= 1;
		sn >>= 1;
	}
	struct ledger_hash fr = power ? *first_root : proof->hash[0], sr = fr;
	for (; next < proof->n; next++) {
		const struct ledger_hash *c = &proof->hash[next];
		if (sn == 0)
			return no(e, "the consistency proof is too long");
		if ((fn & 1) || fn == sn) {
			hash_node(&fr, c, &fr);
			hash_node(&sr, c, &sr);
			while (!(fn & 1) && fn != 0) {
				fn >>= 1;
				sn >>= 1;
			}
		} else {
			hash_node(&sr, &sr, c);
		}
		fn >>= 1;
		sn >>= 1;
	}
	if (sn != 0)
		return no(e, "the consistency proof is too short");
	if (!hash_equal(&fr, first_root) || !hash_equal(&sr, second_root))
		return no(e, "the consistency proof does not connect the two roots: two different histories");
	return QB_OK;
}

enum qb_status tree_check_consistency(uint64_t first, const struct ledger_hash *first_root, uint64_t second,
                                      const struct ledger_hash *second_root, const struct tree_proof *proof,
                                      struct qb_error *e)
{
	if (first == 0 || first > second || second > TREE_LEAVES_MAX || proof->n > TREE_PROOF_MAX)
		return no(e, "the consistency proof is about sizes that make no sense");
	if (first < second)
		return check_growth(first, first_root, second, second_root, proof, e);
	if (proof->n != 0)
		return no(e, "the consistency proof is too long");
	if (!hash_equal(first_root, second_root))
		return no(e, "two trees of the same size have different roots");
	return QB_OK;
}
