/* Partial openings and their combination. */
#include "server/custody/partial.h"

#include <stdio.h>
#include <string.h>

#include "server/base/check.h"
#include "server/custody/proof.h"

static const uint8_t magic[4] = {'Q', 'B', 'P', '1'};

/* Which purpose opens which type, and by which one a full opening (or rehearsal) opens it. */
static const struct {
	enum partial_purpose full;
	bool spot;
} opened_by[RECORD_TYPES] = {
    [RECORD_SEED] = {PARTIAL_TRUTH, false},           [RECORD_SLOT] = {PARTIAL_TRUTH, true},
    [RECORD_CLAIM] = {PARTIAL_CLAIMS, false},         [RECORD_CANARY] = {PARTIAL_REHEARSAL, false},
    [RECORD_PLAY_REPORT] = {PARTIAL_DELIVERY, false}, [RECORD_PLAY_NOTE] = {PARTIAL_DELIVERY, true},
    [RECORD_GUESS] = {PARTIAL_CLAIMS, false},         [RECORD_MILESTONE] = {PARTIAL_CLAIMS, false},
    [RECORD_INCIDENT] = {PARTIAL_CLAIMS, false},
};

enum partial_purpose partial_full_purpose(enum record_type type)
{
	return (unsigned)type < RECORD_TYPES ? opened_by[type].full : (enum partial_purpose)0;
}

bool partial_purpose_opens(enum partial_purpose purpose, enum record_type type)
{
	if ((unsigned)type >= RECORD_TYPES || partial_hash_bytes(purpose) == 0)
		return false;
	return purpose == PARTIAL_SPOT ? opened_by[type].spot : opened_by[type].full == purpose;
}

size_t partial_hash_bytes(enum partial_purpose purpose)
{
	switch (purpose) {
	case PARTIAL_SPOT:
		return 64;
	case PARTIAL_TRUTH:
	case PARTIAL_CLAIMS:
	case PARTIAL_DELIVERY:
	case PARTIAL_REHEARSAL:
		return 32;
	}
	return 0;
}

struct statement {
	const struct custody_group *g;
	const struct record *rec;
	const struct partial_authority *authority;
	uint32_t i;
	const uint8_t *d;
};

/* The fields before A and A': the statement itself. */
static void statement_fields(const struct statement *s, struct transcript *t)
{
	transcript_field(t, s->g->th, sizeof s->g->th);
	transcript_field(t, s->rec->id, sizeof s->rec->id);
	transcript_u64(t, s->i);
	transcript_u64(t, (uint64_t)s->authority->purpose);
	transcript_field(t, s->authority->hash, partial_hash_bytes(s->authority->purpose));
	transcript_field(t, s->g->y[s->i - 1], POINT_BYTES);
	transcript_field(t, s->rec->r, POINT_BYTES);
	transcript_field(t, s->d, POINT_BYTES);
}

static void challenge(const void *state, const uint8_t a1[static POINT_BYTES], const uint8_t a2[static POINT_BYTES],
                      uint8_t c[static SCALAR_BYTES])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/opening/partial");
	statement_fields(state, &t);
	transcript_field(&t, a1, POINT_BYTES);
	transcript_field(&t, a2, POINT_BYTES);
	group_challenge(&t, c);
}

static enum qb_status may_open(const struct record *rec, const struct partial_authority *authority, struct qb_error *e)
{
	static const uint8_t zeros[64];
	size_t n = partial_hash_bytes(authority->purpose);
	if (!partial_purpose_opens(authority->purpose, rec->header.type))
		return qb_fail(e, QB_REFUSED, "opening", NULL, "this purpose does not open a record of type %s",
		               record_type_word(rec->header.type));
	if (memcmp(authority->hash + n, zeros, sizeof authority->hash - n) != 0)
		return qb_fail(e, QB_FORMAT, "opening", NULL, "the authorising hash is too long for its purpose");
	return QB_OK;
}

