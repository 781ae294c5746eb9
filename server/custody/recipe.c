/* Wrapping and unwrapping of recipes in their two layers. */
#include "server/custody/recipe.h"

#include <string.h>

#include "server/base/check.h"
#include "server/custody/aead.h"

static const uint8_t magic[4] = {'Q', 'B', 'Y', '1'};

#define INNER_PLAIN (4 + RECIPE_CONTENT_BYTES)
#define OUTER_PLAIN (POINT_BYTES + INNER_PLAIN + AEAD_TAG_BYTES)
#define AD_BYTES    88 /* ctx | slot | station | place, as in both key derivations */

_Static_assert(RECIPE_BYTES == 24 + OUTER_PLAIN + AEAD_TAG_BYTES, "recipe layout");

void recipe_key_commitment(const uint8_t campaign[static CAMPAIGN_ID_BYTES], uint64_t slot,
                           const uint8_t slot_key[static SLOT_KEY_BYTES], uint8_t out[static SLOT_KEY_COMMITMENT_BYTES])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/slot/key-commitment");
	transcript_field(&t, campaign, CAMPAIGN_ID_BYTES);
	transcript_u64(&t, slot);
	transcript_field(&t, slot_key, SLOT_KEY_BYTES);
	transcript_end(&t, out);
	secret_publish(out, SLOT_KEY_COMMITMENT_BYTES);
}

enum qb_status recipe_key_check(const uint8_t campaign[static CAMPAIGN_ID_BYTES], uint64_t slot,
                                const uint8_t slot_key[static SLOT_KEY_BYTES],
                                const uint8_t commitment[static SLOT_KEY_COMMITMENT_BYTES], struct qb_error *e)
{
	uint8_t got[SLOT_KEY_COMMITMENT_BYTES];
	recipe_key_commitment(campaign, slot, slot_key, got);
	if (!same_bytes(got, commitment, sizeof got))
		return qb_fail(e, QB_CRYPTO, "slot key", "do not play this slot; report it",
		               "the key for slot %llu is not the one committed to in the ledger",
		               (unsigned long long)slot);
	return QB_OK;
}

static void address_fields(const uint8_t ctx[static 64], const struct recipe_address *at, struct transcript *t,
                           uint8_t ad[static AD_BYTES])
{
	transcript_field(t, ctx, 64);
	transcript_u64(t, at->slot);
	transcript_u64(t, at->station);
	transcript_u64(t, (uint64_t)at->place);
	memcpy(ad, ctx, 64);
	le64_store(ad + 64, at->slot);
	le64_store(ad + 72, at->station);
	le64_store(ad + 80, (uint64_t)at->place);
}

static void inner_key(const uint8_t ctx[static 64], const struct recipe_address *at,
                      const uint8_t prekey[static POINT_BYTES], const uint8_t r[static POINT_BYTES],
                      const uint8_t z[static POINT_BYTES], struct transcript *t, uint8_t ad[static AD_BYTES])
{
	transcript_begin(t, "quietbell/1/recipe/key");
	address_fields(ctx, at, t, ad);
	transcript_field(t, prekey, POINT_BYTES);
	transcript_field(t, r, POINT_BYTES);
	transcript_field(t, z, POINT_BYTES);
}

/* One slot key serves several recipes, so each gets a key of its own from it. */
static void outer_key(const uint8_t ctx[static 64], const struct recipe_address *at,
                      const uint8_t slot_key[static SLOT_KEY_BYTES], struct transcript *t, uint8_t ad[static AD_BYTES])
{
	transcript_begin(t, "quietbell/1/recipe/outer-key");
	address_fields(ctx, at, t, ad);
	transcript_field(t, slot_key, SLOT_KEY_BYTES);
}

enum qb_status recipe_wrap(const uint8_t ctx[static 64], const struct recipe_address *at,
                           const uint8_t prekey[static POINT_BYTES], const uint8_t scalar[static SCALAR_BYTES],
                           const uint8_t slot_key[static SLOT_KEY_BYTES], const void *content, size_t n,
                           struct buf *out, struct qb_error *e)
{
	uint8_t r[POINT_BYTES], z[POINT_BYTES], ad[AD_BYTES], ct[OUTER_PLAIN + AEAD_TAG_BYTES];
	struct transcript t;
	if (n > RECIPE_CONTENT_BYTES || (unsigned)at->place >= RECIPE_PLACES)
		return qb_fail(e, QB_RANGE, "recipe", NULL, "it has %zu bytes, at most %d fit", n,
		               RECIPE_CONTENT_BYTES);
	if (!group_mul_base(r, scalar) || !group_mul(z, scalar, prekey))
		return qb_fail(e, QB_CRYPTO, "recipe", NULL, "the driver's prekey or the scalar is not valid");
	struct secret *plain = secret_new(INNER_PLAIN), *inner = secret_new(OUTER_PLAIN);
	pad_content(content, n, RECIPE_CONTENT_BYTES, secret_bytes(plain));
	memcpy(secret_bytes(inner), r, POINT_BYTES);
	inner_key(ctx, at, prekey, r, z, &t, ad);
	aead_seal(&t, ad, sizeof ad, secret_view(plain), INNER_PLAIN, secret_bytes(inner) + POINT_BYTES);
	outer_key(ctx, at, slot_key, &t, ad);
	aead_seal(&t, ad, sizeof ad, secret_view(inner), OUTER_PLAIN, ct);
	buf_put(out, magic, sizeof magic);
	buf_u32(out, (uint32_t)at->place);
	buf_u64(out, at->slot);
	buf_u64(out, at->station);
	buf_put(out, ct, sizeof ct);
	wipe(z, sizeof z);
	secret_free(&plain);
	secret_free(&inner);
	return QB_OK;
}

