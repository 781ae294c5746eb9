/* Repair of a lost share: the very share comes back, nobody learns another, and whoever cheats is named. */
#include "tests/unit/custody/scene.h"

#include <stdio.h>

#include "server/custody/repair.h"

static struct scene s; /* 3 of 5; custodian 2 lost the share and has new keys; 1, 3, 5 help */
static const uint32_t helpers[3] = {1, 3, 5};
static struct party_key receiver;
static struct repair_context c;
static struct repair_split splits[3];
static struct repair_sum sums[3];

static void make_split(size_t p)
{
	struct buf b = {0};
	uint32_t i = helpers[p];
	assert_int_equal(repair_split_make(&c, i, &s.key[i - 1], s.share[i - 1], &b, NULL), QB_OK);
	assert_true(b.len <= REPAIR_SPLIT_BYTES_MAX);
	assert_int_equal(repair_split_parse(&c, b.data, b.len, &splits[p], NULL), QB_OK);
	assert_int_equal(repair_split_check(&c, &splits[p], NULL), QB_OK);
	buf_free(&b);
}

static void make_sum(size_t p)
{
	struct buf b = {0};
	uint32_t j = helpers[p];
	assert_int_equal(repair_sum_make(&c, splits, j, &s.key[j - 1], &b, NULL), QB_OK);
	assert_int_equal(b.len, REPAIR_SUM_BYTES);
	assert_int_equal(repair_sum_parse(&c, b.data, b.len, &sums[p], NULL), QB_OK);
	assert_int_equal(repair_sum_check(&c, splits, &sums[p], NULL), QB_OK);
	buf_free(&b);
}

static enum qb_status context(struct repair_context *out, uint64_t attempt, uint32_t lost, const uint32_t *list)
{
	struct party_public pub, party[3];
	party_key_public(&receiver, &pub);
	for (size_t p = 0; p < 3; p++)
		party[p] = s.pub[list[p] >= 1 && list[p] <= 5 ? list[p] - 1 : p];
	return repair_context_init(out, &s.g, attempt, lost, &pub, list, party, NULL);
}

static int enter(void **state)
{
	(void)state;
	scene_make(&s, 5, 3);
	party_key_new(&receiver);
	assert_int_equal(context(&c, 1, 2, helpers), QB_OK);
	for (size_t p = 0; p < 3; p++)
		make_split(p);
	for (size_t p = 0; p < 3; p++)
		make_sum(p);
	return 0;
}

static int leave(void **state)
{
	(void)state;
	party_key_free(&receiver);
	scene_free(&s);
	return 0;
}

static enum qb_status whole(struct secret **share, struct qb_error *e)
{
	*e = (struct qb_error){0};
	return repair_share(&c, splits, sums, &receiver, share, e);
}

static void the_lost_share_comes_back(void **state)
{
	(void)state;
	struct secret *share;
	struct qb_error e;
	assert_int_equal(whole(&share, &e), QB_OK);
	assert_memory_equal(secret_view(share), secret_view(s.share[1]), SCALAR_BYTES);
	secret_free(&share);
}

/* Summands and sums are not shares, and differ from one repair to the next, although the share is the same. */
static void summands_are_fresh(void **state)
{
	(void)state;
	struct repair_split first = splits[0];
	make_split(0);
	for (size_t p = 0; p < 3; p++) {
		assert_memory_not_equal(first.commitment[p], splits[0].commitment[p], POINT_BYTES);
		for (size_t j = 0; j < 5; j++)
			assert_memory_not_equal(first.commitment[p], s.g.y[j], POINT_BYTES);
	}
	splits[0] = first;
}

static void split_resign(struct repair_split *d)
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/repair/split");
	transcript_field(&t, d->ctx, 64);
	transcript_u64(&t, d->from);
	transcript_u64(&t, d->k);
	for (uint32_t p = 0; p < d->k; p++)
		transcript_field(&t, d->commitment[p], POINT_BYTES);
	transcript_field(&t, d->ephemeral, POINT_BYTES);
	for (uint32_t p = 0; p < d->k; p++)
		transcript_field(&t, d->summand[p], SEALED_SHARE_BYTES);
	transcript_end(&t, d->hash);
	sign_bytes(s.key[d->from - 1].seed, d->hash, 64, d->signature);
}

static void sum_resign(struct repair_sum *d)
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/repair/sum");
	transcript_field(&t, d->splits, 64);
	transcript_u64(&t, d->from);
	transcript_field(&t, d->ephemeral, POINT_BYTES);
	transcript_field(&t, d->sum, SEALED_SHARE_BYTES);
	transcript_end(&t, d->hash);
	sign_bytes(s.key[d->from - 1].seed, d->hash, 64, d->signature);
}

