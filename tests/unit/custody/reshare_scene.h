/* A resharing for the tests of this room: from a finished key generation (scene.h) to a new set of custodians. */
#ifndef QB_TESTS_CUSTODY_RESHARE_SCENE_H
#define QB_TESTS_CUSTODY_RESHARE_SCENE_H

#include "tests/unit/custody/scene.h"

#include "server/custody/complaint.h"
#include "server/custody/reshare.h"

struct reshare_scene {
	struct scene old, next; /* next: only n, k, keys, g and shares are filled */
	uint32_t dealer[SCENE_MAX];
	struct reshare_context c;
	struct deal deal[SCENE_MAX]; /* in the order of dealer */
};

static inline void reshare_scene_deal(struct reshare_scene *r, uint32_t place)
{
	struct buf b = {0};
	uint32_t i = r->dealer[place];
	assert_int_equal(reshare_make(&r->c, i, &r->old.key[i - 1], r->old.share[i - 1], &b, NULL), QB_OK);
	assert_int_equal(reshare_parse(&r->c, b.data, b.len, &r->deal[place], NULL), QB_OK);
	buf_free(&b);
}

/* From r->old and r->next's n, k and keys, as they are. */
static inline void reshare_scene_deals(struct reshare_scene *r, uint64_t attempt)
{
	struct party_public from[SCENE_MAX];
	for (uint32_t p = 0; p < r->old.g.k; p++)
		from[p] = r->old.pub[r->dealer[p] - 1];
	assert_int_equal(
	    reshare_context_init(&r->c, &r->old.g, attempt, r->dealer, from, r->next.n, r->next.k, r->next.pub, NULL),
	    QB_OK);
	for (uint32_t p = 0; p < r->old.g.k; p++)
		reshare_scene_deal(r, p);
}

static inline void reshare_scene_shares(struct reshare_scene *r)
{
	for (uint32_t j = 1; j <= r->next.n; j++) {
		secret_free(&r->next.share[j - 1]);
		assert_int_equal(
		    reshare_share(&r->c, r->deal, j, &r->next.key[j - 1], &r->next.g, &r->next.share[j - 1], NULL),
		    QB_OK);
	}
}

/* k of n to new_k of new_n, the last old.k custodians deal; all new people. */
static inline void reshare_scene_make(struct reshare_scene *r, uint32_t n, uint32_t k, uint32_t new_n, uint32_t new_k)
{
	memset(r, 0, sizeof *r);
	scene_make(&r->old, n, k);
	r->next.n = new_n;
	r->next.k = new_k;
	for (uint32_t j = 0; j < new_n; j++) {
		party_key_new(&r->next.key[j]);
		party_key_public(&r->next.key[j], &r->next.pub[j]);
	}
	for (uint32_t p = 0; p < k; p++)
		r->dealer[p] = n - k + 1 + p;
	reshare_scene_deals(r, 1);
}

static inline void reshare_scene_free(struct reshare_scene *r)
{
	scene_free(&r->old);
	scene_free(&r->next);
}

/* What a malicious dealer can do after a test changed a deal. */
static inline void reshare_scene_resign(struct reshare_scene *r, struct deal *d)
{
	deal_hash(d, d->hash);
	sign_bytes(r->old.key[d->from - 1].seed, d->hash, sizeof d->hash, d->signature);
}

#endif
