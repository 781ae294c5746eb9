/* Key generation's own form of dealing: every custodian deals to every custodian. */
#include "server/custody/deal.h"

struct dealing keygen_dealing(const struct keygen_context *c)
{
	return (struct dealing){.kind = DEAL_KEYGEN,
	                        .ctx = c->ctx,
	                        .n = c->n,
	                        .k = c->k,
	                        .to = c->party,
	                        .dealers = c->n,
	                        .dealer = c->party};
}

enum qb_status deal_make(const struct keygen_context *c, uint32_t i, const struct party_key *me, struct buf *out,
                         struct qb_error *e)
{
	struct dealing g = keygen_dealing(c);
	return dealing_make(&g, i, me, NULL, out, e);
}

enum qb_status deal_parse(const struct keygen_context *c, const uint8_t *p, size_t n, struct deal *out,
                          struct qb_error *e)
{
	struct dealing g = keygen_dealing(c);
	return dealing_parse(&g, p, n, out, e);
}

enum qb_status deal_check(const struct keygen_context *c, const struct deal *d, struct qb_error *e)
{
	struct dealing g = keygen_dealing(c);
	return dealing_check(&g, d, e);
}

enum qb_status deal_take(const struct keygen_context *c, const struct deal *d, uint32_t to, const struct party_key *me,
                         struct secret **share, struct qb_error *e)
{
	struct dealing g = keygen_dealing(c);
	return dealing_take(&g, d, to, me, share, e);
}
