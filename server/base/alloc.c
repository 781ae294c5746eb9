/* The one allocator. */
#include "server/base/alloc.h"

#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/check.h"

void *qb_alloc(size_t count, size_t size)
{
	size_t bytes;
	CHECK(!__builtin_mul_overflow(count, size, &bytes));
	void *p = calloc(1, bytes > 0 ? bytes : 1);
	CHECK(p != NULL && "out of memory");
	return p;
}

void *qb_realloc(void *p, size_t count, size_t size)
{
	size_t bytes;
	CHECK(!__builtin_mul_overflow(count, size, &bytes));
	void *q = realloc(p, bytes > 0 ? bytes : 1);
	CHECK(q != NULL && "out of memory");
	return q;
}

char *qb_strdup(const char *s)
{
	return qb_memdup(s, strlen(s));
}

void *qb_memdup(const void *p, size_t n)
{
	CHECK(n < SIZE_MAX);
	unsigned char *q = qb_alloc(n + 1, 1);
	if (n > 0)
		memcpy(q, p, n);
	return q;
}

void qb_free(void *p)
{
	free(p);
}
