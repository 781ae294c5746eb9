/* The key of a transcript over the route, the route again as associated data. */
#include "server/custody/sealed_share.h"

#include <string.h>

#include "server/base/buf.h"
#include "server/custody/aead.h"

#define AD_BYTES 80

static void key_of(const struct sealed_share_route *r, const uint8_t z[static POINT_BYTES], struct transcript *t,
                   uint8_t ad[static AD_BYTES])
{
	transcript_begin(t, r->label);
	transcript_field(t, r->ctx, 64);
	transcript_u64(t, r->from);
	transcript_u64(t, r->to);
	transcript_field(t, r->ephemeral, POINT_BYTES);
	transcript_field(t, r->exchange, POINT_BYTES);
	transcript_field(t, z, POINT_BYTES);
	memcpy(ad, r->ctx, 64);
	le64_store(ad + 64, r->from);
	le64_store(ad + 72, r->to);
}

void sealed_share_put(const struct sealed_share_route *r, const uint8_t z[static POINT_BYTES],
                      const uint8_t share[static SCALAR_BYTES], uint8_t ct[static SEALED_SHARE_BYTES])
{
	uint8_t ad[AD_BYTES];
	struct transcript t;
	key_of(r, z, &t, ad);
	aead_seal(&t, ad, sizeof ad, share, SCALAR_BYTES, ct);
}

bool sealed_share_get(const struct sealed_share_route *r, const uint8_t z[static POINT_BYTES],
                      const uint8_t ct[static SEALED_SHARE_BYTES], uint8_t share[static SCALAR_BYTES])
{
	uint8_t ad[AD_BYTES];
	struct transcript t;
	key_of(r, z, &t, ad);
	bool ok = aead_open(&t, ad, sizeof ad, ct, SEALED_SHARE_BYTES, share) && group_scalar_ok(share);
	if (!ok)
		wipe(share, SCALAR_BYTES);
	return ok;
}
