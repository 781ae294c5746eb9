/*
 * The use cases of the service. Each is one transaction: after a crash either all of it happened or none. The api room
 * parses and authenticates a request, checks the role of the route, and calls ops_dispatch; nothing here knows HTTP.
 *
 * Threads: every function may be called from any thread; one lock inside serialises them.
 */
#ifndef QB_OPS_OPS_H
#define QB_OPS_OPS_H

#include <stdbool.h>
#include <stdint.h>
#include <sys/types.h>

#include "server/base/buf.h"
#include "server/base/clock.h"
#include "server/base/json.h"
#include "server/base/log.h"
#include "server/base/secret.h"
#include "server/view/view.h"
#include "server/wire/routes.h"

struct ops;

/* How the daemon starts a sealer: a fresh process with only these two pipes open. Returns false when it can't. */
struct ops_spawner {
	bool (*spawn)(void *state, int *to_child_fd, int *from_child_fd, pid_t *pid);
	void *state;
};

struct ops_settings {
	const char *data_dir;       /* holds store.sqlite, service.key, storage.key */
	bool rehearsal_clock;       /* clock moved by the administrator; kept in the store */
	int64_t rehearsal_seed;     /* with a rehearsal clock: fixes the service's contribution; -1: none */
	struct clock_source system; /* the system clock (real or a test's) */
	struct ops_spawner spawner;
	const struct log *log;
};

/*
 * Creates a data directory: store, service signing key, storage key, first ledger entry.
 *
 * Given:    admin_signing, admin_exchange  the administrator's public keys, 32 bytes each; admin_name
 * Errors:   QB_CONFLICT when the directory already holds a service; QB_IO
 */
enum qb_status ops_init(const char *data_dir, const char *admin_name, const uint8_t admin_signing[static 32],
                        const uint8_t admin_exchange[static 32], bool rehearsal_clock, struct qb_error *e) QB_MUST_USE;
/* Opens it; verifies the whole ledger against the stored head before anything is served. */
enum qb_status ops_open(const struct ops_settings *settings, struct ops **out, struct qb_error *e) QB_MUST_USE;
void ops_close(struct ops **ops);

/*
 * A copy of the store at `file`, while the service works, and its two keys in FILE.keys under a passphrase; and a new
 * data directory from them, whose ledger is verified: *size is its number of leaves.
 * Errors: QB_CONFLICT a file is there already; QB_CRYPTO wrong passphrase; QB_IO; what ops_open says
 */
enum qb_status ops_backup(const char *data_dir, const char *file, const char *passphrase,
                          struct qb_error *e) QB_MUST_USE;
enum qb_status ops_restore(const char *file, const char *data_dir, const char *passphrase, uint64_t *size,
                           struct qb_error *e) QB_MUST_USE;

/* The service's own time: system or rehearsal. */
int64_t ops_now(struct ops *ops);
/* Everything that is due: hidden batches, erasure of played slots' keys, a dead sealer. Call about once a second. */
void ops_tick(struct ops *ops);
/* Size of the ledger and clock now, for event streams; blocks until either changed or timeout_ms passed. */
void ops_wait_change(struct ops *ops, uint64_t *size, int64_t *now_gps_ns, int timeout_ms);

/* The enrolled party with this key. QB_NOT_FOUND */
enum qb_status ops_party_by_key(struct ops *ops, const uint8_t key_id[static 16], struct view_party *out,
                                struct qb_error *e) QB_MUST_USE;
/* Records a request nonce; QB_CRYPTO when it was seen within the window. */
enum qb_status ops_nonce_take(struct ops *ops, const uint8_t key_id[static 16], const uint8_t nonce[static 16],
                              int64_t now_unix_s, struct qb_error *e) QB_MUST_USE;

struct ops_call {
	const struct wire_match *match;
	const struct view_party *who; /* NULL: unsigned */
	const char *query;            /* raw, "" when none */
	const json_t *body;           /* parsed document, NULL without a body */
};

struct ops_reply {
	int http_status;      /* 200, 201, 202 */
	json_t *doc;          /* owned by the caller; NULL when bytes are given */
	char *content_type;   /* of bytes; owned by the caller */
	struct buf bytes;     /* owned by the caller */
	int64_t until_gps_ns; /* with QB_CONFLICT: the time until which to wait, or 0 */
};

/*
 * Checks the role (by the route's table; the party's role in the campaign's plan where the route is in a campaign),
 * the entry if the route takes one, and runs the use case.
 * Errors: as the use case says; QB_REFUSED for a role that may not
 */
enum qb_status ops_dispatch(struct ops *ops, const struct ops_call *call, struct ops_reply *reply,
                            struct qb_error *e) QB_MUST_USE;

/* The sealer's whole life, run by `quietbelld --sealer`: job on fd `in`, records on fd `out`. Returns the exit status.
 */
int ops_sealer_main(int in, int out);

#endif
