/*
 * Secrets at rest: files under a passphrase (Argon2id, XChaCha20-Poly1305), mode 0600, replaced atomically. The level
 * of Argon2id is in the header; the interactive one is for rehearsals only.
 *
 *   "QBK1" | version u16 = 1 | type u8 | level u8 | salt 16 | nonce 24 | commitment 32 | length u32 |
 *   ciphertext (length + 16) | check 16
 */
#ifndef QB_CUSTODY_KEYFILE_H
#define QB_CUSTODY_KEYFILE_H

#include "server/base/buf.h"
#include "server/base/err.h"
#include "server/custody/keygen.h"
#include "server/custody/party.h"

enum keyfile_level { KEYFILE_INTERACTIVE = 1, KEYFILE_MODERATE = 2, KEYFILE_SENSITIVE = 3 };
/* Types up to 15 are this room's; ops and the agent may use the others for their own payloads. */
enum keyfile_type {
	KEYFILE_PARTY = 1,
	KEYFILE_SHARE = 2,
	KEYFILE_SERVICE = 16,
	KEYFILE_PREKEYS = 17,
	KEYFILE_OTHER = 18
};

#define KEYFILE_PAYLOAD_MAX    ((size_t)16 << 20)
#define KEYFILE_PASSPHRASE_MAX 1024
#define KEYFILE_HEADER_BYTES   84

struct keyfile_info {
	uint8_t type;
	enum keyfile_level level;
	bool rehearsal_only; /* level is interactive */
	size_t payload_bytes;
};

/* Format and check sum only; no passphrase needed. Errors: QB_FORMAT, also for a damaged file. */
enum qb_status keyfile_inspect(const uint8_t *p, size_t n, struct keyfile_info *out, struct qb_error *e) QB_MUST_USE;

/*
 * In memory. The passphrase is 1..KEYFILE_PASSPHRASE_MAX bytes; the payload 1..KEYFILE_PAYLOAD_MAX.
 *
 * Returned: *payload          guarded; the caller frees it
 * Errors:   QB_FORMAT         not a key file, damaged, or of another type
 *           QB_CRYPTO         "wrong passphrase" (the commitment differs), or "altered" (it fits but the tag does not)
 *           QB_REFUSED        level is interactive and rehearsal is false
 *           QB_IO             not enough memory for Argon2id
 */
enum qb_status keyfile_encrypt(uint8_t type, enum keyfile_level level, const char *passphrase,
                               const struct secret *payload, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status keyfile_decrypt(const uint8_t *p, size_t n, uint8_t type, const char *passphrase, bool rehearsal,
                               struct secret **payload, struct qb_error *e) QB_MUST_USE;

/* The same with a file: QB_REFUSED when others could read it (any group or other bit), or it is not a plain file. */
enum qb_status keyfile_write(const char *path, uint8_t type, enum keyfile_level level, const char *passphrase,
                             const struct secret *payload, struct qb_error *e) QB_MUST_USE;
enum qb_status keyfile_read(const char *path, uint8_t type, const char *passphrase, bool rehearsal,
                            struct secret **payload, struct keyfile_info *info, struct qb_error *e) QB_MUST_USE;

/* Party keys: seed 32 | exchange scalar 32. */
enum qb_status keyfile_write_party(const char *path, enum keyfile_level level, const char *passphrase,
                                   const struct party_key *key, struct qb_error *e) QB_MUST_USE;
enum qb_status keyfile_read_party(const char *path, const char *passphrase, bool rehearsal, struct party_key *out,
                                  struct qb_error *e) QB_MUST_USE;

/* A custodian's share: campaign 16 | epoch u64 | th 64 | index u32 | s_i 32. */
struct keyfile_share {
	uint8_t campaign[CAMPAIGN_ID_BYTES];
	uint64_t epoch;
	uint8_t th[64];
	uint32_t index;
	struct secret *share;
};
enum qb_status keyfile_write_share(const char *path, enum keyfile_level level, const char *passphrase,
                                   const struct keyfile_share *share, struct qb_error *e) QB_MUST_USE;
enum qb_status keyfile_read_share(const char *path, const char *passphrase, bool rehearsal, struct keyfile_share *out,
                                  struct qb_error *e) QB_MUST_USE;

#endif
