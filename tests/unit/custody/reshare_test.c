/* Resharing: the key and the old records stay, the shares and who holds them change. */
#include "tests/unit/custody/reshare_scene.h"

/* The first k of `who` open rec with the shares of s. */
static enum qb_status open_with(const struct scene *s, const struct record *rec, const uint32_t *who, uint32_t n,
                                struct buf *out)
{
	struct partial_authority a = scene_authority(PARTIAL_TRUTH, 7);
	struct partial p[SCENE_MAX];
	for (uint32_t i = 0; i < n; i++)
		scene_partial(s, rec, who[i], &a, &p[i]);
	buf_clear(out);
	return partial_open(&s->g, rec, p, n, out, NULL);
}

static void old_and_new_records_open_with_new_shares(void **state)
{
	(void)state;
	struct reshare_scene r;
	struct buf before = {0}, after = {0}, plain = {0};
	struct record first, second;
	reshare_scene_make(&r, 3, 2, 5, 3);
	scene_seal(&r.old, RECORD_SLOT, 4, "sealed before", &before, &first);
	reshare_scene_shares(&r);
	const struct custody_group *g = &r.next.g;
	assert_memory_equal(g->s, r.old.g.s, POINT_BYTES);
	assert_memory_equal(g->seal_th, r.old.g.th, 64);
	assert_memory_equal(g->g2, r.old.g.g2, POINT_BYTES);
	assert_memory_equal(g->ctx, r.old.g.ctx, 64);
	assert_memory_not_equal(g->th, r.old.g.th, 64);
	assert_int_equal(g->epoch, 2);
	assert_int_equal(g->seal_epoch, 1);
	scene_seal(&r.next, RECORD_SLOT, 5, "sealed after", &after, &second);
	assert_int_equal(record_check(&r.old.g, after.data, after.len, &second, NULL),
	                 QB_OK); /* one key, one binding */
	assert_int_equal(record_check(g, before.data, before.len, &first, NULL), QB_OK);
	static const uint32_t sets[][3] = {{1, 2, 3}, {3, 4, 5}, {5, 1, 4}};
	for (size_t q = 0; q < 3; q++) {
		assert_int_equal(open_with(&r.next, &first, sets[q], 3, &plain), QB_OK);
		assert_string_equal((char *)plain.data, "sealed before");
		assert_int_equal(open_with(&r.next, &second, sets[q], 3, &plain), QB_OK);
		assert_string_equal((char *)plain.data, "sealed after");
	}
	assert_int_equal(open_with(&r.next, &first, sets[0], 2, &plain), QB_CRYPTO); /* 2 no longer suffice */
	buf_free(&before);
	buf_free(&after);
	buf_free(&plain);
	reshare_scene_free(&r);
}

/* An opening under way with old shares can't be completed by new ones: each is bound to its epoch's th and Y. */
static void partials_belong_to_their_epoch(void **state)
{
	(void)state;
	struct reshare_scene r;
	struct buf b = {0}, part = {0};
	struct record rec;
	struct partial out;
	struct partial_authority a = scene_authority(PARTIAL_TRUTH, 7);
	reshare_scene_make(&r, 3, 2, 3, 2);
	reshare_scene_shares(&r);
	scene_seal(&r.old, RECORD_SLOT, 1, "x", &b, &rec);
	assert_int_equal(partial_make(&r.old.g, &rec, 1, r.old.share[0], &a, &part, NULL), QB_OK);
	assert_int_equal(partial_check(&r.old.g, &rec, &a, part.data, part.len, &out, NULL), QB_OK);
	assert_int_equal(partial_check(&r.next.g, &rec, &a, part.data, part.len, &out, NULL), QB_CRYPTO);
	assert_int_equal(partial_make(&r.next.g, &rec, 1, r.old.share[0], &a, &part, NULL), QB_CRYPTO);
	/* th alone matters too: the same Y under another transcript is another statement. */
	struct custody_group mixed = r.old.g;
	memcpy(mixed.th, r.next.g.th, 64);
	assert_int_equal(partial_check(&mixed, &rec, &a, part.data, part.len, &out, NULL), QB_CRYPTO);
	buf_free(&b);
	buf_free(&part);
	reshare_scene_free(&r);
}

