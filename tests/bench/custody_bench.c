/*
 * Sealing and opening against the bare library: for each operation a loop of ours and a loop of just the scalar
 * multiplications, cipher and hash that it can't do without, by turns in one run. Then how the cost of a record goes
 * with their number, and a full opening on one processor and on two. Compare ratios within one run; machines differ.
 */
#include <sodium.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/custody/batch.h"
#include "server/custody/deal.h"
#include "server/ledger/tree.h"

#define ROUNDS 401
#define N_KEYS 5
#define NEEDED 3

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

static double median(double *took)
{
	qsort(took, ROUNDS, sizeof *took, by_size);
	return took[ROUNDS / 2];
}

/* ours and the bare calls by turns, so that whatever slows the machine slows both */
#define COMPARE(name, ours, bare)                                                                                      \
	do {                                                                                                           \
		double ours_us[ROUNDS], bare_us[ROUNDS];                                                               \
		for (int round = 0; round < ROUNDS; round++) {                                                         \
			double start = now_us();                                                                       \
			ours;                                                                                          \
			ours_us[round] = now_us() - start;                                                             \
			start = now_us();                                                                              \
			bare;                                                                                          \
			bare_us[round] = now_us() - start;                                                             \
		}                                                                                                      \
		double x_us = median(ours_us), y_us = median(bare_us);                                                 \
		printf("%-30s %9.1f us   bare %9.1f us   ratio %.2f\n", name, x_us, y_us, x_us / y_us);                \
	} while (0)

#define MEASURE(name, statement)                                                                                       \
	do {                                                                                                           \
		double took[ROUNDS];                                                                                   \
		for (int round = 0; round < ROUNDS; round++) {                                                         \
			double start = now_us();                                                                       \
			statement;                                                                                     \
			took[round] = now_us() - start;                                                                \
		}                                                                                                      \
		printf("%-30s %9.1f us\n", name, median(took));                                                        \
	} while (0)

static struct party_key key[N_KEYS];
static struct party_public pub[N_KEYS];
static struct keygen_context context;
static struct deal deals[N_KEYS];
static struct custody_group group;
static struct secret *share[N_KEYS];

static void generate(void)
{
	uint8_t campaign[CAMPAIGN_ID_BYTES] = {1};
	struct buf b = {0};
	for (int j = 0; j < N_KEYS; j++) {
		party_key_new(&key[j]);
		party_key_public(&key[j], &pub[j]);
	}
	CHECK(keygen_context_init(&context, campaign, 1, 1, N_KEYS, NEEDED, pub, NULL) == QB_OK);
	for (uint32_t i = 1; i <= N_KEYS; i++) {
		buf_clear(&b);
		CHECK(deal_make(&context, i, &key[i - 1], &b, NULL) == QB_OK);
		CHECK(deal_parse(&context, b.data, b.len, &deals[i - 1], NULL) == QB_OK);
	}
	for (uint32_t i = 1; i <= N_KEYS; i++)
		CHECK(keygen_share(&context, deals, i, &key[i - 1], &group, &share[i - 1], NULL) == QB_OK);
	buf_free(&b);
}

/* ---- what an operation can't do without ---- */

static uint8_t scalar[32], point[32], other[32], cipher_key[32], nonce[24], hash[64];
static uint8_t *plain, *ct;
static size_t plain_n;

static void bare_setup(void)
{
	crypto_core_ristretto255_scalar_random(scalar);
	crypto_core_ristretto255_random(point);
	crypto_core_ristretto255_random(other);
	randombytes_buf(cipher_key, sizeof cipher_key);
	randombytes_buf(nonce, sizeof nonce);
	plain_n = 4 + custody_fixed_size(RECORD_SLOT);
	plain = qb_alloc(1, plain_n);
	ct = qb_alloc(1, plain_n + crypto_aead_xchacha20poly1305_ietf_ABYTES);
	CHECK(crypto_aead_xchacha20poly1305_ietf_encrypt(ct, NULL, plain, plain_n, NULL, 0, NULL, nonce, cipher_key) ==
	      0);
}

static void bare(int base, int any, int add)
{
	uint8_t out[32];
	while (base-- > 0)
		CHECK(crypto_scalarmult_ristretto255_base(out, scalar) == 0);
	while (any-- > 0)
		CHECK(crypto_scalarmult_ristretto255(out, scalar, point) == 0);
	while (add-- > 0)
		CHECK(crypto_core_ristretto255_add(out, point, other) == 0);
}

static void bare_encrypt(void)
{
	CHECK(crypto_aead_xchacha20poly1305_ietf_encrypt(ct, NULL, plain, plain_n, NULL, 0, NULL, nonce, cipher_key) ==
	      0);
}

static void bare_decrypt(void)
{
	CHECK(crypto_aead_xchacha20poly1305_ietf_decrypt(plain, NULL, NULL, ct,
	                                                 plain_n + crypto_aead_xchacha20poly1305_ietf_ABYTES, NULL, 0,
	                                                 nonce, cipher_key) == 0);
}

static void bare_hash(void)
{
	CHECK(crypto_generichash(hash, sizeof hash, ct, plain_n + crypto_aead_xchacha20poly1305_ietf_ABYTES, NULL, 0) ==
	      0);
}

static struct record_header header(uint64_t index)
{
	struct record_header h = {
	    .type = RECORD_SLOT, .epoch = 1, .campaign = {1}, .index = index, .duration_ns = 64000000000};
	return h;
}

