/* Tree, proofs and verifiers against the RFC 6962 reference vectors and a public set of probes, most of them negative.
 */
#include "tests/hex.h"
#include "tests/vectors/rfc6962.h"
#include "tests/vectors/rfc6962_probes.h"

#include "server/base/secret.h"
#include "server/ledger/tree.h"

#define COUNT(a) (sizeof(a) / sizeof *(a))

static struct ledger_hash leaf[8];
static struct tree_array array;
static struct tree_leaves leaves;

static int load(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(leaf); i++) {
		uint8_t in[32];
		size_t n = unhex_any(rfc6962_leaves[i], in, sizeof in);
		hash_leaf(&leaf[i], in, n);
	}
	leaves = tree_from_array(&array, leaf, COUNT(leaf));
	return 0;
}

static void roots(void **state)
{
	(void)state;
	struct ledger_hash r;
	struct tree_range t = {0};
	hash_empty(&r);
	same_hex(r.b, rfc6962_empty, 32);
	assert_int_equal(tree_root_of(&leaves, 0, &r, NULL), QB_OK);
	same_hex(r.b, rfc6962_empty, 32);
	for (size_t n = 1; n <= COUNT(leaf); n++) {
		tree_append(&t, &leaf[n - 1]);
		tree_root(&t, &r);
		same_hex(r.b, rfc6962_roots[n - 1], 32);
		assert_int_equal(tree_root_of(&leaves, n, &r, NULL), QB_OK);
		same_hex(r.b, rfc6962_roots[n - 1], 32);
	}
}

static void audit_paths(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(rfc6962_paths); i++) {
		struct tree_proof p;
		struct ledger_hash root;
		uint64_t index = (uint64_t)rfc6962_paths[i].leaf, size = (uint64_t)rfc6962_paths[i].size;
		assert_int_equal(tree_inclusion(&leaves, index, size, &p, NULL), QB_OK);
		assert_int_equal(p.n, rfc6962_paths[i].n);
		for (size_t k = 0; k < p.n; k++)
			same_hex(p.hash[k].b, rfc6962_paths[i].path[k], 32);
		unhex(rfc6962_roots[size - 1], root.b, 32);
		assert_int_equal(tree_check_inclusion(&leaf[index], index, size, &p, &root, NULL), QB_OK);
	}
}

static void consistency(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(rfc6962_consistency); i++) {
		struct tree_proof p;
		struct ledger_hash a, b;
		uint64_t first = (uint64_t)rfc6962_consistency[i].first,
		         second = (uint64_t)rfc6962_consistency[i].second;
		assert_int_equal(tree_consistency(&leaves, first, second, &p, NULL), QB_OK);
		assert_int_equal(p.n, rfc6962_consistency[i].n);
		for (size_t k = 0; k < p.n; k++)
			same_hex(p.hash[k].b, rfc6962_consistency[i].proof[k], 32);
		unhex(rfc6962_roots[first - 1], a.b, 32);
		unhex(rfc6962_roots[second - 1], b.b, 32);
		assert_int_equal(tree_check_consistency(first, &a, second, &b, &p, NULL), QB_OK);
	}
}

static void fill(struct tree_proof *p, const int *place, int n)
{
	p->n = (size_t)n;
	for (int k = 0; k < n; k++)
		unhex(probe_hashes[place[k]], p->hash[k].b, 32);
}

static void inclusion_probes(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(probe_inclusion); i++) {
		struct tree_proof p;
		struct ledger_hash a, root;
		fill(&p, probe_inclusion[i].proof, probe_inclusion[i].n);
		unhex(probe_hashes[probe_inclusion[i].a], a.b, 32);
		unhex(probe_hashes[probe_inclusion[i].b], root.b, 32);
		enum qb_status s =
		    tree_check_inclusion(&a, probe_inclusion[i].x, probe_inclusion[i].y, &p, &root, NULL);
		assert_int_equal(s, probe_inclusion[i].refuse ? QB_NO : QB_OK);
	}
}

static void consistency_probes(void **state)
{
	(void)state;
	for (size_t i = 0; i < COUNT(probe_consistency); i++) {
		struct tree_proof p;
		struct ledger_hash a, b;
		fill(&p, probe_consistency[i].proof, probe_consistency[i].n);
		unhex(probe_hashes[probe_consistency[i].a], a.b, 32);
		unhex(probe_hashes[probe_consistency[i].b], b.b, 32);
		enum qb_status s =
		    tree_check_consistency(probe_consistency[i].x, &a, probe_consistency[i].y, &b, &p, NULL);
		assert_int_equal(s, probe_consistency[i].refuse ? QB_NO : QB_OK);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(roots),
	    cmocka_unit_test(audit_paths),
	    cmocka_unit_test(consistency),
	    cmocka_unit_test(inclusion_probes),
	    cmocka_unit_test(consistency_probes),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, load, NULL);
}
