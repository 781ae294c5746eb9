/* Hexadecimal vectors for tests: decoded into the caller's array, and a failed test when they are malformed. */
#ifndef QB_TESTS_HEX_H
#define QB_TESTS_HEX_H

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "server/base/text.h"

/* Exactly n bytes. */
static inline void unhex(const char *s, void *out, size_t n)
{
	assert_true(hex_decode(out, n, s));
}

/* At most max bytes; how many there were. */
static inline size_t unhex_any(const char *s, void *out, size_t max)
{
	size_t n = strlen(s) / 2;
	assert_true(n <= max);
	unhex(s, out, n);
	return n;
}

/* Fails the test unless the n bytes at p are those of s. */
static inline void same_hex(const void *p, const char *s, size_t n)
{
	uint8_t want[1024];
	assert_true(n <= sizeof want);
	unhex(s, want, n);
	assert_memory_equal(p, want, n);
}

#endif
