/*
 * What the use cases share. The ledger is the truth: everything public about a campaign is a projection of its leaves,
 * rebuilt at start by the same code that applies a new leaf after its commit. Only sealed bytes, hidden entries and
 * working state are read from the store beside it.
 */
#ifndef QB_OPS_INTERNAL_H
#define QB_OPS_INTERNAL_H

#include <pthread.h>

#include "server/custody/box.h"
#include "server/custody/deal.h"
#include "server/custody/partial.h"
#include "server/custody/record.h"
#include "server/custody/recipe.h"
#include "server/custody/seed.h"
#include "server/drill/plan.h"
#include "server/drill/states.h"
#include "server/ledger/entry.h"
#include "server/ledger/head.h"
#include "server/ledger/tree.h"
#include "server/ops/ops.h"
#include "server/store/store.h"
#include "server/view/view.h"
#include "server/wire/entries.h"

#define HIDDEN_BATCH 16

struct ops {
	pthread_mutex_t lock;
	pthread_cond_t changed;
	struct store *store;
	struct ops_settings settings;
	char *data_dir;
	struct secret *service_seed, *storage_key; /* storage: a scalar; slot keys are boxed to its point */
	uint8_t storage_point[32];
	uint8_t service_key[32], service_id[16];
	bool rehearsal_clock;
	int64_t rehearsal_now_ns;
	struct ledger_hash *leaf; /* all leaf hashes; owned */
	uint64_t size, cap;
	struct tree_range range;
	struct view view; /* what the ledger says */
	bool stopping;
	int64_t opened_ns; /* monotonic: before it nobody can have been heard */
};

/* ---- ops.c: the 32-byte keys of a data directory ---- */
enum qb_status ops_key_new(const char *dir, const char *name, const struct secret *key, struct qb_error *e) QB_MUST_USE;
enum qb_status ops_key_read(const char *dir, const char *name, struct secret **out, struct qb_error *e) QB_MUST_USE;

/* ---- ledger_write.c: one transaction with its new leaves ---- */
struct pending_leaf {
	struct buf frame;
	struct ledger_hash hash;
};
struct txn {
	struct ops *o;
	struct pending_leaf *leaf;
	size_t n;
	int64_t now_ns;
};
enum qb_status txn_begin(struct txn *t, struct ops *o, const char *use_case, struct qb_error *e) QB_MUST_USE;
/* Appends a public entry as its author signed it; *seq and leaf_hash may be NULL. */
enum qb_status txn_entry(struct txn *t, const uint8_t author[static 16], const char *text,
                         const uint8_t signature[static 64], int64_t *seq, uint8_t *leaf_hash,
                         struct qb_error *e) QB_MUST_USE;
/* Composes and signs an entry of the service. */
enum qb_status txn_service_entry(struct txn *t, const char *type, const struct campaign *c, const char *why,
                                 json_t *extra, int64_t *seq, uint8_t *leaf_hash, struct qb_error *e) QB_MUST_USE;
enum qb_status txn_hidden_leaf(struct txn *t, const uint8_t commitment[static 64], int64_t *seq,
                               struct qb_error *e) QB_MUST_USE;
/* Signs the head, commits, applies the new leaves to the projection, wakes the waiting. Ends the transaction. */
enum qb_status txn_commit(struct txn *t, struct qb_error *e) QB_MUST_USE;
/* Rolls back unless it was committed; always call it last. */
void txn_end(struct txn *t);

/* ---- find.c ---- */
/* Parses a slot number of a path; QB_NOT_FOUND beyond the campaign. */
enum qb_status slot_number(const struct campaign *c, const char *text, int64_t *out, struct qb_error *e) QB_MUST_USE;
bool query_int(const char *query, const char *key, int64_t min, int64_t max, int64_t otherwise, int64_t *out);
int64_t now_locked(struct ops *o);

/* ---- accept.c: the entry that a request carries ---- */
struct accepted {
	struct wire_entry entry;
	const char *text; /* borrowed from the request */
	uint8_t signature[64];
};
/*
 * Everything that is common to entries in requests: the author is the requester, the signature is his over the exact
 * text, the type is one the route takes, the campaign is the route's, the time is near the service's.
 */
enum qb_status accept_entry(struct ops *o, const struct ops_call *call, const struct campaign *c, struct accepted *out,
                            struct qb_error *e) QB_MUST_USE;
void accepted_free(struct accepted *a);
/* The usual reply of a public entry. */
void reply_entry(struct ops_reply *r, int http_status, int64_t seq, const uint8_t leaf_hash[static 32], int64_t now_ns);
/* Base64 member of the body, decoded; at most max bytes. */
enum qb_status body_base64(const json_t *body, const char *key, size_t max, struct buf *out,
                           struct qb_error *e) QB_MUST_USE;
/* Appends one public entry in a transaction of its own. */
enum qb_status enter_one(struct ops *o, const char *use_case, const struct ops_call *call, const struct accepted *a,
                         struct ops_reply *reply, struct qb_error *e) QB_MUST_USE;

/* ---- hidden.c ---- */
/* Takes a hidden entry: stores it with its promise and fills the receipt. Inside the caller's transaction. */
enum qb_status hidden_take(struct txn *t, struct campaign *c, const struct ops_call *call, const struct accepted *a,
                           struct ops_reply *reply, uint8_t commitment[static 64], struct qb_error *e) QB_MUST_USE;