static void refused(size_t p, const char *why)
{
	struct qb_error e = {0};
	struct buf b = {0};
	char who[40];
	snprintf(who, sizeof who, "repair by custodian %u", helpers[p]);
	split_resign(&splits[p]);
	assert_int_equal(repair_split_check(&c, &splits[p], &e), QB_CRYPTO);
	assert_string_equal(e.where, who);
	assert_non_null(strstr(e.what, why));
	assert_int_equal(repair_sum_make(&c, splits, 1, &s.key[0], &b, NULL), QB_CRYPTO);
	assert_int_equal(b.len, 0);
}

static void a_helper_splits_something_else(void **state)
{
	(void)state;
	struct repair_split good = splits[1];
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		scene_bad_point(q, splits[1].commitment[1]);
		refused(1, "not a valid point");
		splits[1] = good;
		scene_bad_point(q, splits[1].ephemeral);
		refused(1, "E is not a valid point");
		splits[1] = good;
	}
	memcpy(splits[1].commitment[0], s.g.y[0], POINT_BYTES);
	refused(1, "do not make up");
	splits[1] = good;
	struct repair_context other; /* the right summands for another lost share */
	struct buf b = {0};
	good = splits[0];
	assert_int_equal(context(&other, 1, 4, helpers), QB_OK);
	assert_int_equal(repair_split_make(&other, 1, &s.key[0], s.share[0], &b, NULL), QB_OK);
	assert_int_equal(repair_split_parse(&other, b.data, b.len, &splits[0], NULL), QB_OK);
	memcpy(splits[0].ctx, c.ctx, 64);
	refused(0, "do not make up");
	splits[0] = good;
	buf_free(&b);
}

/* The commitments are right, but the encrypted summand is not what they say: the helper who gets it names the sender.
 */
static void a_bad_summand_and_a_bad_sum(void **state)
{
	(void)state;
	struct qb_error e = {0};
	struct buf b = {0};
	struct secret *share;
	struct repair_split good = splits[2];
	struct repair_sum sum = sums[0];
	memcpy(splits[2].summand[0], good.summand[1], SEALED_SHARE_BYTES);
	split_resign(&splits[2]);
	assert_int_equal(repair_split_check(&c, &splits[2], NULL), QB_OK);
	assert_int_equal(repair_sum_make(&c, splits, 1, &s.key[0], &b, &e), QB_CRYPTO);
	assert_string_equal(e.where, "repair by custodian 5");
	assert_int_equal(b.len, 0);
	splits[2] = good;
	memcpy(sums[0].sum, sums[1].sum, SEALED_SHARE_BYTES);
	sum_resign(&sums[0]);
	assert_int_equal(repair_sum_check(&c, splits, &sums[0], NULL), QB_OK);
	assert_int_equal(whole(&share, &e), QB_CRYPTO);
	assert_string_equal(e.where, "repair by custodian 1");
	assert_null(share);
	sums[0] = sum;
	/* Properly encrypted, but another scalar: rebuilt from the field list. */
	uint8_t eph[SCALAR_BYTES], z[POINT_BYTES], wrong[SCALAR_BYTES];
	group_scalar_random(eph);
	group_scalar_random(wrong);
	assert_true(group_mul_base(sums[0].ephemeral, eph) && group_mul(z, eph, c.receiver.exchange));
	struct sealed_share_route way = {"quietbell/1/repair/sum-key", sums[0].splits, 1, 2, sums[0].ephemeral,
	                                 c.receiver.exchange};
	sealed_share_put(&way, z, wrong, sums[0].sum);
	sum_resign(&sums[0]);
	assert_int_equal(whole(&share, &e), QB_CRYPTO);
	assert_string_equal(e.where, "repair by custodian 1");
	for (int q = 0; q < SCENE_BAD_POINTS; q++) {
		scene_bad_point(q, sums[0].ephemeral);
		sum_resign(&sums[0]);
		assert_int_equal(whole(&share, &e), QB_CRYPTO);
		assert_non_null(strstr(e.what, "E is not a valid point"));
	}
	sums[0] = sum;
	buf_free(&b);
}

/* One helper shows two first messages: the sums then disagree about them, and no share comes out. */
static void different_first_messages_are_noticed(void **state)
{
	(void)state;
	struct repair_split good = splits[1];
	struct repair_sum sum = sums[2];
	struct secret *share;
	struct qb_error e = {0};
	make_split(1); /* shown to custodian 5 alone */
	make_sum(2);
	splits[1] = good;
	assert_int_equal(repair_sum_check(&c, splits, &sums[2], &e), QB_CRYPTO);
	assert_non_null(strstr(e.what, "other first messages"));
	assert_int_equal(whole(&share, &e), QB_CRYPTO);
	sums[2] = sum;
}

