/*
 * The one allocator: zeroed, overflow-checked, and it aborts when memory is out (transactions make an abort safe).
 */
#ifndef QB_BASE_ALLOC_H
#define QB_BASE_ALLOC_H

#include <stddef.h>

/* count * size zeroed bytes; aborts on overflow or when memory is out; never NULL, also for 0 bytes. */
void *qb_alloc(size_t count, size_t size) __attribute__((malloc, returns_nonnull));
/* Like realloc for count * size bytes; new bytes are not zeroed. */
void *qb_realloc(void *p, size_t count, size_t size) __attribute__((returns_nonnull));
/* A copy of s, owned by the caller. */
char *qb_strdup(const char *s) __attribute__((malloc, returns_nonnull));
/* A copy of n bytes of p, with a zero byte behind them. */
void *qb_memdup(const void *p, size_t n) __attribute__((malloc, returns_nonnull));
void qb_free(void *p);

#define QB_NEW(type)          ((type *)qb_alloc(1, sizeof(type)))
#define QB_NEW_ARRAY(type, n) ((type *)qb_alloc((n), sizeof(type)))

#endif
