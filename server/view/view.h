/*
 * A campaign as the ledger tells it: parties, plan, key generation, sealing, schedule, holds, openings. One projection,
 * leaf by leaf, for everybody who reads the ledger: the service (at start and after each commit), clients and
 * custodians (from their own verified copy), and the verifier of a bundle. So no two of them can understand an entry
 * differently.
 */
#ifndef QB_VIEW_VIEW_H
#define QB_VIEW_VIEW_H

#include "server/custody/deal.h"
#include "server/custody/partial.h"
#include "server/custody/recipe.h"
#include "server/custody/repair.h"
#include "server/custody/reshare.h"
#include "server/drill/plan.h"
#include "server/drill/states.h"
#include "server/ledger/entry.h"
#include "server/wire/entries.h"

#define NO_SEQ (-1)

#define VIEW_KEYS_MAX    32 /* former keys of one party */
#define VIEW_VOUCHES     2  /* colleagues who must vouch before keys that replace lost ones count */
#define VIEW_VOUCHES_MAX 8

struct view_key {
	uint8_t key_id[16], signing_key[32], exchange_key[32];
	int64_t seq; /* of the entry that brought it */
};
struct view_party {
	char name[64];
	enum wire_role role; /* as enrolled */
	uint8_t key_id[16], signing_key[32], exchange_key[32];
	int64_t seq;     /* of the first enrolment */
	int64_t key_seq; /* of the entry from which the present keys count */
	char person[64]; /* who it is; the party's own name unless a same-person entry says otherwise */
	bool retired;
	int64_t retired_seq;
	struct view_key past[VIEW_KEYS_MAX]; /* former keys: what they signed in their time stays valid */
	int n_past;
	bool has_pending; /* new keys, enrolled with a second invitation, wait for VIEW_VOUCHES vouches */
	struct view_key pending;
	char voucher[VIEW_VOUCHES_MAX][64];
	int n_vouchers;
};

enum campaign_state { C_DRAFTED, C_CERTIFIED, C_REHEARSED, C_SEALING, C_SEALED, C_CLOSED, C_OPENED };

struct custodian {
	const struct view_party *party;                                                 /* owned by struct view */
	int64_t deal_seq, certify_seq, rehearsal_seq, commitment_seq, contribution_seq; /* NO_SEQ: not yet */
	uint8_t *deal; /* owned; of the current attempt */
	size_t deal_n;
	uint8_t certificate_signature[SIGN_BYTES];
	uint8_t contribution_commitment[64]; /* for the current sealing attempt */
	int unopened;      /* canaries since the newest that this custodian opened, the present one not counted */
	int64_t opened_ns; /* when that one was sealed */
};

/* How long an attempt at key generation waits before a silent custodian may be left out. */
#define KEYGEN_SILENCE_NS (INT64_C(72) * 3600 * INT64_C(1000000000))

/* An attempt that ended without effect. */
enum attempt_kind { ATTEMPT_KEYGEN, ATTEMPT_RESHARING, ATTEMPT_REPAIR };
struct custody_failure {
	enum attempt_kind kind;
	uint64_t attempt;  /* each kind has its own numbers */
	char excluded[64]; /* who is left out, or holds and deals no further share; "" when nobody is to blame */
	char how[40];      /* "dealt a bad share" ... */
	char by[64];       /* whose entry ended it */
	char why[300];     /* as the entry says */
};

/* A stretch of time in which somebody was a custodian of the campaign. */
struct custody_term {
	const struct view_party *party;
	int64_t from_ns, to_ns; /* to_ns: INT64_MAX while in office */
};

/* Somebody who has still to state that a share is erased. */
struct erasure_owed {
	const struct view_party *party;
	uint64_t epoch; /* of the share; 0: what a resharing dealt that came to nothing */
	int64_t seq;    /* of the entry since which it is owed */
};

/* What proves a group to anybody: the signed messages and the certificate. */
struct group_proof {
	struct buf deal[CUSTODY_MAX]; /* owned; in the order of the dealers */
	struct buf certificate;       /* owned */
};

/* A resharing under way: nothing of the present set changes until all of the new one have opened a canary. */
struct reshare_view {
	bool under_way;
	int64_t request_seq;
	int n, k;
	struct custodian member[CUSTODY_MAX]; /* the new set; deals are the dealers', below */
	int dealer[CUSTODY_MAX];              /* positions of the old set's dealers, from 0; as many as are needed */
	struct buf deal[CUSTODY_MAX];         /* owned; empty until it came */
	struct reshare_context context;
	struct custody_group group; /* once all deals are in */
	bool has_group;
	int64_t canary_seq;
	uint64_t canary_index;
	int64_t canary_ns;
	uint8_t canary_leaf[32];
	struct buf canary; /* owned */
};
/* A resharing that took effect: how the next group follows from the one before. */
struct epoch_proof {
	struct reshare_context context;
	struct group_proof proof;
	int64_t seq; /* of the reshared entry */
};
/* A repair under way. */
struct repair_view {
	bool under_way;
	uint64_t attempt;
	int lost;                      /* position, from 0 */
	int helper[CUSTODY_MAX];       /* positions; as many as are needed */
	struct buf split[CUSTODY_MAX]; /* owned; by place in helper */
	struct buf sum[CUSTODY_MAX];   /* owned */
	struct repair_context context;
};