enum qb_status partial_share_check(const struct custody_group *g, uint32_t i, const struct secret *share,
                                   struct qb_error *e)
{
	uint8_t y[POINT_BYTES];
	if (i == 0 || i > g->n || secret_size(share) != SCALAR_BYTES || !group_mul_base(y, secret_view(share)) ||
	    memcmp(y, g->y[i - 1], sizeof y) != 0)
		return qb_fail(e, QB_CRYPTO, "key share", NULL, "it is not custodian %u's share of this group key", i);
	return QB_OK;
}

enum qb_status partial_make(const struct custody_group *g, const struct record *rec, uint32_t i,
                            const struct secret *share, const struct partial_authority *authority, struct buf *out,
                            struct qb_error *e)
{
	enum qb_status status = partial_share_check(g, i, share, e);
	return status == QB_OK ? partial_make_checked(g, rec, i, share, authority, out, e) : status;
}

enum qb_status partial_make_checked(const struct custody_group *g, const struct record *rec, uint32_t i,
                                    const struct secret *share, const struct partial_authority *authority,
                                    struct buf *out, struct qb_error *e)
{
	uint8_t d[POINT_BYTES], w[SCALAR_BYTES], digest[64];
	struct transcript t;
	struct proof proof;
	enum qb_status status = may_open(rec, authority, e);
	if (status != QB_OK)
		return status;
	if (!group_mul(d, secret_view(share), rec->r))
		return qb_fail(e, QB_CRYPTO, "opening", NULL, "the record's R is not a valid point");
	secret_publish(d, sizeof d);
	struct statement s = {g, rec, authority, i, d};
	struct proof_statement statement = {challenge, &s};
	struct proof_points points = {NULL, g->y[i - 1], rec->r, d};
	transcript_begin(&t, "quietbell/1/opening/partial");
	statement_fields(&s, &t);
	transcript_end(&t, digest);
	do
		proof_nonce("quietbell/1/nonce/partial", secret_view(share), digest, sizeof digest, w);
	while (!proof_equal_make(&points, &statement, secret_view(share), w, &proof));
	wipe(w, sizeof w);
	buf_put(out, magic, sizeof magic);
	buf_u32(out, i);
	buf_u32(out, (uint32_t)authority->purpose);
	buf_put(out, rec->id, sizeof rec->id);
	buf_put(out, authority->hash, sizeof authority->hash);
	buf_put(out, d, sizeof d);
	buf_put(out, proof.c, sizeof proof.c);
	buf_put(out, proof.z, sizeof proof.z);
	return QB_OK;
}

static enum qb_status at_fault(struct qb_error *e, uint32_t i, const char *what)
{
	char who[40];
	snprintf(who, sizeof who, "opening by custodian %u", i);
	return qb_fail(e, QB_CRYPTO, who, "ask this custodian again, or open with the others", "%s", what);
}

enum qb_status partial_check(const struct custody_group *g, const struct record *rec,
                             const struct partial_authority *authority, const uint8_t *p, size_t n, struct partial *out,
                             struct qb_error *e)
{
	struct partial part = {0};
	struct proof proof;
	struct cursor c = cursor_over(p, n);
	*out = part;
	const uint8_t *m = cursor_take(&c, sizeof magic);
	part.i = cursor_u32(&c);
	part.authority.purpose = (enum partial_purpose)cursor_u32(&c);
	cursor_copy(&c, part.record_id, sizeof part.record_id);
	cursor_copy(&c, part.authority.hash, sizeof part.authority.hash);
	cursor_copy(&c, part.d, sizeof part.d);
	cursor_copy(&c, proof.c, sizeof proof.c);
	cursor_copy(&c, proof.z, sizeof proof.z);
	if (c.bad || c.left != 0 || memcmp(m, magic, sizeof magic) != 0 || part.i == 0 || part.i > g->n)
		return qb_fail(e, QB_FORMAT, "opening", NULL, "it is not a partial opening of this group");
	enum qb_status status = may_open(rec, authority, e);
	if (status != QB_OK)
		return status;
	if (memcmp(part.record_id, rec->id, sizeof part.record_id) != 0)
		return at_fault(e, part.i, "it is for another record");
	if (part.authority.purpose != authority->purpose ||
	    memcmp(part.authority.hash, authority->hash, sizeof authority->hash) != 0)
		return at_fault(e, part.i, "it is for another purpose or another request");
	struct statement s = {g, rec, authority, part.i, part.d};
	struct proof_statement statement = {challenge, &s};
	struct proof_points points = {NULL, g->y[part.i - 1], rec->r, part.d};
	if (!proof_equal_check(&points, &statement, &proof))
		return at_fault(e, part.i, "its proof is false");
	*out = part;
	return QB_OK;
}

