/*
 * Accidental coincidences (audit clauses A6, A8, A9): how often a claim that has nothing to do with a drill would cover
 * its time by chance, what that does to an efficiency, and whether null slots attract claims.
 */
#ifndef QB_AUDIT_ACCIDENTAL_H
#define QB_AUDIT_ACCIDENTAL_H

#include "server/audit/binomial.h"
#include "server/audit/match.h"

/* Observing time away from drills and vetoes, where every claim is background or a real signal. */
struct audit_background {
	struct audit_segments time; /* owned */
	double livetime_s, observing_s;
	double quarter_gps[3]; /* where the second, third and fourth quarter of the livetime begin */
};

struct audit_background audit_background_of(const struct audit_input *in, const struct audit_match *m);
void audit_background_free(struct audit_background *b);

struct audit_accidental {
	size_t background_claims;
	double lambda;         /* mean number of background claims whose window covers an instant */
	double probability;    /* that a drill is matched by accident */
	double standard_error; /* of the probability, from counting */
	bool by_quarter;       /* the claim rate varies, so that the probability was averaged over quarters */
};

/*
 * Given:    pipeline  index
 * Returned: the accidental coincidence of its unexplained claims inside the background time; zeros without livetime
 */
struct audit_accidental audit_accidental_of(const struct audit_input *in, const struct audit_match *m,
                                            const struct audit_background *b, size_t pipeline);

/* At least one pipeline by accident: 1 - product of (1 - p). */
struct audit_accidental audit_accidental_union(const struct audit_accidental *each, size_t n);

/*
 * Efficiency and its Wilson limits without accidental matches (Abbott 1925). Where the accidental probability is above
 * 0.02, its own two-standard-error uncertainty widens the limits.
 */
void audit_corrected(double estimate, struct audit_interval wilson, const struct audit_accidental *a,
                     double out[static 3]);

#endif