struct hold {
	int64_t seq;
	struct states_hold hold;
};
struct stop {
	int64_t seq;
	struct states_stop stop;
};

enum opening_scope { SCOPE_FULL, SCOPE_SPOT };
struct opening {
	uint8_t id[16];
	enum opening_scope scope;
	uint8_t authority[64]; /* leaf hash (32) or commitment (64) */
	int64_t seq;           /* of the entry; NO_SEQ for a spot */
	uint8_t asker[16];     /* key id */
	bool opened;
	int64_t asked_ns, deadline_ns; /* received; of the request */
	int64_t reveal_ns;             /* full: shares are taken from this time on */
	int64_t *positions;            /* spot: the records it opens, fixed when it was asked */
	int n_positions;
};

/* What a slot's public listing shows beyond the schedule. */
struct slot_public {
	uint8_t record_id[64], slot_key_commitment[64];
	int64_t freeze_seq;   /* NO_SEQ before the freeze */
	uint8_t ready, going; /* bit per station */
	uint8_t reported;     /* bit per station */
	uint8_t notes[STATES_MAX_STATIONS];
};

/* How a campaign ended before its time. */
enum campaign_ending { ENDING_NONE, ENDING_EARLY, ENDING_ABANDONED };

struct seal_job; /* the service's, server/ops/seal.c */

struct campaign {
	uint8_t id[16];
	char name[PLAN_NAME_MAX];
	bool rehearsal_clock;
	int64_t plan_seq, drafted_ns;
	char drafted_by[64];
	char *plan_text, *plan_files; /* owned; files: JSON text of {name: text} */
	struct drill_plan *plan;      /* owned */
	enum campaign_state state;
	int n, k;
	struct custodian custodian[CUSTODY_MAX];
	uint64_t attempt, sealing_attempt;
	bool stalled;                    /* too few custodians are left for a key generation */
	int64_t step_ns;                 /* when the attempt began, or anybody last did a step of it */
	struct custody_failure *failure; /* owned */
	int n_failures;
	struct custody_term *term; /* owned */
	int n_terms;
	uint64_t epoch; /* 1, and one more for each resharing */
	struct group_proof founding;
	struct custodian
	    founder[CUSTODY_MAX]; /* the set of epoch 1, whose contributions the draw is made of; no deals */
	int n_founders;
	struct epoch_proof *later; /* owned; epoch - 1 of them */
	struct reshare_view reshare;
	uint64_t reshare_attempt;  /* of the next or running one, from 1 */
	struct erasure_owed *owed; /* owned */
	int n_owed;
	struct repair_view repair;
	uint64_t repair_attempt;
	int n_canaries;
	int64_t canary_ns;
	uint64_t canary_index;         /* in the newest canary's header */
	struct keygen_context context; /* of the current attempt; from the certificate on, of epoch 1 */
	struct custody_group group;    /* from C_CERTIFIED on, and once all deals are in */
	bool has_group;
	int64_t canary_seq;
	uint8_t canary_leaf[32];
	uint8_t *canary; /* owned */
	size_t canary_n;
	bool prekeys[STATES_MAX_STATIONS][RECIPE_PLACES];
	int64_t sealing_seq, sealed_seq, closing_seq;
	int64_t sealing_records; /* entered by the sealing that runs: the seed's and the slots' */
	uint8_t sealer_key[32], service_commitment[64];
	bool host_signed_key, host_signed_output; /* by the plan's sealer host; false without one */
	int64_t hidden_count;                     /* of the hidden-summary entry; NO_SEQ before it */
	uint8_t hidden_hash[64];
	int64_t n_slots;
	struct slot_public *slot; /* owned; n_slots */
	uint8_t seed_record_id[64];
	int64_t next_freeze;                      /* first slot without a freeze entry */
	int64_t witness_seq[STATES_MAX_STATIONS]; /* newest witness statement; NO_SEQ: none */
	struct hold *hold;
	int n_holds;
	struct stop *stop;
	int n_stops;
	struct opening *opening;
	int n_openings;
	enum campaign_ending ending;
	int64_t ended_ns, ending_seq; /* of its entry; from then on nothing is played: it also stands as a stop */
	char ended_by[64];
	char *ended_why; /* owned; "" without an ending */
	/* Working state of the service alone; readers leave it as it is. */
	struct seal_job *job;
	int64_t erased_below;                      /* keys of slots below this one are erased */
	int64_t main_seen_ns[STATES_MAX_STATIONS]; /* monotonic; when a station's main host last spoke */
	int64_t last_batch_ns;                     /* hidden batches entered up to this time; starts at the sealing */
	int64_t n_claims;
};