enum qb_status partial_combine(const struct custody_group *g, const struct partial *partials, size_t n,
                               uint8_t z[static POINT_BYTES], struct qb_error *e)
{
	uint32_t index[CUSTODY_MAX];
	uint8_t lambda[SCALAR_BYTES], term[POINT_BYTES];
	memset(z, 0, POINT_BYTES);
	if (n < g->k)
		return qb_fail(e, QB_CRYPTO, "opening", NULL, "%zu partial openings, %u are needed", n, g->k);
	for (uint32_t i = 0; i < g->k; i++) {
		const struct partial *p = &partials[i], *first = &partials[0];
		index[i] = p->i;
		if (memcmp(p->record_id, first->record_id, sizeof p->record_id) != 0 ||
		    p->authority.purpose != first->authority.purpose ||
		    memcmp(p->authority.hash, first->authority.hash, sizeof p->authority.hash) != 0)
			return qb_fail(e, QB_CRYPTO, "opening", NULL,
			               "the partial openings are about different things");
	}
	for (uint32_t i = 0; i < g->k; i++) {
		if (!group_lagrange(lambda, index, g->k, i))
			return qb_fail(e, QB_CRYPTO, "opening", NULL, "custodian %u is counted twice, or unknown",
			               index[i]);
		bool ok = group_mul(term, lambda, partials[i].d);
		if (i == 0)
			memcpy(z, term, POINT_BYTES);
		else
			ok = ok && group_add(z, z, term);
		if (!ok)
			return qb_fail(e, QB_CRYPTO, "opening", NULL, "the partial openings do not combine");
	}
	wipe(term, sizeof term);
	return QB_OK;
}

enum qb_status partial_open(const struct custody_group *g, const struct record *rec, const struct partial *partials,
                            size_t n, struct buf *content, struct qb_error *e)
{
	uint8_t z[POINT_BYTES];
	enum qb_status s = partial_combine(g, partials, n, z, e);
	if (s == QB_OK && memcmp(partials[0].record_id, rec->id, sizeof rec->id) != 0)
		s = qb_fail(e, QB_CRYPTO, "opening", NULL, "the partial openings are for another record");
	if (s == QB_OK)
		s = record_open(g, rec, z, content, e);
	wipe(z, sizeof z);
	return s;
}

enum qb_status partial_open_filed(const struct custody_group *g, const struct record *rec,
                                  const struct partial *partials, size_t n, struct buf *content, bool *opens,
                                  struct qb_error *e)
{
	uint8_t z[POINT_BYTES];
	bool sealers = rec->header.type == RECORD_SEED || rec->header.type == RECORD_SLOT;
	if (sealers) {
		*opens = true;
		return partial_open(g, rec, partials, n, content, e);
	}
	*opens = false;
	enum qb_status s = partial_combine(g, partials, n, z, e);
	if (s == QB_OK && memcmp(partials[0].record_id, rec->id, sizeof rec->id) != 0)
		s = qb_fail(e, QB_CRYPTO, "opening", NULL, "the partial openings are for another record");
	if (s == QB_OK)
		*opens = record_open(g, rec, z, content, NULL) == QB_OK;
	wipe(z, sizeof z);
	return s;
}

void partial_content_hash(const struct buf *content, bool opens, uint8_t out[static 64])
{
	memset(out, 0, 64);
	if (opens)
		blake2b_512(out, content->data, content->len);
}
