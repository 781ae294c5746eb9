/* Ephemeral-static encryption of one padded message. */
#include "server/custody/box.h"

#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/custody/aead.h"

static const uint8_t magic[4] = {'Q', 'B', 'B', '1'};

_Static_assert(BOX_OVERHEAD_BYTES == 4 + POINT_BYTES + 4 + AEAD_TAG_BYTES, "box layout");

static void box_key(const char *purpose, const uint8_t eph[static POINT_BYTES], const uint8_t to[static POINT_BYTES],
                    const uint8_t z[static POINT_BYTES], const void *ad, size_t ad_n, struct transcript *t)
{
	transcript_begin(t, "quietbell/1/box/key");
	transcript_text(t, purpose);
	transcript_field(t, eph, POINT_BYTES);
	transcript_field(t, to, POINT_BYTES);
	transcript_field(t, z, POINT_BYTES);
	transcript_field(t, ad, ad_n);
}

enum qb_status box_seal(const uint8_t to[static POINT_BYTES], const char *purpose, const void *ad, size_t ad_n,
                        const void *content, size_t n, size_t padded, struct buf *out, struct qb_error *e)
{
	uint8_t scalar[SCALAR_BYTES], eph[POINT_BYTES], z[POINT_BYTES];
	struct transcript t;
	if (n > padded || padded > BOX_CONTENT_MAX)
		return qb_fail(e, QB_RANGE, "encrypted message", NULL, "%zu bytes do not fit into %zu", n, padded);
	group_scalar_random(scalar);
	bool ok = group_mul_base(eph, scalar) && group_mul(z, scalar, to);
	wipe(scalar, sizeof scalar);
	if (!ok)
		return qb_fail(e, QB_CRYPTO, "encrypted message", NULL,
		               "the recipient's exchange key is not a valid point");
	struct secret *plain = secret_new(4 + padded);
	uint8_t *ct = qb_alloc(1, 4 + padded + AEAD_TAG_BYTES);
	pad_content(content, n, padded, secret_bytes(plain));
	box_key(purpose, eph, to, z, ad, ad_n, &t);
	aead_seal(&t, ad, ad_n, secret_view(plain), 4 + padded, ct);
	buf_put(out, magic, sizeof magic);
	buf_put(out, eph, sizeof eph);
	buf_put(out, ct, 4 + padded + AEAD_TAG_BYTES);
	wipe(z, sizeof z);
	secret_free(&plain);
	qb_free(ct);
	return QB_OK;
}

enum qb_status box_open(const struct secret *exchange, const char *purpose, const void *ad, size_t ad_n,
                        const uint8_t *p, size_t len, struct buf *content, struct qb_error *e)
{
	uint8_t mine[POINT_BYTES], z[POINT_BYTES];
	struct transcript t;
	CHECK(secret_size(exchange) == SCALAR_BYTES);
	if (len < BOX_OVERHEAD_BYTES || len > BOX_CONTENT_MAX + BOX_OVERHEAD_BYTES ||
	    memcmp(p, magic, sizeof magic) != 0)
		return qb_fail(e, QB_FORMAT, "encrypted message", NULL, "it is not one, or has an impossible size");
	const uint8_t *eph = p + sizeof magic, *ct = eph + POINT_BYTES;
	size_t padded = len - BOX_OVERHEAD_BYTES;
	if (!group_mul_base(mine, secret_view(exchange)) || !group_mul(z, secret_view(exchange), eph))
		return qb_fail(e, QB_CRYPTO, "encrypted message", NULL, "its E is not a valid point");
	struct secret *plain = secret_new(4 + padded);
	box_key(purpose, eph, mine, z, ad, ad_n, &t);
	bool ok = aead_open(&t, ad, ad_n, ct, 4 + padded + AEAD_TAG_BYTES, secret_bytes(plain)) &&
	          unpad_content(secret_view(plain), padded, content);
	wipe(z, sizeof z);
	secret_free(&plain);
	return ok ? QB_OK
	          : qb_fail(e, QB_CRYPTO, "encrypted message", NULL,
	                    "it was altered, or meant for another recipient, purpose or request");
}
