/*
 * Medians of the operations that decide how long a sealing, an opening and a check of the ledger take. One line each:
 * name, median in microseconds. Compare ratios within one run; machines differ.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "server/base/check.h"
#include "server/custody/deal.h"
#include "server/custody/partial.h"
#include "server/ledger/tree.h"

#define ROUNDS 201

static double now_us(void)
{
	struct timespec t;
	clock_gettime(CLOCK_MONOTONIC, &t);
	return (double)t.tv_sec * 1e6 + (double)t.tv_nsec / 1e3;
}

static int by_size(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return (x > y) - (x < y);
}

#define MEASURE(name, statement)                                                                                       \
	do {                                                                                                           \
		double took[ROUNDS];                                                                                   \
		for (int round = 0; round < ROUNDS; round++) {                                                         \
			double start = now_us();                                                                       \
			statement;                                                                                     \
			took[round] = now_us() - start;                                                                \
		}                                                                                                      \
		qsort(took, ROUNDS, sizeof *took, by_size);                                                            \
		printf("%-28s %9.1f us\n", name, took[ROUNDS / 2]);                                                    \
	} while (0)

static struct party_key key[3];
static struct party_public pub[3];
static struct keygen_context context;
static struct deal deals[3];
static struct custody_group group;
static struct secret *share[3];

static void generate(void)
{
	uint8_t campaign[CAMPAIGN_ID_BYTES] = {1};
	struct buf b = {0};
	for (int j = 0; j < 3; j++) {
		party_key_new(&key[j]);
		party_key_public(&key[j], &pub[j]);
	}
	CHECK(keygen_context_init(&context, campaign, 1, 1, 3, 2, pub, NULL) == QB_OK);
	for (uint32_t i = 1; i <= 3; i++) {
		buf_clear(&b);
		CHECK(deal_make(&context, i, &key[i - 1], &b, NULL) == QB_OK);
		CHECK(deal_parse(&context, b.data, b.len, &deals[i - 1], NULL) == QB_OK);
	}
	for (uint32_t i = 1; i <= 3; i++)
		CHECK(keygen_share(&context, deals, i, &key[i - 1], &group, &share[i - 1], NULL) == QB_OK);
	buf_free(&b);
}

static void records(void)
{
	struct record_header h = {.type = RECORD_SLOT, .epoch = 1, .campaign = {1}};
	struct partial_authority a = {.purpose = PARTIAL_TRUTH, .hash = {1}};
	struct buf b = {0}, part[2] = {{0}, {0}}, plain = {0};
	struct record rec;
	struct partial p[2];
	MEASURE("seal a slot record", (buf_clear(&b), CHECK(record_seal(&group, &h, "x", 1, &b, NULL) == QB_OK)));
	MEASURE("check a slot record", CHECK(record_check(&group, b.data, b.len, &rec, NULL) == QB_OK));
	CHECK(partial_make(&group, &rec, 2, share[1], &a, &part[1], NULL) == QB_OK);
	CHECK(partial_check(&group, &rec, &a, part[1].data, part[1].len, &p[1], NULL) == QB_OK);
	MEASURE("partial opening",
	        (buf_clear(&part[0]), CHECK(partial_make(&group, &rec, 1, share[0], &a, &part[0], NULL) == QB_OK)));
	MEASURE("check a partial opening",
	        CHECK(partial_check(&group, &rec, &a, part[0].data, part[0].len, &p[0], NULL) == QB_OK));
	MEASURE("combine 2 and decrypt",
	        (buf_clear(&plain), CHECK(partial_open(&group, &rec, p, 2, &plain, NULL) == QB_OK)));
	buf_free(&b);
	buf_free(&part[0]);
	buf_free(&part[1]);
	buf_free(&plain);
}

static void ledger(void)
{
	enum { N = 10000 };
	static struct ledger_hash leaf[N];
	struct tree_array array;
	struct tree_leaves leaves = tree_from_array(&array, leaf, N);
	struct ledger_hash root;
	struct tree_proof proof;
	for (int i = 0; i < N; i++)
		hash_leaf(&leaf[i], &i, sizeof i);
	MEASURE("root of 10000 leaves", CHECK(tree_root_of(&leaves, N, &root, NULL) == QB_OK));
	MEASURE("inclusion proof in 10000", CHECK(tree_inclusion(&leaves, 4321, N, &proof, NULL) == QB_OK));
	MEASURE("check an inclusion proof",
	        CHECK(tree_check_inclusion(&leaf[4321], 4321, N, &proof, &root, NULL) == QB_OK));
}

int main(void)
{
	CHECK(secret_setup(NULL) == QB_OK);
	generate();
	MEASURE("check 3 deals, make group", CHECK(keygen_group(&context, deals, &group, NULL) == QB_OK));
	records();
	ledger();
	return 0;
}