static void operations(void)
{
	struct record_header h = header(0);
	struct partial_authority a = {.purpose = PARTIAL_TRUTH, .hash = {1}};
	struct buf b = {0}, part[NEEDED] = {{0}}, content = {0};
	struct record rec;
	struct partial p[NEEDED];
	/* rG, rG2, rS; wG, wG2 of the proof */
	COMPARE("seal", (buf_clear(&b), CHECK(record_seal(&group, &h, "x", 1, &b, NULL) == QB_OK)),
	        (bare(2, 3, 0), bare_encrypt(), bare_hash()));
	/* zG - cR, zG2 - cW */
	COMPARE("check a record", CHECK(record_check(&group, b.data, b.len, &rec, NULL) == QB_OK),
	        (bare(1, 3, 2), bare_hash()));
	/* sR; wG, wR of the proof; that the share is the custodian's is checked once for all records */
	CHECK(partial_share_check(&group, 1, share[0], NULL) == QB_OK);
	COMPARE(
	    "partial opening",
	    (buf_clear(&part[0]), CHECK(partial_make_checked(&group, &rec, 1, share[0], &a, &part[0], NULL) == QB_OK)),
	    bare(1, 2, 0));
	for (uint32_t i = 0; i < NEEDED; i++) {
		buf_clear(&part[i]);
		CHECK(partial_make(&group, &rec, i + 1, share[i], &a, &part[i], NULL) == QB_OK);
		CHECK(partial_check(&group, &rec, &a, part[i].data, part[i].len, &p[i], NULL) == QB_OK);
	}
	/* zG - cY, zR - cD */
	COMPARE("check a partial opening",
	        CHECK(partial_check(&group, &rec, &a, part[0].data, part[0].len, &p[0], NULL) == QB_OK), bare(1, 3, 2));
	COMPARE("combine 3 and decrypt",
	        (buf_clear(&content), CHECK(partial_open(&group, &rec, p, NEEDED, &content, NULL) == QB_OK)),
	        (bare(0, NEEDED, NEEDED - 1), bare_decrypt()));
	buf_free(&b);
	for (int i = 0; i < NEEDED; i++)
		buf_free(&part[i]);
	buf_free(&content);
}

/* ---- many records ---- */

struct many {
	size_t n;
	struct buf *bytes;
	struct record *rec;
	const struct record **list;
};

static struct many seal_many(size_t n)
{
	struct many m = {n, QB_NEW_ARRAY(struct buf, n), QB_NEW_ARRAY(struct record, n),
	                 QB_NEW_ARRAY(const struct record *, n)};
	for (size_t i = 0; i < n; i++) {
		struct record_header h = header(i);
		CHECK(record_seal(&group, &h, "x", 1, &m.bytes[i], NULL) == QB_OK);
		m.list[i] = &m.rec[i];
	}
	return m;
}

static void check_many(struct many *m)
{
	for (size_t i = 0; i < m->n; i++)
		CHECK(record_check(&group, m->bytes[i].data, m->bytes[i].len, &m->rec[i], NULL) == QB_OK);
}

static void free_many(struct many *m)
{
	for (size_t i = 0; i < m->n; i++)
		buf_free(&m->bytes[i]);
	qb_free(m->bytes);
	qb_free(m->rec);
	qb_free(m->list);
}

static double open_many(const struct many *m, const struct batch_set *set, int threads)
{
	struct batch b = {.group = &group, .record = m->list, .n = m->n, .leaf = {1}, .threads = threads};
	struct buf *content = QB_NEW_ARRAY(struct buf, m->n);
	bool *opens = QB_NEW_ARRAY(bool, m->n);
	double start = now_us();
	CHECK(batch_open(&b, set, NEEDED, content, opens, NULL, NULL) == QB_OK);
	double took = now_us() - start;
	for (size_t i = 0; i < m->n; i++)
		buf_free(&content[i]);
	qb_free(content);
	qb_free(opens);
	return took;
}

static void growth(size_t n, bool both)
{
	uint8_t *part[NEEDED];
	struct batch_set set[NEEDED];
	double start = now_us();
	struct many m = seal_many(n);
	double sealed = now_us();
	check_many(&m);
	double checked = now_us();
	struct batch b = {.group = &group, .record = m.list, .n = n, .leaf = {1}};
	for (uint32_t i = 0; i < NEEDED; i++) {
		part[i] = qb_alloc(n, PARTIAL_BYTES);
		CHECK(batch_make(&b, i + 1, share[i], part[i], NULL, NULL) == QB_OK);
		set[i] = (struct batch_set){i + 1, part[i]};
	}
	double one = open_many(&m, set, 1), per = (double)n;
	printf("%7zu records: seal %.1f, check %.1f, open 3 of 5 %.1f us a record\n", n, (sealed - start) / per,
	       (checked - sealed) / per, one / per);
	if (both) {
		double two = open_many(&m, set, 2);
		printf(
		    "%7zu records opened, 3 of 5, proofs checked: %.2f s on one processor, %.2f s on two: %.2f times "
		    "as fast\n",
		    n, one / 1e6, two / 1e6, one / two);
	}
	for (int i = 0; i < NEEDED; i++)
		qb_free(part[i]);
	free_many(&m);
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

int main(int argc, char **argv)
{
	bool large = argc < 2 || strcmp(argv[1], "--short") != 0;
	CHECK(secret_setup(NULL) == QB_OK);
	generate();
	bare_setup();
	MEASURE("check 5 deals, make group", CHECK(keygen_group(&context, deals, &group, NULL) == QB_OK));
	operations();
	ledger();
	growth(1000, false);
	growth(10000, true);
	if (large)
		growth(100000, false);
	return 0;
}
