/*
 * Text at the edges: hexadecimal, base64, strict numbers, durations, names. Strict means that the whole string must be
 * consumed and that nothing is guessed.
 */
#ifndef QB_BASE_TEXT_H
#define QB_BASE_TEXT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/buf.h"

void hex_encode(char *out, const uint8_t *p, size_t n);  /* out: 2n+1 bytes, lower case */
bool hex_decode(uint8_t *out, size_t n, const char *s);  /* exactly 2n digits, lower case */
char *base64_encode(const uint8_t *p, size_t n);         /* standard alphabet, padded; caller frees */
bool base64_decode(const char *s, struct buf *out);      /* canonical only; appends */
bool text_double(const char *s, double *out);            /* finite decimal; no hex, inf, nan, space */
bool text_i64(const char *s, int64_t *out);              /* decimal, optional '-' */
bool text_duration_ns(const char *s, int64_t *out);      /* "1 h", "120 s", "10 min", "30 d", "0.5 s" */
bool text_is_name(const char *s);                        /* [a-z][a-z0-9-]{0,62} */
bool text_is_utf8(const char *s, size_t n);              /* valid, no NUL, no control but \n\t\r */
bool text_is_line(const char *s, size_t max);            /* UTF-8, one line, 1..max bytes */
char *text_printf(const char *fmt, ...) QB_PRINTF(1, 2); /* caller frees */

/* FNV-1a 64 and splitmix64, as audit.md clause 0.4; hash_uniform gives a number in (0,1). */
uint64_t text_fnv1a(const char *s);
uint64_t splitmix64(uint64_t x);
double uniform_from_u64(uint64_t x); /* ((x >> 11) + 0.5) * 2^-53 */

#endif
