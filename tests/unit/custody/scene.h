/*
 * A finished key generation for the tests of this room: n custodians with keys, deals, the group and everyone's share.
 */
#ifndef QB_TESTS_CUSTODY_SCENE_H
#define QB_TESTS_CUSTODY_SCENE_H

#include "tests/hex.h"

#include "server/base/secret.h"
#include "server/custody/deal.h"
#include "server/custody/keygen.h"
#include "server/custody/partial.h"
#include "server/custody/record.h"

#define SCENE_MAX 6

struct scene {
	uint32_t n, k;
	struct party_key key[SCENE_MAX];
	struct party_public pub[SCENE_MAX];
	struct keygen_context c;
	struct deal deal[SCENE_MAX];
	struct custody_group g;
	struct secret *share[SCENE_MAX];
};

static const uint8_t scene_campaign[CAMPAIGN_ID_BYTES] = "fells-spring-001";

static inline void scene_deal(struct scene *s, uint32_t i)
{
	struct buf b = {0};
	assert_int_equal(deal_make(&s->c, i, &s->key[i - 1], &b, NULL), QB_OK);
	assert_int_equal(deal_parse(&s->c, b.data, b.len, &s->deal[i - 1], NULL), QB_OK);
	buf_free(&b);
}

static inline void scene_parties(struct scene *s, uint32_t n, uint32_t k)
{
	memset(s, 0, sizeof *s);
	s->n = n;
	s->k = k;
	for (uint32_t j = 0; j < n; j++) {
		party_key_new(&s->key[j]);
		party_key_public(&s->key[j], &s->pub[j]);
	}
	assert_int_equal(keygen_context_init(&s->c, scene_campaign, 1, 1, n, k, s->pub, NULL), QB_OK);
	for (uint32_t i = 1; i <= n; i++)
		scene_deal(s, i);
}

static inline void scene_make(struct scene *s, uint32_t n, uint32_t k)
{
	scene_parties(s, n, k);
	for (uint32_t i = 1; i <= n; i++)
		assert_int_equal(keygen_share(&s->c, s->deal, i, &s->key[i - 1], &s->g, &s->share[i - 1], NULL), QB_OK);
}

static inline void scene_free(struct scene *s)
{
	for (uint32_t j = 0; j < s->n; j++) {
		party_key_free(&s->key[j]);
		secret_free(&s->share[j]);
	}
}

/* Signs a deal again after a test changed it: what a malicious custodian can do. */
static inline void scene_resign(struct scene *s, struct deal *d)
{
	deal_hash(d, d->hash);
	sign_bytes(s->key[d->from - 1].seed, d->hash, sizeof d->hash, d->signature);
}

static inline struct record_header scene_header(const struct scene *s, enum record_type type, uint64_t index)
{
	struct record_header h = {.type = type,
	                          .epoch = (uint32_t)s->g.seal_epoch,
	                          .index = index,
	                          .start_gps_ns = INT64_C(1488789012000000000),
	                          .duration_ns = UINT64_C(3600000000000)};
	memcpy(h.campaign, s->g.campaign, sizeof h.campaign);
	return h;
}

/* Seals `text` and checks the record; out keeps the bytes that rec points into. */
static inline void scene_seal(const struct scene *s, enum record_type type, uint64_t index, const char *text,
                              struct buf *out, struct record *rec)
{
	struct record_header h = scene_header(s, type, index);
	buf_clear(out);
	assert_int_equal(record_seal(&s->g, &h, text, strlen(text), out, NULL), QB_OK);
	assert_int_equal(record_check(&s->g, out->data, out->len, rec, NULL), QB_OK);
}

static inline struct partial_authority scene_authority(enum partial_purpose purpose, uint8_t fill)
{
	struct partial_authority a = {.purpose = purpose};
	memset(a.hash, fill, partial_hash_bytes(purpose));
	return a;
}

static inline void scene_partial(const struct scene *s, const struct record *rec, uint32_t i,
                                 const struct partial_authority *a, struct partial *out)
{
	struct buf b = {0};
	assert_int_equal(partial_make(&s->g, rec, i, s->share[i - 1], a, &b, NULL), QB_OK);
	assert_int_equal(b.len, PARTIAL_BYTES);
	assert_int_equal(partial_check(&s->g, rec, a, b.data, b.len, out, NULL), QB_OK);
	buf_free(&b);
}

/* Not a scalar of the field: s + l, the same value mod l. Zero-extended little-endian addition. */
static inline void scene_add_order(uint8_t s[static SCALAR_BYTES])
{
	static const uint8_t order[32] = {0xed, 0xd3, 0xf5, 0x5c, 0x1a, 0x63, 0x12, 0x58, 0xd6, 0x9c, 0xf7,
	                                  0xa2, 0xde, 0xf9, 0xde, 0x14, 0,    0,    0,    0,    0,    0,
	                                  0,    0,    0,    0,    0,    0,    0,    0,    0,    0x10};
	unsigned carry = 0;
	for (int i = 0; i < 32; i++) {
		carry += (unsigned)s[i] + order[i];
		s[i] = (uint8_t)carry;
		carry >>= 8;
	}
}

/* Encodings that every point field must refuse: identity, not canonical, negative, not on the curve. */
#define SCENE_BAD_POINTS 7
static inline void scene_bad_point(int which, uint8_t p[static POINT_BYTES])
{
	static const char *const bad[SCENE_BAD_POINTS] = {
	    "0000000000000000000000000000000000000000000000000000000000000000", /* identity */
	    "edffffffffffffffffffffffffffffffffffffffffffffffffffffffffffff7f", /* RFC 9496 A.2, not canonical */
	    "0100000000000000000000000000000000000000000000000000000000000000", /* RFC 9496 A.2, negative */
	    "26948d35ca62e643e26a83177332e6b6afeb9d08e4268b650f1f5bbd8d81d371", /* RFC 9496 A.2, not square */
	    "ffffffffffffffffffffffffffffffffffffffffffffffffffffffffffffffff",
	    /* second encodings, which the library takes: the identity's and the base point's with the highest bit set
	     */
	    "0000000000000000000000000000000000000000000000000000000000000080",
	    "e2f2ae0a6abc4e71a884a961c500515f58e30b6aa582dd8db6a65945e08d2df6"};
	unhex(bad[which], p, POINT_BYTES);
}

#define SCENE_MAIN(tests)                                                                                              \
	int main(void)                                                                                                 \
	{                                                                                                              \
		struct qb_error e = {0};                                                                               \
		if (secret_setup(&e) != QB_OK)                                                                         \
			return 1;                                                                                      \
		return cmocka_run_group_tests(tests, NULL, NULL);                                                      \
	}

#endif
