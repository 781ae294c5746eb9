/* Hash-based uniform numbers and the permutation stream; kept apart since every later test of the audit leans on them.
 */
#include "server/audit/random.h"

#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"

#define GOLDEN 0x9e3779b97f4a7c15u

double audit_hash_uniform(uint64_t seed, const char *const *parts, size_t n)
{
	size_t len = 1;
	for (size_t i = 0; i < n; i++)
		len += strlen(parts[i]) + 1;
	char *joined = qb_alloc(len, 1), *p = joined;
	for (size_t i = 0; i < n; i++) {
		if (i > 0)
			*p++ = '|';
		const size_t part = strlen(parts[i]);
		memcpy(p, parts[i], part);
		p += part;
	}
	const double u = uniform_from_u64(splitmix64(text_fnv1a(joined) ^ seed));
	qb_free(joined);
	return u;
}

struct audit_stream audit_stream_from(uint64_t seed)
{
	return (struct audit_stream){.state = seed};
}

uint64_t audit_stream_next(struct audit_stream *s)
{
	const uint64_t out = splitmix64(s->state);
	s->state += GOLDEN;
	return out;
}

uint64_t audit_stream_below(struct audit_stream *s, uint64_t n)
{
	CHECK(n > 0);
	const uint64_t over = (UINT64_MAX % n + 1) % n; /* 2^64 mod n */
	uint64_t v;
	do
		v = audit_stream_next(s);
	while (over != 0 && v >= UINT64_MAX - over + 1);
	return v % n;
}