/* Enters every batch that is due by now; with flush, everything that is pending. */
enum qb_status hidden_batches(struct txn *t, struct campaign *c, bool flush, struct qb_error *e) QB_MUST_USE;
/* Fixes which hidden entries there are, so that none can be passed off as a filler later; part of the closing. */
enum qb_status hidden_summary(struct txn *t, const struct campaign *c, struct qb_error *e) QB_MUST_USE;
/* After a restart: when the last batch was entered. */
enum qb_status hidden_batch_time_load(struct ops *o, struct campaign *c, struct qb_error *e) QB_MUST_USE;
bool hidden_due(const struct ops *o, const struct campaign *c, int64_t now_ns);

/* ---- submit.c: what claims, milestones, guesses and incidents have in common ---- */
/* QB_CONFLICT unless the campaign is sealed and not closed. */
enum qb_status submit_open(const struct campaign *c, struct qb_error *e) QB_MUST_USE;
/* The record in b is sound, of this type, the requester's own, the entry's, and has the next sequence number. */
enum qb_status submit_check(struct ops *o, const struct campaign *c, const struct ops_call *call,
                            const struct accepted *a, enum record_type type, const struct buf *b, struct record *rec,
                            struct qb_error *e) QB_MUST_USE;
/* Stores record (may be NULL) and hidden entry in one transaction and fills the receipt. */
enum qb_status submit_take(struct ops *o, struct campaign *c, const struct ops_call *call, const struct accepted *a,
                           const struct record *rec, struct ops_reply *reply, struct qb_error *e) QB_MUST_USE;

/* ---- use cases, one file per group; all run under the lock ---- */
typedef enum qb_status use_case(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                                struct qb_error *e);
use_case case_service, case_parties_list, case_parties_post, case_campaigns_list, case_draft, case_campaign,
    case_keygen, case_seal, case_sealer, case_sealer_collect, case_sealer_deliver, case_contribution, case_rehearsal,
    case_records, case_slots, case_slot, case_hold, case_hold_lift, case_stop, case_stop_lift, case_segments,
    case_witness, case_prekeys, case_recipe, case_recipe_key, case_note, case_report, case_claim, case_claims_list,
    case_claim_withdraw, case_milestone, case_close, case_sign, case_opening_request, case_openings_list, case_opening,
    case_opening_shares, case_bundle, case_head, case_entries, case_inclusion, case_consistency, case_cosign,
    case_clock, case_guess, case_incident, case_receipts, case_abandon;

/* ---- people.c ---- */
/* The rules of entries about people that are enrolled: same-person, key-rotation, vouch, retirement. */
enum qb_status people_check(struct ops *o, const struct ops_call *call, const struct accepted *a,
                            struct qb_error *e) QB_MUST_USE;
/* No two people of a plan are one person on two sides. */
enum qb_status people_check_plan(const struct ops *o, const struct drill_plan *plan, struct qb_error *e) QB_MUST_USE;
/* ---- driver.c ---- */
/* Stores a checked record at the campaign's next position. */
enum qb_status put_sealed(struct ops *o, const struct campaign *c, const struct record *rec, int64_t slot,
                          const char *station, struct qb_error *e) QB_MUST_USE;
/* ---- seal.c ---- */
/* Slot keys at rest: encrypted under the storage key, bound to campaign and slot. */
enum qb_status slot_key_unbox(struct ops *o, const struct campaign *c, int64_t slot, const struct buf *boxed,
                              struct secret **out, struct qb_error *e) QB_MUST_USE;
void seal_job_cancel(struct ops *o, struct campaign *c); /* under the lock; the thread then closes the attempt */
void seal_job_stop(struct campaign *c); /* ends the sealer of a campaign, joins its thread; not under the lock */
/* ---- ledger_read.c ---- */
/* The head of this size with every cosignature that is there. */
enum qb_status head_with_cosignatures(struct ops *o, uint64_t size, struct buf *out, struct qb_error *e) QB_MUST_USE;
/* ---- openings.c ---- */
/* Adds a spot to the projection: what was asked (parsed), under which commitment, by whom, when. */
struct opening *opening_add_spot(struct campaign *c, const struct wire_entry *en, const uint8_t commitment[static 64],
                                 const uint8_t asker[static 16], int64_t asked_ns);
enum qb_status opening_add_name(void *state, const char *name, const uint8_t *p, size_t n, struct qb_error *e);
/* Receivers of boxes that are no custodians; a party's name begins with a letter. */
#define TO_ASKER   "@asker"
#define TO_RETRACT "@retraction"
#define REFUSED    "@refused"
#define TO_ALL     "@given"
/* After a restart: which records each spot opens, and which were answered. */
enum qb_status opening_reload_positions(struct ops *o, struct campaign *c, struct qb_error *e) QB_MUST_USE;
/* ---- canary.c ---- */
bool canary_due(const struct campaign *c, int64_t now_ns);
enum qb_status canary_issue(struct ops *o, struct campaign *c, struct qb_error *e) QB_MUST_USE;
/* ---- ops.c ---- */
/* Whatever the clock makes due in a campaign: freezes, erasures, batches. */
enum qb_status campaign_due(struct ops *o, struct campaign *c, struct qb_error *e) QB_MUST_USE;
/* ---- slots.c ---- */
/* Issues the freeze entries that are due and erases keys of played slots. */
enum qb_status slots_due(struct ops *o, struct campaign *c, struct qb_error *e) QB_MUST_USE;
bool slots_anything_due(struct ops *o, const struct campaign *c);
/* A station's hold or stop at this moment for this slot. */
/* Of the machine, for silences; never entered or sent. driver.c */
int64_t monotonic_ns(void);
/* Notes that a driver asked for something: while its main host speaks, a station's spare gets no slot. driver.c */
void driver_spoke(struct campaign *c, const struct view_party *who);
bool station_held(const struct campaign *c, int station, int64_t slot);
bool station_stopped(const struct campaign *c, int station, int64_t *since_ns);

#endif