static void exact_parse_and_altered_bytes(void **state)
{
	(void)state;
	struct buf b = {0}, d = {0};
	struct repair_split split;
	struct repair_sum sum;
	assert_int_equal(repair_split_make(&c, 1, &s.key[0], s.share[0], &b, NULL), QB_OK);
	assert_int_equal(repair_sum_make(&c, splits, 1, &s.key[0], &d, NULL), QB_OK);
	for (size_t n = 0; n < b.len; n++)
		assert_int_equal(repair_split_parse(&c, b.data, n, &split, NULL), QB_FORMAT);
	for (size_t n = 0; n < d.len; n++)
		assert_int_equal(repair_sum_parse(&c, d.data, n, &sum, NULL), QB_FORMAT);
	for (size_t at = 0; at < b.len; at += 3) {
		b.data[at] ^= 1;
		assert_true(repair_split_parse(&c, b.data, b.len, &split, NULL) != QB_OK ||
		            repair_split_check(&c, &split, NULL) != QB_OK);
		b.data[at] ^= 1;
	}
	for (size_t at = 0; at < d.len; at++) {
		d.data[at] ^= 1;
		assert_true(repair_sum_parse(&c, d.data, d.len, &sum, NULL) != QB_OK ||
		            repair_sum_check(&c, splits, &sum, NULL) != QB_OK);
		d.data[at] ^= 1;
	}
	buf_u8(&b, 0);
	buf_u8(&d, 0);
	assert_int_equal(repair_split_parse(&c, b.data, b.len, &split, NULL), QB_FORMAT);
	assert_int_equal(repair_sum_parse(&c, d.data, d.len, &sum, NULL), QB_FORMAT);
	buf_free(&b);
	buf_free(&d);
}

static void replayed_from_another_attempt(void **state)
{
	(void)state;
	struct repair_context next;
	struct repair_split split = splits[0];
	struct buf b = {0};
	assert_int_equal(context(&next, 2, 2, helpers), QB_OK);
	assert_int_equal(repair_split_check(&next, &split, NULL), QB_CRYPTO);
	memcpy(split.ctx, next.ctx, 64);
	assert_int_equal(repair_split_check(&next, &split, NULL), QB_CRYPTO);
	split = splits[0];
	splits[0] = splits[1]; /* one helper twice */
	assert_int_equal(repair_sum_make(&c, splits, 5, &s.key[4], &b, NULL), QB_CRYPTO);
	splits[0] = split;
	/* The group after a resharing is another, even with the same people. */
	s.g.th[0] ^= 1;
	assert_int_equal(context(&next, 1, 2, helpers), QB_OK);
	s.g.th[0] ^= 1;
	assert_memory_not_equal(next.ctx, c.ctx, 64);
	buf_free(&b);
}

/* The one who lost the share can't help, an outsider can't receive, and wrong lists are refused. */
static void only_the_named_people(void **state)
{
	(void)state;
	struct repair_context out;
	struct secret *share;
	struct buf b = {0};
	struct qb_error e = {0};
	static const uint32_t lists[][3] = {{1, 2, 3}, {1, 1, 3}, {3, 1, 5}, {0, 1, 3}, {1, 3, 6}};
	for (size_t q = 0; q < sizeof lists / sizeof *lists; q++)
		assert_int_equal(context(&out, 1, 2, lists[q]), QB_RANGE);
	assert_int_equal(context(&out, 1, 0, helpers), QB_RANGE);
	assert_int_equal(context(&out, 1, 6, helpers), QB_RANGE);
	assert_int_equal(repair_split_make(&c, 4, &s.key[3], s.share[3], &b, NULL), QB_RANGE);
	assert_int_equal(repair_split_make(&c, 3, &s.key[0], s.share[2], &b, NULL), QB_RANGE);
	assert_int_equal(repair_split_make(&c, 3, &s.key[2], s.share[0], &b, NULL), QB_CRYPTO);
	assert_int_equal(repair_sum_make(&c, splits, 2, &s.key[1], &b, NULL), QB_RANGE);
	assert_int_equal(repair_share(&c, splits, sums, &s.key[1], &share, &e), QB_RANGE);
	assert_int_equal(b.len, 0);
	struct party_public bad = {{0}, {0}}, party[3] = {s.pub[0], s.pub[0], s.pub[4]};
	assert_int_equal(repair_context_init(&out, &s.g, 1, 2, &bad, helpers, party, NULL), QB_CRYPTO);
	party_key_public(&receiver, &bad);
	assert_int_equal(repair_context_init(&out, &s.g, 1, 2, &bad, helpers, party, NULL), QB_CRYPTO);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(the_lost_share_comes_back),
	    cmocka_unit_test(summands_are_fresh),
	    cmocka_unit_test(a_helper_splits_something_else),
	    cmocka_unit_test(a_bad_summand_and_a_bad_sum),
	    cmocka_unit_test(different_first_messages_are_noticed),
	    cmocka_unit_test(exact_parse_and_altered_bytes),
	    cmocka_unit_test(replayed_from_another_attempt),
	    cmocka_unit_test(only_the_named_people),
	};
	if (secret_setup(NULL) != QB_OK)
		return 1;
	return cmocka_run_group_tests(tests, enter, leave);
}