/* Twice over, with people who stay, leave and join, and the dealers in a gap: the first record still opens. */
static void a_second_resharing_follows_the_first(void **state)
{
	(void)state;
	struct reshare_scene r, again = {0};
	struct buf b = {0}, plain = {0};
	struct record rec;
	reshare_scene_make(&r, 4, 3, 5, 2);
	scene_seal(&r.old, RECORD_CLAIM, 1, "first epoch", &b, &rec);
	r.dealer[0] = 1; /* 1, 3, 4 */
	party_key_free(&r.next.key[4]);
	r.next.key[4].seed = secret_from(secret_view(r.old.key[0].seed), 32); /* old 1 is new 5 */
	r.next.key[4].exchange = secret_from(secret_view(r.old.key[0].exchange), 32);
	r.next.pub[4] = r.old.pub[0];
	reshare_scene_deals(&r, 2);
	reshare_scene_shares(&r);
	again.old = r.next;
	again.next.n = 3;
	again.next.k = 2;
	for (uint32_t j = 0; j < 3; j++) {
		party_key_new(&again.next.key[j]);
		party_key_public(&again.next.key[j], &again.next.pub[j]);
	}
	again.dealer[0] = 2;
	again.dealer[1] = 5;
	reshare_scene_deals(&again, 1);
	reshare_scene_shares(&again);
	assert_int_equal(again.next.g.epoch, 3);
	assert_int_equal(again.next.g.seal_epoch, 1);
	struct partial_authority a = scene_authority(PARTIAL_CLAIMS, 7);
	struct partial p[2];
	assert_int_equal(record_check(&again.next.g, b.data, b.len, &rec, NULL), QB_OK);
	scene_partial(&again.next, &rec, 3, &a, &p[0]);
	scene_partial(&again.next, &rec, 1, &a, &p[1]);
	assert_int_equal(partial_open(&again.next.g, &rec, p, 2, &plain, NULL), QB_OK);
	assert_string_equal((char *)plain.data, "first epoch");
	buf_free(&b);
	buf_free(&plain);
	scene_free(&again.next);
	reshare_scene_free(&r);
}

static void certificate_of_the_new_set(void **state)
{
	(void)state;
	struct reshare_scene r;
	struct custody_group g;
	struct buf b = {0};
	uint8_t sig[SCENE_MAX][SIGN_BYTES];
	reshare_scene_make(&r, 3, 2, 4, 3);
	reshare_scene_shares(&r);
	for (uint32_t j = 0; j < 4; j++)
		keygen_certificate_sign(&r.next.g, r.next.key[j].seed, sig[j]);
	keygen_certificate_encode(&r.next.g, (const uint8_t(*)[SIGN_BYTES])sig, &b);
	assert_int_equal(reshare_certificate_verify(&r.c, r.deal, b.data, b.len, &g, NULL), QB_OK);
	assert_memory_equal(&g, &r.next.g, sizeof g);
	for (size_t at = 0; at < b.len; at += 5) {
		b.data[at] ^= 1;
		assert_int_not_equal(reshare_certificate_verify(&r.c, r.deal, b.data, b.len, &g, NULL), QB_OK);
		b.data[at] ^= 1;
	}
	for (size_t n = 0; n < b.len; n += 7)
		assert_int_equal(reshare_certificate_verify(&r.c, r.deal, b.data, n, &g, NULL), QB_FORMAT);
	reshare_scene_deal(&r, 0); /* another deal than the one certified */
	assert_int_equal(reshare_certificate_verify(&r.c, r.deal, b.data, b.len, &g, NULL), QB_CRYPTO);
	buf_free(&b);
	reshare_scene_free(&r);
}

