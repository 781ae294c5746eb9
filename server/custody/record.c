/* Sealing, checking and opening of fixed-size records. */
#include "server/custody/record.h"

#include <string.h>

#include "server/base/check.h"
#include "server/custody/aead.h"
#include "server/custody/proof.h"

static const uint8_t magic[4] = {'Q', 'B', 'R', '1'};
#define HEADER_VERSION 1
#define HEADER_FILL    24

static const struct {
	const char *word;
	size_t capacity;
} types[RECORD_TYPES] = {
    [RECORD_SEED] = {"seed", 4096},
    [RECORD_SLOT] = {"slot", RECORD_SLOT_BYTES},
    [RECORD_CLAIM] = {"claim", RECORD_CLAIM_BYTES},
    [RECORD_CANARY] = {"canary", 256},
    [RECORD_PLAY_REPORT] = {"play report", 4096},
    [RECORD_PLAY_NOTE] = {"play note", 512},
    [RECORD_GUESS] = {"guess", 256},
    [RECORD_MILESTONE] = {"milestone", 512},
    [RECORD_INCIDENT] = {"incident", 4096},
    [RECORD_ANSWER] = {"answer", 0},
};

size_t custody_fixed_size(enum record_type type)
{
	return (unsigned)type < RECORD_TYPES ? types[type].capacity : 0;
}

size_t record_size(enum record_type type)
{
	size_t capacity = custody_fixed_size(type);
	return capacity == 0 ? 0 : RECORD_HEADER_BYTES + RECORD_PROOF_BYTES + 4 + capacity + AEAD_TAG_BYTES;
}

const char *record_type_word(enum record_type type)
{
	return (unsigned)type < RECORD_TYPES ? types[type].word : "unknown";
}

void record_header_encode(const struct record_header *h, uint8_t out[static RECORD_HEADER_BYTES])
{
	struct buf b = {0};
	buf_put(&b, magic, sizeof magic);
	buf_u16(&b, HEADER_VERSION);
	buf_u8(&b, (uint8_t)h->type);
	buf_u8(&b, 0);
	buf_put(&b, h->campaign, sizeof h->campaign);
	buf_u32(&b, h->epoch);
	buf_u32(&b, 0);
	buf_u64(&b, h->index);
	buf_i64(&b, h->start_gps_ns);
	buf_u64(&b, h->duration_ns);
	buf_put(&b, h->author, sizeof h->author);
	buf_put(&b, h->auxiliary, sizeof h->auxiliary);
	buf_zeros(&b, HEADER_FILL);
	CHECK(b.len == RECORD_HEADER_BYTES);
	memcpy(out, b.data, RECORD_HEADER_BYTES);
	buf_free(&b);
}

enum qb_status record_header_decode(const uint8_t in[static RECORD_HEADER_BYTES], struct record_header *out,
                                    struct qb_error *e)
{
	uint8_t again[RECORD_HEADER_BYTES];
	struct cursor c = cursor_over(in, RECORD_HEADER_BYTES);
	*out = (struct record_header){0};
	const uint8_t *m = cursor_take(&c, sizeof magic);
	uint16_t version = cursor_u16(&c);
	uint8_t type = cursor_u8(&c);
	cursor_u8(&c); /* flags; held to zero below */
	if (memcmp(m, magic, sizeof magic) != 0 || version != HEADER_VERSION)
		return qb_fail(e, QB_FORMAT, "sealed record", NULL, "it does not start with QBR1 and version 1");
	if (custody_fixed_size((enum record_type)type) == 0)
		return qb_fail(e, QB_FORMAT, "sealed record", NULL, "unknown type %u", type);
	out->type = (enum record_type)type;
	cursor_copy(&c, out->campaign, sizeof out->campaign);
	out->epoch = cursor_u32(&c);
	cursor_u32(&c);
	out->index = cursor_u64(&c);
	out->start_gps_ns = cursor_i64(&c);
	out->duration_ns = cursor_u64(&c);
	cursor_copy(&c, out->author, sizeof out->author);
	cursor_copy(&c, out->auxiliary, sizeof out->auxiliary);
	record_header_encode(out, again);
	if (memcmp(again, in, sizeof again) != 0)
		return qb_fail(e, QB_FORMAT, "sealed record", NULL, "a reserved field of its header is not zero");
	return QB_OK;
}

