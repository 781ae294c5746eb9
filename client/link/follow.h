/*
 * The client's own copy of the ledger: every leaf fetched once, its signature checked, the root compared with the head
 * that the service signed. A service that rolls back, forks, alters, drops or reorders is refused here, by name.
 */
#ifndef QB_CLIENT_FOLLOW_H
#define QB_CLIENT_FOLLOW_H

#include "client/link/transport.h"
#include "server/ledger/head.h"
#include "server/ledger/tree.h"
#include "server/view/view.h"

struct follow {
	struct buf *frame; /* owned, n of them */
	struct ledger_hash *leaf;
	uint64_t n, cap;
	struct tree_range range;
	struct view view; /* what the ledger says so far */
	struct head head; /* newest verified, also of earlier runs */
	bool has_head;
	struct head *other; /* owned; the newest heads that other clients cosigned, each checked against this copy */
	size_t n_others;
	size_t on_disk;     /* bytes of ledger.bin that hold ... */
	uint64_t n_on_disk; /* ... so many leaves */
};

/*
 * Reads the copy of the home (ledger.bin, head.txt), checking it again. A last leaf that was cut off by a crash is
 * dropped; what was seen is remembered by the head.
 * Errors: QB_FORMAT, QB_CRYPTO: the copy was damaged or altered
 */
enum qb_status follow_open(struct follow *f, const struct home *h, struct qb_error *e) QB_MUST_USE;
void follow_close(struct follow *f);

/*
 * Fetches what is new, verifies it, compares it with the heads that other clients cosigned, writes the copy.
 * Errors: QB_CRYPTO with what the service did: shorter ledger, other root, false signature, a head of others that this
 *         ledger does not have. Two heads that contradict each other are kept in the home as evidence (heads.h).
 */
enum qb_status follow_update(struct follow *f, struct link *l, struct qb_error *e) QB_MUST_USE;
/*
 * Signs the newest head and sends the cosignature, and likewise the newest one that another party cosigned, so that
 * cosignatures meet under one size (custodians and analysts; home unlocked).
 */
enum qb_status follow_cosign(struct follow *f, struct link *l, struct qb_error *e) QB_MUST_USE;

/* The decoded leaf and, for a public one, its parsed entry (wire_entry_free). */
enum qb_status follow_entry(const struct follow *f, uint64_t seq, struct entry *leaf, struct wire_entry *out,
                            struct qb_error *e) QB_MUST_USE;

/* The root of the first n leaves; n at most f->n. */
void follow_root(const struct follow *f, uint64_t n, struct ledger_hash *out);

/*
 * Takes one more leaf: place, format, author's signature, projection. Exported for the verifier of bundles and tests.
 */
enum qb_status follow_take(struct follow *f, const uint8_t *frame, size_t n, struct qb_error *e) QB_MUST_USE;

#endif
