/*
 * Sealed records: anything encrypted to the group key, at one fixed size per type, with a proof that the sealer knew
 * the randomness (a signed ElGamal in the form of Shoup & Gennaro 1998). The proof is checked on entry and again by
 * every custodian before a share is used.
 *
 *   header 128 | R 32 | W 32 | c 32 | z 32 | ciphertext (4 + capacity + 16)
 */
#ifndef QB_CUSTODY_RECORD_H
#define QB_CUSTODY_RECORD_H

#include "server/custody/keygen.h"

enum record_type {
	RECORD_SEED,
	RECORD_SLOT,
	RECORD_CLAIM,
	RECORD_CANARY,
	RECORD_PLAY_REPORT,
	RECORD_PLAY_NOTE,
	RECORD_GUESS,
	RECORD_MILESTONE,
	RECORD_INCIDENT,
	RECORD_ANSWER, /* reserved: capacity 0, never sealed */
	RECORD_TYPES
};

#define RECORD_HEADER_BYTES 128
#define RECORD_PROOF_BYTES  128 /* R, W, c, z */
#define RECORD_ID_BYTES     64
#define RECORD_SLOT_BYTES   8192 /* content of the types that other rooms size their codecs by */
#define RECORD_CLAIM_BYTES  16384
#define RECORD_BYTES_MAX    (RECORD_HEADER_BYTES + RECORD_PROOF_BYTES + 4 + RECORD_CLAIM_BYTES + 16)

/* Content capacity of a type in bytes; 0 for reserved and unknown types. */
size_t custody_fixed_size(enum record_type type);
size_t record_size(enum record_type type); /* of the whole sealed record; 0 likewise */
const char *record_type_word(enum record_type type);

/* "QBR1" | version u16 = 1 | type u8 | flags u8 = 0 | campaign 16 | epoch u32 | 0 u32 | index u64 | start i64 |
 * duration u64 | author 16 | auxiliary 32 | 24 zeros */
struct record_header {
	enum record_type type;
	uint8_t campaign[CAMPAIGN_ID_BYTES];
	uint32_t epoch;
	uint64_t index;       /* slot number; a claim's sequence number; ... */
	int64_t start_gps_ns; /* of the slot, or 0 */
	uint64_t duration_ns; /* of the slot, or 0 */
	uint8_t author[KEY_ID_BYTES];
	uint8_t auxiliary[32]; /* slot: first half of the slot-key commitment; else zeros */
};
void record_header_encode(const struct record_header *h, uint8_t out[static RECORD_HEADER_BYTES]);
enum qb_status record_header_decode(const uint8_t in[static RECORD_HEADER_BYTES], struct record_header *out,
                                    struct qb_error *e) QB_MUST_USE;

/* A record that passed record_check; pointers are into the caller's bytes. */
struct record {
	struct record_header header;
	const uint8_t *bytes; /* the whole record */
	size_t len;
	const uint8_t *r, *w, *c, *z, *ct;
	size_t ct_len;
	uint8_t id[RECORD_ID_BYTES]; /* T(header, R, W, c, z, ct) */
};

/*
 * The sealer's form: r given (from the slot secret) and the proof's nonce derived from it, so that the same inputs give
 * the same bytes.
 *
 * Given:    h               campaign and epoch must be the group's
 *           r               scalar, canonical, non-zero
 *           content, n      at most custody_fixed_size(type)
 * Returned: out             the record is appended
 * Errors:   QB_RANGE        content too long, header not this group's, reserved type
 *           QB_CRYPTO       r not ok
 */
enum qb_status record_seal_with(const struct custody_group *g, const struct record_header *h,
                                const uint8_t r[static SCALAR_BYTES], const void *content, size_t n, struct buf *out,
                                struct qb_error *e) QB_MUST_USE;
/* The clients' form: fresh r, hedged nonce. */
enum qb_status record_seal(const struct custody_group *g, const struct record_header *h, const void *content, size_t n,
                           struct buf *out, struct qb_error *e) QB_MUST_USE;

/*
 * Everything that can be checked without the key: format, size, this group's campaign and epoch, points, proof.
 *
 * Errors:   QB_FORMAT, QB_CRYPTO
 */
enum qb_status record_check(const struct custody_group *g, const uint8_t *p, size_t n, struct record *out,
                            struct qb_error *e) QB_MUST_USE;
/* QB_CRYPTO unless the record has this type and index: a record in another's place. */
enum qb_status record_expect(const struct record *rec, enum record_type type, uint64_t index,
                             struct qb_error *e) QB_MUST_USE;

/* Decrypts with Z = r S (from partial_combine, or from r): content without its padding is appended to out. */
enum qb_status record_open(const struct custody_group *g, const struct record *rec, const uint8_t z[static POINT_BYTES],
                           struct buf *out, struct qb_error *e) QB_MUST_USE;

#endif