/* What the proof is about, in the order of its transcript. */
struct statement {
	const struct custody_group *g;
	const uint8_t *header, *r, *w;
	uint8_t h_ct[64];
};

static void challenge(const void *state, const uint8_t a1[static POINT_BYTES], const uint8_t a2[static POINT_BYTES],
                      uint8_t c[static SCALAR_BYTES])
{
	const struct statement *s = state;
	struct transcript t;
	transcript_begin(&t, "quietbell/1/record/proof");
	transcript_field(&t, s->g->seal_th, sizeof s->g->seal_th);
	transcript_field(&t, s->g->s, sizeof s->g->s);
	transcript_field(&t, s->header, RECORD_HEADER_BYTES);
	transcript_field(&t, s->h_ct, sizeof s->h_ct);
	transcript_field(&t, s->r, POINT_BYTES);
	transcript_field(&t, s->g->g2, sizeof s->g->g2);
	transcript_field(&t, s->w, POINT_BYTES);
	transcript_field(&t, a1, POINT_BYTES);
	transcript_field(&t, a2, POINT_BYTES);
	group_challenge(&t, c);
}

/* The sealer's nonce: from the inputs alone, so that a record can be made again byte for byte. */
static void nonce_derived(const struct statement *s, const uint8_t r[static SCALAR_BYTES],
                          uint8_t w[static SCALAR_BYTES])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/nonce/record");
	transcript_field(&t, r, SCALAR_BYTES);
	transcript_field(&t, s->g->seal_th, sizeof s->g->seal_th);
	transcript_field(&t, s->g->s, sizeof s->g->s);
	transcript_field(&t, s->header, RECORD_HEADER_BYTES);
	transcript_field(&t, s->h_ct, sizeof s->h_ct);
	transcript_field(&t, s->r, POINT_BYTES);
	transcript_field(&t, s->w, POINT_BYTES);
	group_challenge(&t, w);
}

static void nonce_hedged(const struct statement *s, const uint8_t r[static SCALAR_BYTES],
                         uint8_t w[static SCALAR_BYTES])
{
	uint8_t statement[2 * 64 + RECORD_HEADER_BYTES + 3 * POINT_BYTES], *at = statement;
	at = (uint8_t *)memcpy(at, s->g->seal_th, 64) + 64;
	at = (uint8_t *)memcpy(at, s->g->s, POINT_BYTES) + POINT_BYTES;
	at = (uint8_t *)memcpy(at, s->header, RECORD_HEADER_BYTES) + RECORD_HEADER_BYTES;
	at = (uint8_t *)memcpy(at, s->h_ct, 64) + 64;
	at = (uint8_t *)memcpy(at, s->r, POINT_BYTES) + POINT_BYTES;
	memcpy(at, s->w, POINT_BYTES);
	proof_nonce("quietbell/1/nonce/record-hedged", r, statement, sizeof statement, w);
}

static void record_key(const struct custody_group *g, const uint8_t *header, const uint8_t *r,
                       const uint8_t z[static POINT_BYTES], struct transcript *t)
{
	transcript_begin(t, "quietbell/1/record/key");
	transcript_field(t, g->seal_th, sizeof g->seal_th);
	transcript_field(t, g->s, sizeof g->s);
	transcript_field(t, header, RECORD_HEADER_BYTES);
	transcript_field(t, r, POINT_BYTES);
	transcript_field(t, z, POINT_BYTES);
}

