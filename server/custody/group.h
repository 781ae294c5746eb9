/*
 * Arithmetic in ristretto255 (RFC 9496) with the checks the library leaves to its callers: canonical encodings only,
 * the identity and zero refused everywhere, every return value looked at. Nothing else in the project touches a point.
 */
#ifndef QB_CUSTODY_GROUP_H
#define QB_CUSTODY_GROUP_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/secret.h"

#define POINT_BYTES  32
#define SCALAR_BYTES 32
#define CUSTODY_MAX  32 /* largest number of custodians */

bool group_point_ok(const uint8_t p[static POINT_BYTES]);          /* canonical and not the identity */
bool group_scalar_ok(const uint8_t s[static SCALAR_BYTES]);        /* canonical and not zero */
bool group_scalar_canonical(const uint8_t s[static SCALAR_BYTES]); /* canonical; zero allowed */

/* False (and out all zeros) when an input is not ok or the result is the identity. out may alias. */
bool group_mul(uint8_t out[static POINT_BYTES], const uint8_t s[static SCALAR_BYTES],
               const uint8_t p[static POINT_BYTES]);
bool group_mul_base(uint8_t out[static POINT_BYTES], const uint8_t s[static SCALAR_BYTES]);
bool group_add(uint8_t out[static POINT_BYTES], const uint8_t a[static POINT_BYTES],
               const uint8_t b[static POINT_BYTES]);
bool group_sub(uint8_t out[static POINT_BYTES], const uint8_t a[static POINT_BYTES],
               const uint8_t b[static POINT_BYTES]);
/* The one-way map of 64 uniform bytes to a point. */
bool group_from_hash(uint8_t out[static POINT_BYTES], const uint8_t hash[static 64]);

/* Scalars mod l; inputs canonical. Results may be zero: check with group_scalar_ok where that matters. */
void group_scalar_wide(uint8_t out[static SCALAR_BYTES], const uint8_t wide[static 64]);
void group_scalar_random(uint8_t out[static SCALAR_BYTES]); /* never zero */
void group_scalar_from_u64(uint8_t out[static SCALAR_BYTES], uint64_t v);
void group_scalar_add(uint8_t out[static SCALAR_BYTES], const uint8_t a[static SCALAR_BYTES],
                      const uint8_t b[static SCALAR_BYTES]);
void group_scalar_sub(uint8_t out[static SCALAR_BYTES], const uint8_t a[static SCALAR_BYTES],
                      const uint8_t b[static SCALAR_BYTES]);
void group_scalar_mul(uint8_t out[static SCALAR_BYTES], const uint8_t a[static SCALAR_BYTES],
                      const uint8_t b[static SCALAR_BYTES]);

/* f(x) = sum coef[m] x^m mod l, Horner; n coefficients, x >= 1. */
void group_poly_eval(uint8_t out[static SCALAR_BYTES], const uint8_t (*coef)[SCALAR_BYTES], size_t n, uint64_t x);
/* Sum of C[m] x^m in the exponent: what f(x)G must be. False when it is the identity or a point is not ok. */
bool group_poly_point(uint8_t out[static POINT_BYTES], const uint8_t (*commitment)[POINT_BYTES], size_t n, uint64_t x);
/*
 * Lagrange coefficient at 0 of index[which] among n different indices 1..CUSTODY_MAX.
 * False when an index is 0, too large or repeated.
 */
bool group_lagrange(uint8_t out[static SCALAR_BYTES], const uint32_t *index, size_t n, size_t which);

/* The same at x instead of 0: the share with number x is the sum of these times the shares with the n numbers. */
bool group_lagrange_at(uint8_t out[static SCALAR_BYTES], const uint32_t *index, size_t n, size_t which, uint32_t x);

/* A challenge or nonce: the transcript's end, reduced. */
void group_challenge(struct transcript *t, uint8_t out[static SCALAR_BYTES]);

#endif
