/* Making and judging complaints. */
#include "server/custody/complaint.h"

#include <string.h>

#include "server/custody/proof.h"

static const uint8_t magic[4] = {'Q', 'B', 'X', '1'};

static const char *const label[] = {
    [DEAL_KEYGEN] = "quietbell/1/keygen/complaint", [DEAL_RESHARE] = "quietbell/1/reshare/complaint"};

struct statement {
	const struct dealing *g;
	const struct deal *d;
	uint32_t by;
	const uint8_t *z;
};

static void challenge(const void *state, const uint8_t a1[static POINT_BYTES], const uint8_t a2[static POINT_BYTES],
                      uint8_t c[static SCALAR_BYTES])
{
	const struct statement *s = state;
	struct transcript t;
	transcript_begin(&t, label[s->g->kind]);
	transcript_field(&t, s->g->ctx, 64);
	transcript_u64(&t, s->d->from);
	transcript_u64(&t, s->by);
	transcript_field(&t, s->g->to[s->by - 1].exchange, POINT_BYTES);
	transcript_field(&t, s->d->ephemeral, POINT_BYTES);
	transcript_field(&t, s->z, POINT_BYTES);
	transcript_field(&t, a1, POINT_BYTES);
	transcript_field(&t, a2, POINT_BYTES);
	group_challenge(&t, c);
}

static struct proof_points points_of(const struct statement *s)
{
	return (struct proof_points){NULL, s->g->to[s->by - 1].exchange, s->d->ephemeral, s->z};
}

enum qb_status complaint_dealing_make(const struct dealing *g, const struct deal *d, uint32_t by,
                                      const struct party_key *me, struct buf *out, struct qb_error *e)
{
	uint8_t z[POINT_BYTES], w[SCALAR_BYTES];
	struct party_public mine;
	party_key_public(me, &mine);
	if (by == 0 || by > g->n || memcmp(&mine, &g->to[by - 1], sizeof mine) != 0)
		return qb_fail(e, QB_RANGE, "complaint", NULL, "this key is not custodian %u's", by);
	if (!group_mul(z, secret_view(me->exchange), d->ephemeral))
		return qb_fail(e, QB_CRYPTO, "complaint", NULL, "the dealer's E is not a valid point");
	secret_publish(z, sizeof z);
	struct statement s = {g, d, by, z};
	struct proof_statement statement = {challenge, &s};
	struct proof_points points = points_of(&s);
	struct proof proof;
	do
		proof_nonce("quietbell/1/nonce/complaint", secret_view(me->exchange), d->hash, sizeof d->hash, w);
	while (!proof_equal_make(&points, &statement, secret_view(me->exchange), w, &proof));
	wipe(w, sizeof w);
	buf_put(out, magic, sizeof magic);
	buf_u32(out, d->from);
	buf_u32(out, by);
	buf_put(out, z, sizeof z);
	buf_put(out, proof.c, sizeof proof.c);
	buf_put(out, proof.z, sizeof proof.z);
	return QB_OK;
}

enum qb_status complaint_dealing_judge(const struct dealing *g, const struct deal *d, const uint8_t *p, size_t n,
                                       enum complaint_verdict *verdict, struct qb_error *e)
{
	uint8_t z[POINT_BYTES], share[SCALAR_BYTES], h[64];
	struct proof proof;
	struct cursor r = cursor_over(p, n);
	const uint8_t *m = cursor_take(&r, sizeof magic);
	uint32_t accused = cursor_u32(&r), by = cursor_u32(&r);
	*verdict = COMPLAINT_FALSE;
	cursor_copy(&r, z, sizeof z);
	cursor_copy(&r, proof.c, sizeof proof.c);
	cursor_copy(&r, proof.z, sizeof proof.z);
	if (r.bad || r.left != 0 || memcmp(m, magic, sizeof magic) != 0)
		return qb_fail(e, QB_FORMAT, "complaint", NULL, "it is not a complaint");
	uint32_t place = dealing_place(g, accused);
	if (d->kind != g->kind || d->n != g->n || d->k != g->k || memcmp(d->ctx, g->ctx, 64) != 0 ||
	    accused != d->from || place == g->dealers || by == 0 || by > g->n)
		return qb_fail(e, QB_FORMAT, "complaint", NULL, "it is not about this deal");
	deal_hash(d, h);
	if (!sign_verify(g->dealer[place].sign, h, sizeof h, d->signature))
		return qb_fail(e, QB_CRYPTO, "complaint", NULL, "the accused did not sign this deal");
	struct statement s = {g, d, by, z};
	struct proof_statement statement = {challenge, &s};
	struct proof_points points = points_of(&s);
	if (!proof_equal_check(&points, &statement, &proof))
		return QB_OK;
	if (dealing_take_with(g, d, by, z, share, NULL) != QB_OK)
		*verdict = COMPLAINT_SENDER_GUILTY;
	wipe(share, sizeof share);
	return QB_OK;
}

enum qb_status complaint_make(const struct keygen_context *c, const struct deal *d, uint32_t by,
                              const struct party_key *me, struct buf *out, struct qb_error *e)
{
	struct dealing g = keygen_dealing(c);
	return complaint_dealing_make(&g, d, by, me, out, e);
}

enum qb_status complaint_judge(const struct keygen_context *c, const struct deal *d, const uint8_t *p, size_t n,
                               enum complaint_verdict *verdict, struct qb_error *e)
{
	struct dealing g = keygen_dealing(c);
	return complaint_dealing_judge(&g, d, p, n, verdict, e);
}
