/*
 * Deterministic randomness of the audit (audit clause 0.4): numbers that depend on the audit seed and on names only, so
 * that a result never changes with the order of the work or the number of threads.
 */
#ifndef QB_AUDIT_RANDOM_H
#define QB_AUDIT_RANDOM_H

#include <stddef.h>
#include <stdint.h>

/*
 * A uniform number for a named thing.
 *
 * Given:    seed       audit seed
 *           parts, n   names ("amber-000017", "sky"); joined by '|' before hashing
 * Returned: a number strictly between 0 and 1
 * Ref:      FNV-1a 64 and splitmix64, from memory
 */
double audit_hash_uniform(uint64_t seed, const char *const *parts, size_t n);

/* A stream for permutations: the state starts at the seed; it grows by one step per output. */
struct audit_stream {
	uint64_t state;
};

struct audit_stream audit_stream_from(uint64_t seed);
uint64_t audit_stream_next(struct audit_stream *s);
/* Uniform integer in 0 .. n-1 without bias; n >= 1. */
uint64_t audit_stream_below(struct audit_stream *s, uint64_t n);

#endif
