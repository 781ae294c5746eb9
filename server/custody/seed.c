/* The draw seed and everything derived from it. */
#include "server/custody/seed.h"

#include <string.h>

#include "server/base/buf.h"
#include "server/base/check.h"
#include "server/base/text.h"

void seed_commit(const uint8_t ctx[static 64], uint64_t sealing_attempt, uint64_t who,
                 const uint8_t contribution[static CONTRIBUTION_BYTES], uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/seal/contribution");
	transcript_field(&t, ctx, 64);
	transcript_u64(&t, sealing_attempt);
	transcript_u64(&t, who);
	transcript_field(&t, contribution, CONTRIBUTION_BYTES);
	transcript_end(&t, out);
	secret_publish(out, 64);
}

bool seed_commit_matches(const uint8_t ctx[static 64], uint64_t sealing_attempt, uint64_t who,
                         const uint8_t contribution[static CONTRIBUTION_BYTES], const uint8_t commitment[static 64])
{
	uint8_t got[64];
	seed_commit(ctx, sealing_attempt, who, contribution, got);
	return same_bytes(got, commitment, sizeof got);
}

struct secret *seed_draw(const uint8_t ctx[static 64], uint64_t sealing_attempt, uint64_t first_slot,
                         const uint8_t (*contribution)[CONTRIBUTION_BYTES], uint32_t n)
{
	struct transcript t;
	struct secret *seed = secret_new(SEED_BYTES);
	CHECK(n >= 1 && n <= CUSTODY_MAX);
	transcript_begin(&t, "quietbell/1/draw/seed");
	transcript_field(&t, ctx, 64);
	transcript_u64(&t, sealing_attempt);
	transcript_u64(&t, first_slot);
	for (uint32_t j = 0; j <= n; j++)
		transcript_field(&t, contribution[j], CONTRIBUTION_BYTES);
	transcript_end(&t, secret_bytes(seed));
	return seed;
}

static void begin(struct transcript *t, const char *label, const struct secret *seed)
{
	CHECK(secret_size(seed) == SEED_BYTES);
	transcript_begin(t, label);
	transcript_field(t, secret_view(seed), SEED_BYTES);
}

static void finish_bytes(struct transcript *t, uint8_t out[static 32])
{
	uint8_t h[64];
	transcript_end(t, h);
	memcpy(out, h, 32);
	wipe(h, sizeof h);
}

static void finish_scalar(struct transcript *t, uint8_t out[static SCALAR_BYTES])
{
	group_challenge(t, out);
	CHECK(group_scalar_ok(out)); /* fails with probability 2^-252 */
}

void seed_slot_truth(const struct secret *seed, uint64_t slot, uint8_t truth[static TRUTH_SEED_BYTES])
{
	struct transcript t;
	begin(&t, "quietbell/1/slot/truth", seed);
	transcript_u64(&t, slot);
	finish_bytes(&t, truth);
}

void seed_slot_scalar(const struct secret *seed, uint64_t slot, uint8_t r[static SCALAR_BYTES])
{
	struct transcript t;
	begin(&t, "quietbell/1/slot/record-scalar", seed);
	transcript_u64(&t, slot);
	finish_scalar(&t, r);
}

void seed_slot_key(const struct secret *seed, uint64_t slot, uint8_t key[static SLOT_KEY_BYTES])
{
	struct transcript t;
	begin(&t, "quietbell/1/slot/key", seed);
	transcript_u64(&t, slot);
	finish_bytes(&t, key);
}

void seed_recipe_scalar(const struct secret *seed, const struct recipe_address *at, uint8_t scalar[static SCALAR_BYTES])
{
	struct transcript t;
	begin(&t, "quietbell/1/slot/recipe-scalar", seed);
	transcript_u64(&t, at->slot);
	transcript_u64(&t, at->station);
	transcript_u64(&t, (uint64_t)at->place);
	finish_scalar(&t, scalar);
}

void seed_campaign_truth(const struct secret *seed, uint8_t truth[static TRUTH_SEED_BYTES])
{
	struct transcript t;
	begin(&t, "quietbell/1/draw/campaign", seed);
	finish_bytes(&t, truth);
}

void seed_record_scalar(const struct secret *seed, uint8_t r[static SCALAR_BYTES])
{
	struct transcript t;
	begin(&t, "quietbell/1/draw/seed-record-scalar", seed);
	finish_scalar(&t, r);
}

double seed_uniform(const uint8_t truth[static TRUTH_SEED_BYTES], uint64_t m)
{
	struct transcript t;
	uint8_t h[64];
	transcript_begin(&t, "quietbell/1/draw/uniform");
	transcript_field(&t, truth, TRUTH_SEED_BYTES);
	transcript_u64(&t, m);
	transcript_end(&t, h);
	double u = uniform_from_u64(le64_load(h));
	wipe(h, sizeof h);
	return u;
}

uint64_t seed_audit(const struct secret *seed)
{
	struct transcript t;
	uint8_t h[64];
	begin(&t, "quietbell/1/audit/seed", seed);
	transcript_end(&t, h);
	return le64_load(h) & (UINT64_MAX >> 1);
}

void seal_key_statement(const uint8_t ctx[static 64], uint64_t sealing_attempt, const uint8_t point[static POINT_BYTES],
                        uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/seal/key");
	transcript_field(&t, ctx, 64);
	transcript_u64(&t, sealing_attempt);
	transcript_field(&t, point, POINT_BYTES);
	transcript_end(&t, out);
}

void seal_output_begin(struct transcript *t, const uint8_t ctx[static 64], uint64_t sealing_attempt,
                       const uint8_t point[static POINT_BYTES])
{
	transcript_begin(t, "quietbell/1/seal/output");
	transcript_field(t, ctx, 64);
	transcript_u64(t, sealing_attempt);
	transcript_field(t, point, POINT_BYTES);
}

void seal_output_record(struct transcript *t, const uint8_t record_id[static 64], const uint8_t commitment[static 64])
{
	transcript_field(t, record_id, 64);
	transcript_field(t, commitment, 64);
}

void seal_output_end(struct transcript *t, const uint8_t recipes_hash[static 64], uint8_t out[static 64])
{
	transcript_field(t, recipes_hash, 64);
	transcript_end(t, out);
}