static void contexts_that_are_refused(void **state)
{
	(void)state;
	struct reshare_scene r;
	struct reshare_context c;
	struct party_public from[3], party[SCENE_MAX];
	reshare_scene_make(&r, 4, 3, 5, 3);
	memcpy(from, r.c.from, sizeof from);
	memcpy(party, r.next.pub, sizeof party);
	static const struct {
		uint32_t dealer[3], n, k;
		enum qb_status want;
	} cases[] = {
	    {{1, 2, 3}, 5, 3, QB_OK},    {{1, 2, 2}, 5, 3, QB_RANGE}, {{2, 1, 3}, 5, 3, QB_RANGE},
	    {{0, 1, 2}, 5, 3, QB_RANGE}, {{2, 3, 5}, 5, 3, QB_RANGE}, {{1, 2, 3}, 5, 1, QB_RANGE},
	    {{1, 2, 3}, 5, 5, QB_RANGE}, {{1, 2, 3}, 2, 2, QB_RANGE}, {{1, 2, 3}, CUSTODY_MAX + 1, 3, QB_RANGE},
	};
	for (size_t q = 0; q < sizeof cases / sizeof *cases; q++)
		assert_int_equal(
		    reshare_context_init(&c, &r.old.g, 1, cases[q].dealer, from, cases[q].n, cases[q].k, party, NULL),
		    cases[q].want);
	party[4] = party[0];
	assert_int_equal(reshare_context_init(&c, &r.old.g, 1, r.dealer, from, 5, 3, party, NULL), QB_CRYPTO);
	memset(party[4].exchange, 0, POINT_BYTES);
	assert_int_equal(reshare_context_init(&c, &r.old.g, 1, r.dealer, from, 5, 3, party, NULL), QB_CRYPTO);
	from[1] = from[0];
	assert_int_equal(reshare_context_init(&c, &r.old.g, 1, r.dealer, from, 5, 3, r.next.pub, NULL), QB_CRYPTO);
	r.old.g.epoch = UINT32_MAX;
	assert_int_equal(reshare_context_init(&c, &r.old.g, 1, r.dealer, r.c.from, 5, 3, r.next.pub, NULL), QB_RANGE);
	reshare_scene_free(&r);
}

static void only_a_dealer_with_their_share_can_deal(void **state)
{
	(void)state;
	struct reshare_scene r;
	struct buf b = {0};
	struct secret *part;
	reshare_scene_make(&r, 3, 2, 3, 2); /* 2 and 3 deal */
	assert_int_equal(reshare_make(&r.c, 1, &r.old.key[0], r.old.share[0], &b, NULL), QB_RANGE);
	assert_int_equal(reshare_make(&r.c, 2, &r.old.key[2], r.old.share[1], &b, NULL), QB_RANGE);
	assert_int_equal(reshare_make(&r.c, 2, &r.old.key[1], r.old.share[2], &b, NULL), QB_CRYPTO);
	assert_int_equal(b.len, 0);
	assert_int_equal(reshare_take(&r.c, &r.deal[0], 2, &r.next.key[0], &part, NULL), QB_RANGE);
	assert_int_equal(reshare_take(&r.c, &r.deal[0], 4, &r.next.key[0], &part, NULL), QB_RANGE);
	buf_free(&b);
	reshare_scene_free(&r);
}

static const struct CMUnitTest tests[] = {
    cmocka_unit_test(old_and_new_records_open_with_new_shares),
    cmocka_unit_test(partials_belong_to_their_epoch),
    cmocka_unit_test(a_second_resharing_follows_the_first),
    cmocka_unit_test(certificate_of_the_new_set),
    cmocka_unit_test(contexts_that_are_refused),
    cmocka_unit_test(only_a_dealer_with_their_share_can_deal),
};
SCENE_MAIN(tests)
