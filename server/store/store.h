/*
 * The store: what must survive a crash. Nothing of SQLite is in these types. All calls happen inside store_begin ..
 * store_commit; a call that fails leaves the transaction to be rolled back.
 *
 * Errors everywhere: QB_IO (disk), QB_CONFLICT (a row that may exist once exists already), QB_NOT_FOUND where said,
 * QB_FAULT (a stored row does not read back as it was written).
 */
#ifndef QB_STORE_STORE_H
#define QB_STORE_STORE_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/err.h"

struct store;

/* Opens (and with `create` makes) the file, mode 0600; brings the schema up to date. */
enum qb_status store_open(const char *path, bool create, struct store **out, struct qb_error *e) QB_MUST_USE;
void store_close(struct store **s);
/*
 * A consistent copy of the store at `from`, also while another process works on it.
 * Errors: QB_CONFLICT when `to` is there already; as store_open; QB_IO
 */
enum qb_status store_copy(const char *from, const char *to, struct qb_error *e) QB_MUST_USE;

/* `use_case` is kept for the message when two transactions would nest (our own bug). */
enum qb_status store_begin(struct store *s, const char *use_case, struct qb_error *e) QB_MUST_USE;
enum qb_status store_commit(struct store *s, struct qb_error *e) QB_MUST_USE; /* durable when it returns QB_OK */
void store_rollback(struct store *s);                                         /* no-op outside a transaction */

/* Ledger. store_leaf_append re-reads what it wrote and compares before it returns. */
enum qb_status store_leaf_append(struct store *s, uint64_t seq, const void *frame, size_t n,
                                 const uint8_t leaf_hash[static 32], struct qb_error *e) QB_MUST_USE;
typedef enum qb_status store_leaf_fn(void *state, uint64_t seq, const uint8_t *frame, size_t n,
                                     const uint8_t leaf_hash[static 32], struct qb_error *e);
enum qb_status store_leaves(struct store *s, uint64_t from, uint64_t limit, store_leaf_fn *fn, void *state,
                            struct qb_error *e) QB_MUST_USE;
enum qb_status store_head_put(struct store *s, uint64_t size, const char *text, struct qb_error *e) QB_MUST_USE;
/* The head of exactly this size into *out (cleared first); QB_NOT_FOUND. */
enum qb_status store_head_get(struct store *s, uint64_t size, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status store_cosignature_put(struct store *s, uint64_t size, const uint8_t key_id[static 16],
                                     const uint8_t signature[static 64], struct qb_error *e) QB_MUST_USE;
typedef enum qb_status store_cosignature_fn(void *state, const uint8_t key_id[static 16],
                                            const uint8_t signature[static 64], struct qb_error *e);
enum qb_status store_cosignatures(struct store *s, uint64_t size, store_cosignature_fn *fn, void *state,
                                  struct qb_error *e) QB_MUST_USE;
/* The largest size of a head that this key cosigned; 0 when it cosigned none. */
enum qb_status store_cosigned_newest(struct store *s, const uint8_t key_id[static 16], uint64_t *out,
                                     struct qb_error *e) QB_MUST_USE;
/* The largest head size that has at least n cosignatures by these keys; 0 when there is none. */
enum qb_status store_cosigned_size(struct store *s, const uint8_t (*key_ids)[16], int n_keys, int needed, uint64_t *out,
                                   struct qb_error *e) QB_MUST_USE;

/* Hidden entries. */
struct store_hidden {
	uint8_t commitment[64], campaign[16], nonce[32], signature[64], author[16], promise[64];
	int64_t received_gps_ns, due_gps_ns;
	const uint8_t *entry; /* borrowed for the call */
	size_t entry_n;
	int64_t seq; /* -1 until it entered the ledger */
};
enum qb_status store_hidden_put(struct store *s, const struct store_hidden *h, struct qb_error *e) QB_MUST_USE;
enum qb_status store_hidden_entered(struct store *s, const uint8_t commitment[static 64], uint64_t seq,
                                    struct qb_error *e) QB_MUST_USE;
typedef enum qb_status store_hidden_fn(void *state, const struct store_hidden *h, struct qb_error *e);
/* All of a campaign in order of receipt. */
enum qb_status store_hidden_all(struct store *s, const uint8_t campaign[static 16], store_hidden_fn *fn, void *state,
                                struct qb_error *e) QB_MUST_USE;

/* Sealed records. Position: the campaign's next when record.position < 0. */
struct store_record {
	int64_t position;
	int type;
	int64_t slot;
	const char *station; /* "" when it has none */
	uint8_t author[16], record_id[64], r_point[32];
	const uint8_t *record; /* borrowed */
	size_t record_n;
};
enum qb_status store_record_put(struct store *s, const uint8_t campaign[static 16], const struct store_record *r,
                                struct qb_error *e) QB_MUST_USE;
typedef enum qb_status store_record_fn(void *state, const struct store_record *r, struct qb_error *e);
enum qb_status store_records(struct store *s, const uint8_t campaign[static 16], int64_t from, int64_t limit,
                             store_record_fn *fn, void *state, struct qb_error *e) QB_MUST_USE;
/* Records of one slot and type, in order of position. */
enum qb_status store_records_of_slot(struct store *s, const uint8_t campaign[static 16], int64_t slot, int type,
                                     store_record_fn *fn, void *state, struct qb_error *e) QB_MUST_USE;

/* Sealing. */
enum qb_status store_recipe_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                                int place, const void *recipe, size_t n, struct qb_error *e) QB_MUST_USE;
enum qb_status store_recipe_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                                int place, struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status store_prekeys_put(struct store *s, const uint8_t campaign[static 16], const char *station, int place,
                                 const void *points, size_t n, struct qb_error *e) QB_MUST_USE;