static enum qb_status may_seal(const struct custody_group *g, const struct record_header *h, size_t n,
                               struct qb_error *e)
{
	size_t capacity = custody_fixed_size(h->type);
	if (capacity == 0)
		return qb_fail(e, QB_RANGE, "sealed record", NULL, "type %d can't be sealed", (int)h->type);
	if (n > capacity)
		return qb_fail(e, QB_RANGE, "sealed record", "shorten the content or move it to an attachment",
		               "a %s holds %zu bytes, this one has %zu", record_type_word(h->type), capacity, n);
	if (memcmp(h->campaign, g->campaign, sizeof h->campaign) != 0 || h->epoch != g->seal_epoch)
		return qb_fail(e, QB_RANGE, "sealed record", NULL,
		               "its header names another campaign or epoch than the key");
	return QB_OK;
}

static enum qb_status seal(const struct custody_group *g, const struct record_header *h,
                           const uint8_t r[static SCALAR_BYTES], bool derived, const void *content, size_t n,
                           struct buf *out, struct qb_error *e)
{
	uint8_t header[RECORD_HEADER_BYTES], big_r[POINT_BYTES], big_w[POINT_BYTES], z[POINT_BYTES], w[SCALAR_BYTES];
	struct statement s = {.g = g, .header = header, .r = big_r, .w = big_w};
	struct proof_statement statement = {challenge, &s};
	struct proof_points points = {NULL, big_r, g->g2, big_w};
	struct transcript t;
	struct proof proof;
	enum qb_status status = may_seal(g, h, n, e);
	if (status != QB_OK)
		return status;
	if (!group_mul_base(big_r, r) || !group_mul(big_w, r, g->g2) || !group_mul(z, r, g->s))
		return qb_fail(e, QB_CRYPTO, "sealed record", NULL,
		               "r is not a valid scalar, or the group key is not a point");
	secret_publish(big_w, sizeof big_w);
	/* In place: all of the record's room is made before its plaintext is written there and encrypted over itself.
	 */
	size_t capacity = custody_fixed_size(h->type), from = out->len;
	buf_zeros(out, record_size(h->type));
	uint8_t *head = out->data + from, *ct = head + RECORD_HEADER_BYTES + RECORD_PROOF_BYTES;
	record_header_encode(h, header);
	pad_content(content, n, capacity, ct);
	record_key(g, header, big_r, z, &t);
	aead_seal(&t, header, sizeof header, ct, 4 + capacity, ct);
	blake2b_512(s.h_ct, ct, 4 + capacity + AEAD_TAG_BYTES);
	if (derived)
		nonce_derived(&s, r, w);
	else
		nonce_hedged(&s, r, w);
	bool ok = proof_equal_make(&points, &statement, r, w, &proof);
	memcpy(head, header, sizeof header);
	head += RECORD_HEADER_BYTES;
	memcpy(head, big_r, POINT_BYTES);
	memcpy(head + 32, big_w, POINT_BYTES);
	memcpy(head + 64, proof.c, SCALAR_BYTES);
	memcpy(head + 96, proof.z, SCALAR_BYTES);
	if (!ok)
		out->len = from;
	wipe(z, sizeof z);
	wipe(w, sizeof w);
	return ok ? QB_OK : qb_fail(e, QB_CRYPTO, "sealed record", NULL, "the proof can't be made with this r");
}

enum qb_status record_seal_with(const struct custody_group *g, const struct record_header *h,
                                const uint8_t r[static SCALAR_BYTES], const void *content, size_t n, struct buf *out,
                                struct qb_error *e)
{
	return seal(g, h, r, true, content, n, out, e);
}

enum qb_status record_seal(const struct custody_group *g, const struct record_header *h, const void *content, size_t n,
                           struct buf *out, struct qb_error *e)
{
	uint8_t r[SCALAR_BYTES];
	group_scalar_random(r);
	enum qb_status s = seal(g, h, r, false, content, n, out, e);
	wipe(r, sizeof r);
	return s;
}

static void split(const uint8_t *p, size_t n, struct record *out)
{
	out->bytes = p;
	out->len = n;
	out->r = p + RECORD_HEADER_BYTES;
	out->w = out->r + POINT_BYTES;
	out->c = out->w + POINT_BYTES;
	out->z = out->c + SCALAR_BYTES;
	out->ct = out->z + SCALAR_BYTES;
	out->ct_len = n - RECORD_HEADER_BYTES - RECORD_PROOF_BYTES;
}

