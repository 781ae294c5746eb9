/*
 * A signed head: the text that fixes the ledger's size and root, the service's signature and the cosignatures of the
 * people who hold the service to one history.
 *
 *   quietbell/1/head
 *   origin <key id of the service, 32 hex>
 *   size <decimal>
 *   root <64 hex>
 *   time <GPS seconds, decimal>
 *   (blank line)
 *   service <key id> <signature, 128 hex>
 *   cosigner <key id> <signature>          any number up to HEAD_COSIGNERS_MAX, each key once
 *
 * Every line ends with one newline. All signatures are Ed25519 over the text up to and including the blank line.
 */
#ifndef QB_LEDGER_HEAD_H
#define QB_LEDGER_HEAD_H

#include "server/base/buf.h"
#include "server/base/secret.h"
#include "server/ledger/hash.h"

#define HEAD_COSIGNERS_MAX 128
#define HEAD_TEXT_MAX      32768

struct head_signature {
	uint8_t key_id[KEY_ID_BYTES];
	uint8_t signature[SIGN_BYTES];
};

struct head {
	uint8_t origin[KEY_ID_BYTES];
	uint64_t size;
	struct ledger_hash root;
	int64_t time_gps_ns;
	struct head_signature service;
	size_t n_cosigners;
	struct head_signature cosigner[HEAD_COSIGNERS_MAX];
};

/* Only canonical text is accepted: head_format of the result gives the same bytes. Errors: QB_FORMAT. */
enum qb_status head_parse(const char *text, size_t n, struct head *out, struct qb_error *e) QB_MUST_USE;
void head_format(const struct head *head, struct buf *out); /* appends */

void head_signed_text(const struct head *head, struct buf *out); /* what signatures cover; appends */
/* Sets origin and the service's signature, and drops all cosignatures. */
void head_sign(struct head *head, const struct secret *seed);
/* A cosignature for this head; head_add puts it in (replacing that key's). QB_RANGE when the list is full. */
void head_cosign(const struct head *head, const struct secret *seed, struct head_signature *out);
enum qb_status head_add(struct head *head, const struct head_signature *cosignature, struct qb_error *e) QB_MUST_USE;

/*
 * Given:    service_pk        the pinned key of the service
 *           known, n_known    pinned keys of custodians
 * Returned: *n_valid          how many different known keys cosigned; may be NULL
 * Errors:   QB_CRYPTO         origin is another key; the service's or a known key's signature is false
 *           Cosignatures of keys that are not in the table are neither counted nor judged.
 */
enum qb_status head_verify(const struct head *head, const uint8_t service_pk[static SIGN_PUBLIC],
                           const uint8_t (*known)[SIGN_PUBLIC], size_t n_known, size_t *n_valid,
                           struct qb_error *e) QB_MUST_USE;
size_t head_quorum(size_t n_custodians); /* floor(n/2) + 1 */

#endif
