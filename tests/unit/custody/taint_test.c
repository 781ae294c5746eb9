/*
 * Proves that no secret decides a branch or an address in our own arithmetic: all random bytes are marked undefined,
 * the program runs under valgrind (it starts itself again there), and valgrind reports whatever undefined bytes decide.
 * What the code names as published (secret_publish, secret_verdict) is defined from there on. A branch and a table
 * look-up by a secret are planted to see that they are caught.
 */
#include "tests/unit/custody/reshare_scene.h"

#include <sodium.h>
#include <stdlib.h>
#include <sys/random.h>
#include <unistd.h>
#include <valgrind/memcheck.h>

#include "server/custody/box.h"
#include "server/custody/paper.h"
#include "server/custody/repair.h"
#include "server/custody/seed.h"

/* The hook of server/base/secret.c. */
void secret_published(const void *p, size_t n);
void secret_published(const void *p, size_t n)
{
	(void)VALGRIND_MAKE_MEM_DEFINED(p, n);
}

static void taint(void *p, size_t n)
{
	(void)VALGRIND_MAKE_MEM_UNDEFINED(p, n);
}

static bool is_tainted(const void *p, size_t n)
{
	uint8_t bits[20000];
	assert_true(n <= sizeof bits);
	assert_int_equal(VALGRIND_GET_VBITS(p, bits, n), 1);
	for (size_t i = 0; i < n; i++)
		if (bits[i] != 0)
			return true;
	return false;
}

/* ---- the library's source of random bytes, tainted ---- */

static const char *source_name(void)
{
	return "tainted";
}

static void source_bytes(void *const p, const size_t n)
{
	for (size_t at = 0; at < n;) {
		ssize_t got = getrandom((uint8_t *)p + at, n - at, 0);
		if (got <= 0)
			abort();
		at += (size_t)got;
	}
	taint(p, n);
}

static uint32_t source_word(void)
{
	uint32_t word;
	source_bytes(&word, sizeof word);
	return word;
}

static struct randombytes_implementation source = {
    .implementation_name = source_name, .random = source_word, .buf = source_bytes};

/* ---- errors so far ---- */

static int enter(void **state)
{
	*state = (void *)(uintptr_t)VALGRIND_COUNT_ERRORS;
	return 0;
}

#define NOTHING_REPORTED(state) assert_int_equal(VALGRIND_COUNT_ERRORS, (unsigned)(uintptr_t) * (state))

static void assert_published(const struct buf *b)
{
	assert_true(b->len > 0);
	assert_false(is_tainted(b->data, b->len));
}

/* ---- what must be caught ---- */

static void a_planted_branch_is_caught(void **state)
{
	struct secret *s = secret_random(SCALAR_BYTES);
	if ((secret_view(s)[7] & 1) != 0)
		puts("# odd");
	assert_int_equal(VALGRIND_COUNT_ERRORS, (unsigned)(uintptr_t)*state + 1);
	secret_free(&s);
}

static void a_planted_look_up_is_caught(void **state)
{
	static const volatile uint8_t table[256] = {1, 2, 3};
	struct secret *s = secret_random(SCALAR_BYTES);
	volatile uint8_t found = table[secret_view(s)[7]];
	(void)found;
	assert_int_equal(VALGRIND_COUNT_ERRORS, (unsigned)(uintptr_t)*state + 1);
	secret_free(&s);
}

static void a_planted_comparison_is_caught(void **state)
{
	uint8_t sum[SCALAR_BYTES], one[SCALAR_BYTES];
	group_scalar_random(sum);
	group_scalar_from_u64(one, 1);
	group_scalar_add(sum, sum, one); /* a secret through the library is one still */
	if (memcmp(sum, one, sizeof one) == 0)
		puts("# zero");
	assert_true(VALGRIND_COUNT_ERRORS > (unsigned)(uintptr_t)*state);
}

/* ---- what must be clean ---- */

static void polynomials_and_sums(void **state)
{
	uint8_t coef[5][SCALAR_BYTES], f[SCALAR_BYTES], lambda[SCALAR_BYTES], sum[SCALAR_BYTES] = {0};
	const uint32_t index[5] = {1, 3, 4, 9, 32};
	for (int m = 0; m < 5; m++)
		group_scalar_random(coef[m]);
	for (size_t i = 0; i < 5; i++) {
		group_poly_eval(f, (const uint8_t(*)[SCALAR_BYTES])coef, 5, index[i]);
		assert_true(is_tainted(f, sizeof f));
		assert_true(group_scalar_ok(f));
		assert_true(group_lagrange(lambda, index, 5, i));
		group_scalar_mul(f, f, lambda);
		group_scalar_add(sum, sum, f);
	}
	assert_true(is_tainted(sum, sizeof sum));
	NOTHING_REPORTED(state);
	secret_published(sum, sizeof sum);
	secret_published(coef, sizeof coef);
	assert_memory_equal(sum, coef[0], sizeof sum);
}