static enum qb_status open_layers(const uint8_t ctx[static 64], const struct recipe_address *at, const uint8_t *ct,
                                  const struct secret *prekey_secret, const uint8_t slot_key[static SLOT_KEY_BYTES],
                                  struct buf *content, struct qb_error *e)
{
	uint8_t prekey[POINT_BYTES], z[POINT_BYTES], ad[AD_BYTES];
	struct transcript t;
	struct secret *inner = secret_new(OUTER_PLAIN), *plain = secret_new(INNER_PLAIN);
	const uint8_t *r = secret_view(inner);
	enum qb_status s = QB_OK;
	outer_key(ctx, at, slot_key, &t, ad);
	if (!aead_open(&t, ad, sizeof ad, ct, OUTER_PLAIN + AEAD_TAG_BYTES, secret_bytes(inner)))
		s = qb_fail(e, QB_CRYPTO, "recipe", NULL,
		            "it was altered, or belongs to another slot, station or place");
	else if (!group_mul_base(prekey, secret_view(prekey_secret)) || !group_mul(z, secret_view(prekey_secret), r))
		s = qb_fail(e, QB_CRYPTO, "recipe", NULL, "its R is not a valid point");
	if (s == QB_OK) {
		inner_key(ctx, at, prekey, r, z, &t, ad);
		if (!aead_open(&t, ad, sizeof ad, r + POINT_BYTES, INNER_PLAIN + AEAD_TAG_BYTES, secret_bytes(plain)) ||
		    !unpad_content(secret_view(plain), RECIPE_CONTENT_BYTES, content))
			s = qb_fail(e, QB_CRYPTO, "recipe", NULL, "it was not sealed to this prekey");
	}
	wipe(z, sizeof z);
	secret_free(&inner);
	secret_free(&plain);
	return s;
}

enum qb_status recipe_unwrap(const uint8_t ctx[static 64], const uint8_t campaign[static CAMPAIGN_ID_BYTES],
                             const struct recipe_address *at, const uint8_t *p, size_t n,
                             const struct secret *prekey_secret, const uint8_t slot_key[static SLOT_KEY_BYTES],
                             const uint8_t commitment[static SLOT_KEY_COMMITMENT_BYTES], struct buf *content,
                             struct qb_error *e)
{
	struct cursor c = cursor_over(p, n);
	CHECK(secret_size(prekey_secret) == SCALAR_BYTES);
	enum qb_status s = recipe_key_check(campaign, at->slot, slot_key, commitment, e);
	if (s != QB_OK)
		return s;
	const uint8_t *m = cursor_take(&c, sizeof magic);
	uint32_t place = cursor_u32(&c);
	uint64_t slot = cursor_u64(&c), station = cursor_u64(&c);
	if (n != RECIPE_BYTES || c.bad || memcmp(m, magic, sizeof magic) != 0)
		return qb_fail(e, QB_FORMAT, "recipe", NULL, "it is not a wrapped recipe of %d bytes",
		               (int)RECIPE_BYTES);
	if (place != (uint32_t)at->place || slot != at->slot || station != at->station)
		return qb_fail(e, QB_CRYPTO, "recipe", NULL, "it belongs to another slot, station or place");
	return open_layers(ctx, at, cursor_take(&c, OUTER_PLAIN + AEAD_TAG_BYTES), prekey_secret, slot_key, content, e);
}

void recipe_hash(const uint8_t *p, size_t n, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/recipe/hash");
	transcript_field(&t, p, n);
	transcript_end(&t, out);
}

struct secret *recipe_prekey_new(uint8_t prekey[static POINT_BYTES])
{
	struct secret *s = secret_new(SCALAR_BYTES);
	group_scalar_random(secret_bytes(s));
	CHECK(group_mul_base(prekey, secret_view(s)));
	return s;
}
