/*
 * XChaCha20-Poly1305 under a key and nonce that both come from one transcript; for this room only. A transcript is
 * never used for two messages, so that a nonce is never repeated.
 */
#ifndef QB_CUSTODY_AEAD_H
#define QB_CUSTODY_AEAD_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/secret.h"

#define AEAD_TAG_BYTES 16

/* Ends t: its first 32 bytes are the key, the next 24 the nonce. out: n + AEAD_TAG_BYTES; it may be plain. */
void aead_seal(struct transcript *t, const void *ad, size_t ad_n, const uint8_t *plain, size_t n, uint8_t *out);
/* out: n - AEAD_TAG_BYTES, it may be ct; false (out zeroed) when n is too short or the tag is wrong. */
bool aead_open(struct transcript *t, const void *ad, size_t ad_n, const uint8_t *ct, size_t n, uint8_t *out);

/* length u32 | content | zeros up to capacity: 4 + capacity bytes. */
void pad_content(const void *content, size_t n, size_t capacity, uint8_t *out);
/* Appends the content; false when the length is too large or the filling is not zero. */
bool unpad_content(const uint8_t *padded, size_t capacity, struct buf *out);
/* The same in place: *n bytes of content come to the front, zeros after them. */
bool unpad_here(uint8_t *padded, size_t capacity, size_t *n);

#endif