static void key_generation(void **state)
{
	struct scene s;
	struct buf b = {0};
	scene_make(&s, 3, 2);
	for (uint32_t i = 0; i < 3; i++)
		assert_true(is_tainted(secret_view(s.share[i]), SCALAR_BYTES));
	assert_int_equal(deal_make(&s.c, 1, &s.key[0], &b, NULL), QB_OK);
	assert_published(&b);
	buf_clear(&b);
	assert_int_equal(complaint_make(&s.c, &s.deal[0], 2, &s.key[1], &b, NULL), QB_OK);
	assert_published(&b);
	buf_free(&b);
	scene_free(&s);
	NOTHING_REPORTED(state);
}

static void resharing(void **state)
{
	struct reshare_scene r;
	struct buf b = {0};
	reshare_scene_make(&r, 3, 2, 4, 3);
	reshare_scene_shares(&r);
	for (uint32_t j = 0; j < 4; j++)
		assert_true(is_tainted(secret_view(r.next.share[j]), SCALAR_BYTES));
	assert_int_equal(reshare_make(&r.c, 2, &r.old.key[1], r.old.share[1], &b, NULL), QB_OK);
	assert_published(&b);
	buf_free(&b);
	reshare_scene_free(&r);
	NOTHING_REPORTED(state);
}

static void repair_of_a_share(void **state)
{
	struct scene s;
	struct repair_context c;
	struct repair_split splits[2];
	struct repair_sum sums[2];
	struct buf b = {0};
	struct secret *share;
	const uint32_t helper[2] = {1, 3};
	scene_make(&s, 3, 2);
	struct party_public who[2] = {s.pub[0], s.pub[2]};
	assert_int_equal(repair_context_init(&c, &s.g, 1, 2, &s.pub[1], helper, who, NULL), QB_OK);
	for (int p = 0; p < 2; p++) {
		uint32_t i = helper[p];
		buf_clear(&b);
		assert_int_equal(repair_split_make(&c, i, &s.key[i - 1], s.share[i - 1], &b, NULL), QB_OK);
		assert_published(&b);
		assert_int_equal(repair_split_parse(&c, b.data, b.len, &splits[p], NULL), QB_OK);
	}
	for (int p = 0; p < 2; p++) {
		buf_clear(&b);
		assert_int_equal(repair_sum_make(&c, splits, helper[p], &s.key[helper[p] - 1], &b, NULL), QB_OK);
		assert_published(&b);
		assert_int_equal(repair_sum_parse(&c, b.data, b.len, &sums[p], NULL), QB_OK);
	}
	assert_int_equal(repair_share(&c, splits, sums, &s.key[1], &share, NULL), QB_OK);
	assert_true(is_tainted(secret_view(share), SCALAR_BYTES));
	NOTHING_REPORTED(state);
	secret_published(secret_view(share), SCALAR_BYTES);
	secret_published(secret_view(s.share[1]), SCALAR_BYTES);
	assert_memory_equal(secret_view(share), secret_view(s.share[1]), SCALAR_BYTES);
	secret_free(&share);
	buf_free(&b);
	scene_free(&s);
}

/* A truth sealed with the scalar of a secret seed, opened by two custodians. */
static void sealing_and_opening(void **state)
{
	struct scene s;
	struct buf b = {0}, content = {0};
	struct record rec;
	struct partial p[2];
	struct partial_authority a = scene_authority(PARTIAL_TRUTH, 9);
	struct secret *seed = secret_random(SEED_BYTES);
	uint8_t r[SCALAR_BYTES], truth[] = "live: the secret of the slot";
	taint(truth, sizeof truth);
	scene_make(&s, 3, 2);
	struct record_header h = scene_header(&s, RECORD_SLOT, 7);
	seed_slot_scalar(seed, 7, r);
	assert_true(is_tainted(r, sizeof r));
	assert_int_equal(record_seal_with(&s.g, &h, r, truth, sizeof truth, &b, NULL), QB_OK);
	assert_published(&b);
	buf_clear(&b);
	assert_int_equal(record_seal(&s.g, &h, truth, sizeof truth, &b, NULL), QB_OK);
	assert_published(&b);
	assert_int_equal(record_check(&s.g, b.data, b.len, &rec, NULL), QB_OK);
	for (uint32_t i = 0; i < 2; i++) {
		struct buf part = {0};
		assert_int_equal(partial_make(&s.g, &rec, i + 1, s.share[i], &a, &part, NULL), QB_OK);
		assert_published(&part);
		assert_int_equal(partial_check(&s.g, &rec, &a, part.data, part.len, &p[i], NULL), QB_OK);
		taint(p[i].d, sizeof p[i].d); /* as on its way in a box to the other custodian */
		buf_free(&part);
	}
	assert_int_equal(partial_open(&s.g, &rec, p, 2, &content, NULL), QB_OK);
	assert_int_equal(content.len, sizeof truth);
	assert_true(is_tainted(content.data, content.len));
	NOTHING_REPORTED(state);
	secret_free(&seed);
	buf_free(&b);
	buf_wipe(&content);
	scene_free(&s);
}