enum qb_status store_prekeys_get(struct store *s, const uint8_t campaign[static 16], const char *station, int place,
                                 struct buf *out, struct qb_error *e) QB_MUST_USE;
enum qb_status store_slot_key_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const void *boxed,
                                  size_t n, struct qb_error *e) QB_MUST_USE;
enum qb_status store_slot_key_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, struct buf *out,
                                  struct qb_error *e) QB_MUST_USE;
/* Overwrites and deletes the keys of all slots below `slot`. */
enum qb_status store_slot_keys_erase_below(struct store *s, const uint8_t campaign[static 16], int64_t slot,
                                           struct qb_error *e) QB_MUST_USE;

/* Readiness: the station's host at this place fetched the slot's recipe before the freeze. */
enum qb_status store_ready_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int place, struct qb_error *e) QB_MUST_USE;
enum qb_status store_ready_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int place, bool *ready, struct qb_error *e) QB_MUST_USE;

/*
 * Who plays a station's slot: the lease goes to one host, once. QB_CONFLICT when it is taken, by whomever.
 * place: of the host that has it, or -1.
 */
enum qb_status store_lease_put(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int place, struct qb_error *e) QB_MUST_USE;
enum qb_status store_lease_get(struct store *s, const uint8_t campaign[static 16], int64_t slot, const char *station,
                               int *place, struct qb_error *e) QB_MUST_USE;

/* Openings. */
enum qb_status store_shares_put(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                                const char *custodian, const void *shares, size_t n, struct qb_error *e) QB_MUST_USE;
typedef enum qb_status store_shares_fn(void *state, const char *custodian, const uint8_t *shares, size_t n,
                                       struct qb_error *e);
enum qb_status store_shares(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                            store_shares_fn *fn, void *state, struct qb_error *e) QB_MUST_USE;
enum qb_status store_box_put(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                             const char *sender, const char *receiver, const void *box, size_t n,
                             struct qb_error *e) QB_MUST_USE;
/* Boxes for one receiver; the sender's name and the box. */
enum qb_status store_boxes(struct store *s, const uint8_t campaign[static 16], const uint8_t opening[static 16],
                           const char *receiver, store_shares_fn *fn, void *state, struct qb_error *e) QB_MUST_USE;

/* Settings and nonces. */
enum qb_status store_setting_put(struct store *s, const char *key, const char *value, struct qb_error *e) QB_MUST_USE;
enum qb_status store_setting_get(struct store *s, const char *key, struct buf *out, struct qb_error *e) QB_MUST_USE;
/* QB_CONFLICT when it is there already. Drops nonces that expired before now. */
enum qb_status store_nonce_put(struct store *s, const uint8_t key_id[static 16], const uint8_t nonce[static 16],
                               int64_t expires_unix_s, int64_t now_unix_s, struct qb_error *e) QB_MUST_USE;

/* Writes the campaign's bundle (docs/protocol.md) to a new file at path. `head` is the head to put in. */
enum qb_status store_bundle_write(struct store *s, const uint8_t campaign[static 16], uint64_t ledger_size,
                                  const char *head, const char *version, const char *path,
                                  struct qb_error *e) QB_MUST_USE;

#endif
