/*
 * One scalar encrypted from one numbered party to another inside a signed message, so that the recipient can later show
 * the common point Z and let anyone decrypt this one scalar (complaint.h). For this room only.
 */
#ifndef QB_CUSTODY_SEALED_SHARE_H
#define QB_CUSTODY_SEALED_SHARE_H

#include <stdbool.h>
#include <stdint.h>

#include "server/custody/group.h"

#define SEALED_SHARE_BYTES (SCALAR_BYTES + 16)

struct sealed_share_route {
	const char *label;  /* of the key: one for each use */
	const uint8_t *ctx; /* 64 bytes: what both sides take part in */
	uint64_t from, to;
	const uint8_t *ephemeral, *exchange; /* the message's E, the recipient's point */
};

/* z: ephemeral scalar times exchange, or the recipient's scalar times E. */
void sealed_share_put(const struct sealed_share_route *r, const uint8_t z[static POINT_BYTES],
                      const uint8_t share[static SCALAR_BYTES], uint8_t ct[static SEALED_SHARE_BYTES]);
/* False, and share zeroed, when it does not decrypt to a valid scalar. */
bool sealed_share_get(const struct sealed_share_route *r, const uint8_t z[static POINT_BYTES],
                      const uint8_t ct[static SEALED_SHARE_BYTES], uint8_t share[static SCALAR_BYTES]);

#endif