static void recipes_and_boxes(void **state)
{
	const struct recipe_address at = {31, 2, RECIPE_SPARE};
	const uint8_t ctx[64] = "a context";
	uint8_t key[SLOT_KEY_BYTES], scalar[SCALAR_BYTES], prekey[POINT_BYTES], commitment[64], gain[] = "gain 1.0";
	struct secret *seed = secret_random(SEED_BYTES), *mine = recipe_prekey_new(prekey);
	struct buf b = {0}, out = {0};
	taint(gain, sizeof gain);
	seed_slot_key(seed, 31, key);
	seed_recipe_scalar(seed, &at, scalar);
	recipe_key_commitment(scene_campaign, 31, key, commitment);
	assert_int_equal(recipe_wrap(ctx, &at, prekey, scalar, key, gain, sizeof gain, &b, NULL), QB_OK);
	assert_published(&b);
	assert_int_equal(recipe_unwrap(ctx, scene_campaign, &at, b.data, b.len, mine, key, commitment, &out, NULL),
	                 QB_OK);
	assert_true(is_tainted(out.data, out.len));
	buf_clear(&b);
	buf_clear(&out);
	assert_int_equal(box_seal(prekey, BOX_ANSWER, "ad", 2, gain, sizeof gain, 64, &b, NULL), QB_OK);
	assert_published(&b);
	assert_int_equal(box_open(mine, BOX_ANSWER, "ad", 2, b.data, b.len, &out, NULL), QB_OK);
	assert_true(is_tainted(out.data, out.len));
	NOTHING_REPORTED(state);
	secret_free(&seed);
	secret_free(&mine);
	buf_free(&b);
	buf_wipe(&out);
}

static void paper(void **state)
{
	struct secret *s = secret_random(200);
	struct buf text = {0};
	paper_encode(secret_view(s), 200, "a share", &text);
	assert_true(is_tainted(text.data, text.len));
	NOTHING_REPORTED(state);
	secret_free(&s);
	buf_wipe(&text);
}

/* In the build with sanitizers, which valgrind can't run, or where it is not installed. */
static void nothing_is_proved_without_valgrind(void **state)
{
	(void)state;
	puts("# this run proves nothing: it is not under valgrind");
}

int main(int argc, char **argv)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test_setup(a_planted_branch_is_caught, enter),
	    cmocka_unit_test_setup(a_planted_look_up_is_caught, enter),
	    cmocka_unit_test_setup(a_planted_comparison_is_caught, enter),
	    cmocka_unit_test_setup(polynomials_and_sums, enter),
	    cmocka_unit_test_setup(key_generation, enter),
	    cmocka_unit_test_setup(resharing, enter),
	    cmocka_unit_test_setup(repair_of_a_share, enter),
	    cmocka_unit_test_setup(sealing_and_opening, enter),
	    cmocka_unit_test_setup(recipes_and_boxes, enter),
	    cmocka_unit_test_setup(paper, enter),
	};
	const struct CMUnitTest none[] = {cmocka_unit_test(nothing_is_proved_without_valgrind)};
	(void)argc;
	(void)argv;
	if (RUNNING_ON_VALGRIND == 0) {
#ifndef __SANITIZE_ADDRESS__
		execlp("valgrind", "valgrind", "-q", "--suppressions=tests/unit/custody/taint.supp", argv[0],
		       (char *)NULL);
#endif
		return cmocka_run_group_tests(none, NULL, NULL);
	}
	if (randombytes_set_implementation(&source) != 0 || secret_setup(NULL) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, NULL, NULL);
}