struct view {
	struct view_party **party; /* each owned; pointers stay valid */
	int n_parties;
	struct campaign **campaign; /* each owned */
	int n_campaigns;
	uint8_t service_key[32], service_id[16], administrator_key[32];
	bool started;         /* the first leaf was seen */
	bool rehearsal_clock; /* as it says */
};

/*
 * Applies one leaf. The caller verified the leaf's place and, with view_author_key, its signature.
 *
 * Given:    leaf_hash   of the frame
 * Errors:   QB_FORMAT   an entry that no service of this version enters; QB_FAULT an entry about an unknown campaign
 */
enum qb_status view_apply(struct view *v, const struct entry *leaf, const uint8_t leaf_hash[static 32],
                          struct qb_error *e) QB_MUST_USE;
void view_free(struct view *v);
void campaign_free(struct campaign **c);
/*
 * The key that must have signed a leaf, by what was enrolled before it: the service's for its own and hidden entries,
 * the author's else, an enrolment's own new key.
 *
 * Errors:   QB_CRYPTO   nobody with this key id is enrolled; QB_FORMAT
 */
enum qb_status view_author_key(const struct view *v, const struct entry *leaf, uint8_t key[static 32],
                               struct qb_error *e) QB_MUST_USE;

struct campaign *view_campaign(const struct view *v, const char *name_or_id);
const struct view_party *view_party_named(const struct view *v, const char *name);
/* By a present or former key. */
const struct view_party *view_party_by_id(const struct view *v, const uint8_t key_id[static 16]);
/* By the key that counts now; NULL also for a retired party: whose requests are taken. */
const struct view_party *view_party_acting(const struct view *v, const uint8_t key_id[static 16]);
/* The signing key with this id, present or former; NULL when nobody has or had it. */
const uint8_t *view_signing_key(const struct view *v, const uint8_t key_id[static 16]);
/* Two parties that are one person as far as the ledger says. */
bool view_one_person(const struct view_party *a, const struct view_party *b);
/*
 * Whether a party may take a duty in a campaign, by its person's history: nobody who has another duty there, under any
 * name. Errors: QB_REFUSED, with the name that stands against it.
 */
enum qb_status view_eligible(const struct view *v, const struct campaign *c, const char *name, enum plan_duty duty,
                             struct qb_error *e) QB_MUST_USE;
/* T("quietbell/1/party/rotation", old key id, new signing key, new exchange key): what the new key signs. */
void view_rotation_statement(const uint8_t old_id[static 16], const struct party_public *fresh, uint8_t out[static 64]);
/*
 * Whether one party may vouch for the waiting keys of another: another person, once, who has a part in every campaign
 * under way in which that party has one. Errors: QB_CONFLICT, QB_REFUSED
 */
enum qb_status view_may_vouch(const struct view *v, const char *by_name, const char *name,
                              struct qb_error *e) QB_MUST_USE;
/* A custodian whose keys are part of a key generation that is under way: they can't change now. */
bool view_keys_in_use(const struct view *v, const struct view_party *p);
int custodian_index(const struct campaign *c, const char *name);   /* from 0, or -1 */
int station_of_driver(const struct campaign *c, const char *name); /* also of a spare host; -1 for nobody's */
enum recipe_place place_of_driver(const struct campaign *c, const char *name);
struct opening *opening_find(struct campaign *c, const char *id_hex);
/* The party's role in the campaign; ROLE_NONE when it has none. */
enum wire_role campaign_role(const struct campaign *c, const struct view_party *p);
/* The role it had at a time: custodians come and go. */
enum wire_role campaign_role_then(const struct campaign *c, const struct view_party *p, int64_t at_ns);
/*
 * What a sealer's host signed at the end of a run (custody/seed.h), from what the ledger fixed: the records of the
 * slots from first_slot on.
 */
void campaign_output_statement(const struct campaign *c, int64_t first_slot, const uint8_t recipes_hash[static 64],
                               uint8_t out[static 64]);
/* The first station with witness channels in the plan that nobody has signed a statement for; -1 when there is none. */
int campaign_witness_missing(const struct campaign *c);
const char *campaign_state_word(enum campaign_state s);
/* The index that the next canary's header bears: the attempt's number, and one more for each canary before it. */
uint64_t campaign_next_canary(const struct campaign *c);
/* How many opened the newest canary, less how many an opening needs. */
int campaign_margin(const struct campaign *c);
/*
 * How many rehearsals in a row the custodian at i has missed, the present canary not counted: canaries not opened, but
 * no more than whole intervals of the plan have passed, so that canaries on demand make nobody look absent.
 */
