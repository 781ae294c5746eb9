/* Chaum-Pedersen proofs with a pluggable statement. */
#include "server/custody/proof.h"

#include <string.h>

static bool mul_first(uint8_t out[static POINT_BYTES], const uint8_t s[static SCALAR_BYTES], const uint8_t *base)
{
	return base == NULL ? group_mul_base(out, s) : group_mul(out, s, base);
}

static bool points_ok(const struct proof_points *p)
{
	return (p->base1 == NULL || group_point_ok(p->base1)) && group_point_ok(p->image1) &&
	       group_point_ok(p->base2) && group_point_ok(p->image2);
}

bool proof_equal_make(const struct proof_points *points, const struct proof_statement *statement,
                      const uint8_t x[static SCALAR_BYTES], const uint8_t w[static SCALAR_BYTES], struct proof *out)
{
	uint8_t a1[POINT_BYTES], a2[POINT_BYTES], cx[SCALAR_BYTES];
	memset(out, 0, sizeof *out);
	if (!points_ok(points) || !group_scalar_ok(x) || !mul_first(a1, w, points->base1) ||
	    !group_mul(a2, w, points->base2))
		return false;
	secret_publish(a1, sizeof a1); /* whoever checks the proof makes them again */
	secret_publish(a2, sizeof a2);
	statement->challenge(statement->state, a1, a2, out->c);
	group_scalar_mul(cx, out->c, x);
	group_scalar_add(out->z, w, cx);
	secret_publish(out->z, SCALAR_BYTES);
	wipe(cx, sizeof cx);
	return group_scalar_ok(out->c) && group_scalar_ok(out->z);
}

/* A = z base - c image. */
static bool recompute(uint8_t a[static POINT_BYTES], const struct proof *proof, const uint8_t *base,
                      const uint8_t *image)
{
	uint8_t zb[POINT_BYTES], cy[POINT_BYTES];
	return mul_first(zb, proof->z, base) && group_mul(cy, proof->c, image) && group_sub(a, zb, cy);
}

bool proof_equal_check(const struct proof_points *points, const struct proof_statement *statement,
                       const struct proof *proof)
{
	uint8_t a1[POINT_BYTES], a2[POINT_BYTES], c[SCALAR_BYTES];
	if (!points_ok(points) || !group_scalar_ok(proof->c) || !group_scalar_ok(proof->z))
		return false;
	if (!recompute(a1, proof, points->base1, points->image1) ||
	    !recompute(a2, proof, points->base2, points->image2))
		return false;
	statement->challenge(statement->state, a1, a2, c);
	return same_bytes(c, proof->c, SCALAR_BYTES);
}

void proof_nonce(const char *label, const uint8_t x[static SCALAR_BYTES], const void *statement, size_t n,
                 uint8_t w[static SCALAR_BYTES])
{
	do {
		struct transcript t;
		uint8_t fresh[32];
		random_bytes(fresh, sizeof fresh);
		transcript_begin(&t, label);
		transcript_field(&t, x, SCALAR_BYTES);
		transcript_field(&t, fresh, sizeof fresh);
		transcript_field(&t, statement, n);
		group_challenge(&t, w);
		wipe(fresh, sizeof fresh);
	} while (!group_scalar_ok(w));
}
