/* A service that rewrites its ledger: rolled back, forked, an entry altered, dropped or reordered. */
#include "tests/hex.h"

#include <stdio.h>

#include "server/ledger/entry.h"
#include "server/ledger/memory.h"

#define MANY 12

static struct secret *service;
static struct ledger_hash honest[MANY];

static int enter(void **state)
{
	(void)state;
	service = secret_random(32);
	for (uint64_t i = 0; i < MANY; i++) {
		char body[40];
		snprintf(body, sizeof body, "{\"n\":%d}", (int)i);
		struct entry en = {.kind = ENTRY_PUBLIC, .seq = i, .body = (uint8_t *)body, .body_len = strlen(body)};
		entry_sign(&en, service);
		if (entry_leaf_hash(&en, &honest[i], NULL) != QB_OK)
			return -1;
	}
	return 0;
}

static int leave(void **state)
{
	(void)state;
	secret_free(&service);
	return 0;
}

static struct head head_of(const struct ledger_hash *leaf, uint64_t n)
{
	struct tree_array a;
	struct tree_leaves l = tree_from_array(&a, leaf, n);
	struct head h = {.size = n, .time_gps_ns = (int64_t)n};
	assert_int_equal(tree_root_of(&l, n, &h.root, NULL), QB_OK);
	head_sign(&h, service);
	return h;
}

/* The proof the service would give from its present leaves. */
static struct tree_proof prove(const struct ledger_hash *leaf, uint64_t first, uint64_t second)
{
	struct tree_array a;
	struct tree_leaves l = tree_from_array(&a, leaf, second);
	struct tree_proof p;
	assert_int_equal(tree_consistency(&l, first, second, &p, NULL), QB_OK);
	return p;
}

static struct memory remembering(uint64_t n)
{
	struct memory m = {0};
	struct head h = head_of(honest, n);
	assert_int_equal(memory_accept(&m, &h, NULL, NULL), QB_OK);
	return m;
}

static void honest_growth_is_accepted(void **state)
{
	(void)state;
	for (uint64_t a = 0; a <= MANY; a++)
		for (uint64_t b = a; b <= MANY; b++) {
			struct memory m = remembering(a);
			struct head h = head_of(honest, b);
			struct tree_proof p = {0};
			if (a > 0)
				p = prove(honest, a, b);
			assert_int_equal(memory_accept(&m, &h, &p, NULL), QB_OK);
			assert_int_equal(m.last.size, b);
		}
}

static void refused(struct memory *m, const struct head *h, const struct tree_proof *p, const char *why)
{
	struct qb_error e = {0};
	struct memory before = *m;
	assert_int_equal(memory_accept(m, h, p, &e), QB_NO);
	assert_non_null(strstr(e.what, why));
	assert_memory_equal(m, &before, sizeof before);
}

static void rolled_back(void **state)
{
	(void)state;
	struct memory m = remembering(9);
	for (uint64_t n = 0; n < 9; n++) {
		struct head h = head_of(honest, n);
		refused(&m, &h, NULL, "smaller");
	}
}

static void altered_dropped_or_reordered(void **state)
{
	(void)state;
	for (int how = 0; how < 3; how++)
		for (size_t at = 0; at < 9; at++) {
			struct ledger_hash leaf[MANY];
			struct memory m = remembering(9);
			memcpy(leaf, honest, sizeof leaf);
			if (how == 0)
				leaf[at].b[0] ^= 1;
			else if (how == 1)
				memmove(&leaf[at], &leaf[at + 1], (MANY - 1 - at) * sizeof *leaf);
			else {
				leaf[at] = honest[(at + 1) % 9];
				leaf[(at + 1) % 9] = honest[at];
			}
			struct head same = head_of(leaf, 9), grown = head_of(leaf, 11);
			struct tree_proof p = prove(leaf, 9, 11), real = prove(honest, 9, 11);
			refused(&m, &same, NULL, "another root");
			refused(&m, &grown, &p, "does not continue");
			refused(&m, &grown, &real, "does not continue");
		}
}

/* Two histories shown to two clients: each sees growth, but neither can be moved to the other's. */
static void forked(void **state)
{
	(void)state;
	struct ledger_hash fork[MANY];
	memcpy(fork, honest, sizeof fork);
	fork[7].b[5] ^= 1;
	struct memory a = remembering(6), b = a;
	struct head ha = head_of(honest, 8), hb = head_of(fork, 8), later = head_of(fork, 12);
	struct tree_proof pa = prove(honest, 6, 8), pb = prove(fork, 6, 8), pl = prove(fork, 8, 12);
	assert_int_equal(memory_accept(&a, &ha, &pa, NULL), QB_OK);
	assert_int_equal(memory_accept(&b, &hb, &pb, NULL), QB_OK);
	refused(&a, &hb, NULL, "another root");
	refused(&a, &later, &pl, "does not continue");
	assert_int_equal(memory_accept(&b, &later, &pl, NULL), QB_OK);
}

static void another_service_or_a_loose_proof(void **state)
{
	(void)state;
	struct memory m = remembering(6), none = {0};
	struct head h = head_of(honest, 8), first = head_of(honest, 8);
	struct tree_proof p = prove(honest, 6, 8), longer = p;
	h.origin[0] ^= 1;
	refused(&m, &h, &p, "another service");
	h.origin[0] ^= 1;
	longer.n++;
	refused(&m, &h, &longer, "does not continue");
	refused(&m, &h, NULL, "does not continue");
	struct memory same = remembering(8);
	refused(&same, &h, &p, "does not continue"); /* equal sizes need an empty proof */
	assert_int_equal(memory_accept(&none, &first, &p, NULL), QB_NO);
	assert_false(none.seen);
}

/* An entry that is in the ledger can't be shown at another place or with another content. */
static void inclusion_of_what_is_not_there(void **state)
{
	(void)state;
	struct tree_array a;
	struct tree_leaves l = tree_from_array(&a, honest, MANY);
	struct head h = head_of(honest, MANY);
	for (uint64_t i = 0; i < MANY; i++) {
		struct tree_proof p;
		assert_int_equal(tree_inclusion(&l, i, MANY, &p, NULL), QB_OK);
		for (uint64_t j = 0; j < MANY; j++)
			assert_int_equal(tree_check_inclusion(&honest[i], j, MANY, &p, &h.root, NULL),
			                 i == j ? QB_OK : QB_NO);
		struct ledger_hash node; /* an inner node passed off as a leaf */
		hash_node(&node, &honest[i], &honest[i]);
		assert_int_equal(tree_check_inclusion(&node, i, MANY, &p, &h.root, NULL), QB_NO);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(honest_growth_is_accepted),        cmocka_unit_test(rolled_back),
	    cmocka_unit_test(altered_dropped_or_reordered),     cmocka_unit_test(forked),
	    cmocka_unit_test(another_service_or_a_loose_proof), cmocka_unit_test(inclusion_of_what_is_not_there),
	};
	struct qb_error e = {0};
	if (secret_setup(&e) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