int campaign_missed(const struct campaign *c, int i);
/* The custodians of epoch 1, whose contributions the draw is made of. */
const struct custodian *campaign_drawers(const struct campaign *c, int *n);
/*
 * Who is called for an opening, in what order: the list begins at a place that the opening's id fixes, so that the same
 * people are not always first; the first k at once, one more for each step that passes without enough shares.
 *
 * Returned: order        positions of custodians, all n
 *           the number of them that are called at this time
 */
int opening_rota(const struct campaign *c, const uint8_t id[static 16], enum opening_scope scope, int64_t asked_ns,
                 int64_t deadline_ns, int64_t now_ns, int order[CUSTODY_MAX]);
/*
 * Whether the plan lets this be asked: a reason, and recipients that the plan names. Errors: QB_REFUSED
 */
enum qb_status campaign_spot_allowed(const struct campaign *c, const struct wire_entry *en,
                                     struct qb_error *e) QB_MUST_USE;
/* Drafted, certified ... or stalled. */
const char *campaign_word(const struct campaign *c);
/*
 * Judges a complaint entry against the ledger alone: *guilty is the position, from 0, of whoever is left out.
 * Errors: QB_CONFLICT, QB_FORMAT, QB_CRYPTO: no complaint about a deal of the running attempt
 */
enum qb_status campaign_judge(const struct campaign *c, const struct wire_entry *en, int *guilty,
                              struct qb_error *e) QB_MUST_USE;
/*
 * The position of a custodian who may be left out for silence: somebody has done the step that is due, they have not,
 * and nobody has done any for KEYGEN_SILENCE_NS. -1: no.
 */
int campaign_silent(const struct campaign *c, const char *name, int64_t now_ns);
/* Whether a complaint or silence put the blame for a failed attempt on them: they get no share of this key any more. */
bool campaign_blamed(const struct campaign *c, const char *name);
const char *campaign_attempt_word(enum attempt_kind kind); /* "key generation", "resharing", "repair" */
/* The attempts that ended without effect, as objects of, attempt, excluded, how, by, why; the caller's. */
json_t *campaign_failures(const struct campaign *c);
/* A place in the new set of a resharing under way, from 0, or -1. */
int reshare_member(const struct campaign *c, const char *name);
int reshare_dealer(const struct campaign *c, const char *name); /* the dealer's place in the list */
/* The first erasure that the party has still to state, or NULL. */
const struct erasure_owed *campaign_owes(const struct campaign *c, const char *name);
int repair_helper(const struct campaign *c, const char *name); /* the helper's place in the list, or -1 */
/* What a request would start, with every rule checked. Errors: QB_CONFLICT, QB_REFUSED, QB_RANGE, QB_CRYPTO */
enum qb_status reshare_prepare(const struct view *v, const struct campaign *c, const struct wire_entry *en,
                               struct reshare_view *out, struct qb_error *e) QB_MUST_USE;
enum qb_status repair_prepare(const struct campaign *c, const struct wire_entry *en, struct repair_view *out,
                              struct qb_error *e) QB_MUST_USE;
/* The deals of the resharing under way, parsed: as many as dealers. */
enum qb_status reshare_deals(const struct campaign *c, struct deal *out, struct qb_error *e) QB_MUST_USE;
/* As campaign_judge; *guilty is the name of the dealer or of the accuser. */
enum qb_status reshare_judge(const struct campaign *c, const struct wire_entry *en, const char **guilty,
                             struct qb_error *e) QB_MUST_USE;
/* Opened, or abandoned before there was anything to open: nobody has a part in it any more. */
bool campaign_over(const struct campaign *c);
/* False for a slot that an early ending kept from its freeze. */
bool campaign_reached(const struct campaign *c, int64_t slot);
const char *campaign_ending_word(enum campaign_ending ending); /* "closed early", "abandoned", "" */
/* Whether the full opening has been asked for. */
bool campaign_full_opening(const struct campaign *c);
/* The certificate verified from the deals, with all n signatures. Errors: QB_CRYPTO; QB_CONFLICT not certified yet. */
enum qb_status campaign_certified_group(const struct campaign *c, struct custody_group *out,
                                        struct qb_error *e) QB_MUST_USE;
/* T("quietbell/1/ledger/hidden-all", commitments): what a hidden-summary entry fixes; in the order of the ledger. */
void view_hidden_summary(const uint8_t (*commitments)[64], size_t n, uint8_t out[static 64]);
/* All holds and stops as drill/states.h wants them; the arrays are the caller's to free with qb_free. */
void campaign_controls(const struct campaign *c, struct states_hold **holds, struct states_stop **stops);

#endif