static void record_id(struct record *rec)
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/record/id");
	transcript_field(&t, rec->bytes, RECORD_HEADER_BYTES);
	transcript_field(&t, rec->r, POINT_BYTES);
	transcript_field(&t, rec->w, POINT_BYTES);
	transcript_field(&t, rec->c, SCALAR_BYTES);
	transcript_field(&t, rec->z, SCALAR_BYTES);
	transcript_field(&t, rec->ct, rec->ct_len);
	transcript_end(&t, rec->id);
}

enum qb_status record_check(const struct custody_group *g, const uint8_t *p, size_t n, struct record *out,
                            struct qb_error *e)
{
	struct record rec = {0};
	struct proof proof;
	*out = rec;
	if (n < RECORD_HEADER_BYTES)
		return qb_fail(e, QB_FORMAT, "sealed record", NULL, "it is truncated");
	enum qb_status status = record_header_decode(p, &rec.header, e);
	if (status != QB_OK)
		return status;
	if (n != record_size(rec.header.type))
		return qb_fail(e, QB_FORMAT, "sealed record", NULL, "a %s has %zu bytes, this one %zu",
		               record_type_word(rec.header.type), record_size(rec.header.type), n);
	if (memcmp(rec.header.campaign, g->campaign, sizeof g->campaign) != 0 || rec.header.epoch != g->seal_epoch)
		return qb_fail(e, QB_CRYPTO, "sealed record", NULL, "it belongs to another campaign or epoch");
	split(p, n, &rec);
	struct statement s = {.g = g, .header = p, .r = rec.r, .w = rec.w};
	struct proof_statement statement = {challenge, &s};
	struct proof_points points = {NULL, rec.r, g->g2, rec.w};
	blake2b_512(s.h_ct, rec.ct, rec.ct_len);
	memcpy(proof.c, rec.c, sizeof proof.c);
	memcpy(proof.z, rec.z, sizeof proof.z);
	if (!proof_equal_check(&points, &statement, &proof))
		return qb_fail(
		    e, QB_CRYPTO, "sealed record", NULL,
		    "the proof that its author knew its randomness is false, or it is sealed to another key");
	record_id(&rec);
	*out = rec;
	return QB_OK;
}

enum qb_status record_expect(const struct record *rec, enum record_type type, uint64_t index, struct qb_error *e)
{
	if (rec->header.type != type || rec->header.index != index)
		return qb_fail(e, QB_CRYPTO, "sealed record", NULL, "this is %s %llu in the place of %s %llu",
		               record_type_word(rec->header.type), (unsigned long long)rec->header.index,
		               record_type_word(type), (unsigned long long)index);
	return QB_OK;
}

enum qb_status record_open(const struct custody_group *g, const struct record *rec, const uint8_t z[static POINT_BYTES],
                           struct buf *out, struct qb_error *e)
{
	struct transcript t;
	CHECK(rec->bytes != NULL);
	if (!group_point_ok(z))
		return qb_fail(e, QB_CRYPTO, "sealed record", NULL, "the combined point is not valid");
	size_t capacity = custody_fixed_size(rec->header.type);
	size_t from = out->len, n = 0;
	buf_zeros(out, 4 + capacity);
	uint8_t *plain = out->data + from;
	record_key(g, rec->bytes, rec->r, z, &t);
	bool ok = aead_open(&t, rec->bytes, RECORD_HEADER_BYTES, rec->ct, rec->ct_len, plain) &&
	          unpad_here(plain, capacity, &n);
	if (!ok)
		wipe(plain, 4 + capacity);
	out->len = from + (ok ? n : 0);
	return ok ? QB_OK
	          : qb_fail(e, QB_CRYPTO, "sealed record", NULL,
	                    "%s %llu does not decrypt: its author encrypted something else than the proof says",
	                    record_type_word(rec->header.type), (unsigned long long)rec->header.index);
}
