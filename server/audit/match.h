/*
 * Claims against drills for the whole campaign (audit clauses A1-A5): reduces each pipeline's claims, assigns them, and
 * gives every claim one status. There is no status "false": a claim that matches nothing is unexplained.
 */
#ifndef QB_AUDIT_MATCH_H
#define QB_AUDIT_MATCH_H

#include "server/audit/assign.h"
#include "server/audit/input.h"

enum audit_status {
	AUDIT_FOUND,            /* matched to a live drill */
	AUDIT_MATCHED_EXCLUDED, /* matched to a drill that failed in delivery or was aborted */
	AUDIT_DUPLICATE,        /* within its window of a drill, but another claim was chosen */
	AUDIT_OUTSIDE_OBSERVING,
	AUDIT_IN_VETOED_TIME,
	AUDIT_UNEXPLAINED, /* matches no drill: perhaps real */
	AUDIT_SUPERSEDED,  /* replaced by a later revision in time */
	AUDIT_LATE,        /* submitted after closing */
	AUDIT_MALFORMED,
	AUDIT_STATUS_COUNT
};

const char *audit_status_word(enum audit_status s);

struct audit_fate {
	enum audit_status status;
	double window_s;            /* of kept claims */
	double first_submitted_gps; /* of kept claims: the chain's first submission in time */
	ptrdiff_t slot;             /* index of the matched slot, or -1 */
	bool near_null_slot;        /* unexplained, and within its window of a null slot's time */
};

struct audit_match {
	struct audit_fate *fates; /* owned; one per claim of the input */
	ptrdiff_t *claim_of;      /* owned; [pipeline * n_slots + slot]: the claim matched to a slot, or -1 */
	size_t n_slots, n_pipelines;
	struct assign_result per_pipeline[AUDIT_MAX_PIPELINES]; /* counts and weights; drill_of is NULL */
	size_t status_counts[AUDIT_MAX_PIPELINES][AUDIT_STATUS_COUNT];
	size_t claims_in_file[AUDIT_MAX_PIPELINES];
	size_t near_null[AUDIT_MAX_PIPELINES];
	double largest_window_s; /* over all kept claims; match_base_s when there are none */
};

/*
 * Given:    in     settings, slots and claims
 * Errors:   QB_FORMAT  a slot_id, or a pipeline's claim_id, that occurs twice
 *           QB_RANGE   a crowd too large to match, with its time range
 * Owns:     release *out with audit_match_free()
 */
enum qb_status audit_match(const struct audit_input *in, struct audit_match *out, struct qb_error *e) QB_MUST_USE;
void audit_match_free(struct audit_match *m);

/* The claim with which a pipeline found a live drill, or -1. */
ptrdiff_t audit_found_by(const struct audit_match *m, const struct audit_input *in, size_t pipeline, size_t slot);

#endif
