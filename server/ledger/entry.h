/*
 * One ledger entry: the exact bytes an author signed, in a fixed binary frame that is the leaf of the tree. Also hidden
 * entries, which show a commitment only, and the promise that the service signs when it takes one.
 */
#ifndef QB_LEDGER_ENTRY_H
#define QB_LEDGER_ENTRY_H

#include "server/base/buf.h"
#include "server/base/secret.h"
#include "server/ledger/hash.h"

#define ENTRY_COMMITMENT_BYTES 64
#define ENTRY_NONCE_BYTES      32
#define ENTRY_BODY_MAX         ((size_t)64 << 20)
#define ENTRY_FRAME_BYTES      112 /* everything but the body */

enum entry_kind { ENTRY_PUBLIC = 0, ENTRY_HIDDEN = 1 };

/*
 * The frame, integers little-endian:
 *   "QBL1" | kind u8 | 3 zero bytes | seq u64 | received_gps_ns i64 | author key id 16 | body length u64 | body |
 * signature 64
 */
struct entry {
	enum entry_kind kind;
	uint64_t seq;                 /* position in the tree, from 0 */
	int64_t received_gps_ns;      /* >= 0 */
	uint8_t author[KEY_ID_BYTES]; /* hidden: the service's */
	const uint8_t *body;          /* public: a signed JSON document; hidden: the commitment, 64 bytes. Not owned. */
	size_t body_len;              /* 1..ENTRY_BODY_MAX */
	uint8_t signature[SIGN_BYTES]; /* Ed25519 over T("quietbell/1/ledger/entry", body) */
};

/*
 * Given:    entry             body and every field set
 *           p, n              a frame from outside
 * Returned: out               the frame is appended; decode: *out, whose body points into p
 * Errors:   QB_FORMAT         truncated, trailing bytes, filling not zero, unknown kind, hidden body not 64 bytes
 *           QB_RANGE          body empty or too long, received time negative
 */
enum qb_status entry_encode(const struct entry *entry, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status entry_decode(const uint8_t *p, size_t n, struct entry *out, struct qb_error *e) QB_MUST_USE;

/* RFC 9162 leaf hash of the encoded frame. */
enum qb_status entry_leaf_hash(const struct entry *entry, struct ledger_hash *out, struct qb_error *e) QB_MUST_USE;

/* The signature over a body alone, as a client makes it before the service frames it. */
void entry_sign_body(const struct secret *seed, const void *body, size_t n, uint8_t signature[static SIGN_BYTES]);
bool entry_verify_body(const uint8_t pk[static SIGN_PUBLIC], const void *body, size_t n,
                       const uint8_t signature[static SIGN_BYTES]);
/* Sets author and signature from the body that is already there. */
void entry_sign(struct entry *entry, const struct secret *seed);
/* QB_CRYPTO unless pk is the author's key (by key id) and the signature is its own. */
enum qb_status entry_verify(const struct entry *entry, const uint8_t pk[static SIGN_PUBLIC],
                            struct qb_error *e) QB_MUST_USE;

/* Commitment T("quietbell/1/ledger/hidden", nonce, the entry's bytes). */
void entry_hide(const uint8_t nonce[static ENTRY_NONCE_BYTES], const void *bytes, size_t n,
                uint8_t commitment[static ENTRY_COMMITMENT_BYTES]);

/*
 * The service's promise to enter a hidden entry: the proof of time for a claim, and what a spot opening binds to.
 * Signature over T("quietbell/1/ledger/promise", campaign, commitment, received_gps_ns, batch_due_gps_ns).
 */
struct entry_promise {
	uint8_t campaign[16];
	uint8_t commitment[ENTRY_COMMITMENT_BYTES];
	int64_t received_gps_ns, batch_due_gps_ns; /* due >= received >= 0 */
	uint8_t signature[SIGN_BYTES];
};
void entry_promise_sign(struct entry_promise *promise, const struct secret *seed);
enum qb_status entry_promise_verify(const struct entry_promise *promise, const uint8_t pk[static SIGN_PUBLIC],
                                    struct qb_error *e) QB_MUST_USE;

#endif
