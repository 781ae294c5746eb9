/* Tree proofs of every size up to 70 verify, and no altered one does. */
#include "tests/hex.h"

#include "server/base/secret.h"
#include "server/ledger/tree.h"

#define LEAVES 70

static struct ledger_hash leaf[LEAVES], root[LEAVES + 1];
static struct tree_array array;
static struct tree_leaves leaves;

static int grow(void **state)
{
	(void)state;
	struct tree_range t = {0};
	tree_root(&t, &root[0]);
	for (uint8_t i = 0; i < LEAVES; i++) {
		hash_leaf(&leaf[i], &i, 1);
		tree_append(&t, &leaf[i]);
		tree_root(&t, &root[i + 1]);
	}
	leaves = tree_from_array(&array, leaf, LEAVES);
	return 0;
}

static void streaming_root_is_the_root(void **state)
{
	(void)state;
	struct ledger_hash r;
	for (uint64_t n = 0; n <= LEAVES; n++) {
		assert_int_equal(tree_root_of(&leaves, n, &r, NULL), QB_OK);
		assert_true(hash_equal(&r, &root[n]));
	}
	assert_int_equal(tree_root_of(&leaves, LEAVES + 1, &r, NULL), QB_RANGE);
}

static void every_inclusion_verifies_and_no_other(void **state)
{
	(void)state;
	for (uint64_t n = 1; n <= LEAVES; n++)
		for (uint64_t i = 0; i < n; i++) {
			struct tree_proof p;
			assert_int_equal(tree_inclusion(&leaves, i, n, &p, NULL), QB_OK);
			assert_int_equal(tree_check_inclusion(&leaf[i], i, n, &p, &root[n], NULL), QB_OK);
			assert_int_equal(tree_check_inclusion(&leaf[(i + 1) % LEAVES], i, n, &p, &root[n], NULL),
			                 QB_NO);
			if (n > 1)
				assert_int_equal(tree_check_inclusion(&leaf[i], (i + 1) % n, n, &p, &root[n], NULL),
				                 QB_NO);
			assert_int_equal(tree_check_inclusion(&leaf[i], i, n, &p, &root[n - 1], NULL), QB_NO);
			for (size_t k = 0; k < p.n; k++) {
				p.hash[k].b[k % 32] ^= 1;
				assert_int_equal(tree_check_inclusion(&leaf[i], i, n, &p, &root[n], NULL), QB_NO);
				p.hash[k].b[k % 32] ^= 1;
			}
			p.n++;
			assert_int_equal(tree_check_inclusion(&leaf[i], i, n, &p, &root[n], NULL), QB_NO);
		}
}

static void every_consistency_verifies_and_no_other(void **state)
{
	(void)state;
	for (uint64_t b = 1; b <= LEAVES; b++)
		for (uint64_t a = 1; a <= b; a++) {
			struct tree_proof p;
			assert_int_equal(tree_consistency(&leaves, a, b, &p, NULL), QB_OK);
			assert_int_equal(tree_check_consistency(a, &root[a], b, &root[b], &p, NULL), QB_OK);
			assert_int_equal(tree_check_consistency(a, &root[a - 1], b, &root[b], &p, NULL), QB_NO);
			assert_int_equal(tree_check_consistency(a, &root[a], b, &root[b - 1], &p, NULL), QB_NO);
			for (size_t k = 0; k < p.n; k++) {
				p.hash[k].b[31] ^= 0x80;
				assert_int_equal(tree_check_consistency(a, &root[a], b, &root[b], &p, NULL), QB_NO);
				p.hash[k].b[31] ^= 0x80;
			}
			if (p.n > 0) {
				p.n--;
				assert_int_equal(tree_check_consistency(a, &root[a], b, &root[b], &p, NULL), QB_NO);
			}
		}
}

static void sizes_without_a_proof(void **state)
{
	(void)state;
	struct tree_proof p;
	assert_int_equal(tree_inclusion(&leaves, 5, 5, &p, NULL), QB_RANGE);
	assert_int_equal(tree_inclusion(&leaves, 0, LEAVES + 1, &p, NULL), QB_RANGE);
	assert_int_equal(tree_consistency(&leaves, 0, 5, &p, NULL), QB_RANGE);
	assert_int_equal(tree_consistency(&leaves, 6, 5, &p, NULL), QB_RANGE);
	assert_int_equal(tree_consistency(&leaves, 6, LEAVES + 1, &p, NULL), QB_RANGE);
	p.n = 0;
	assert_int_equal(tree_check_consistency(0, &root[0], 5, &root[5], &p, NULL), QB_NO);
	assert_int_equal(tree_check_inclusion(&leaf[0], 0, 0, &p, &root[0], NULL), QB_NO);
}

static enum qb_status failing(void *state, uint64_t index, struct ledger_hash *out, struct qb_error *e)
{
	(void)state;
	*out = leaf[0];
	return index < 3 ? QB_OK : qb_fail(e, QB_IO, "leaf 3", NULL, "the disk is gone");
}

static void a_failing_store_is_reported(void **state)
{
	(void)state;
	struct tree_leaves broken = {failing, NULL, 8};
	struct tree_proof p;
	struct ledger_hash r;
	struct qb_error e = {0};
	assert_int_equal(tree_root_of(&broken, 8, &r, &e), QB_IO);
	assert_string_equal(e.where, "leaf 3");
	assert_int_equal(tree_inclusion(&broken, 0, 8, &p, NULL), QB_IO);
	assert_int_equal(tree_consistency(&broken, 3, 8, &p, NULL), QB_IO);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(streaming_root_is_the_root),
	    cmocka_unit_test(every_inclusion_verifies_and_no_other),
	    cmocka_unit_test(every_consistency_verifies_and_no_other),
	    cmocka_unit_test(sizes_without_a_proof),
	    cmocka_unit_test(a_failing_store_is_reported),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, grow, NULL);
}
