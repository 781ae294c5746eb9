/*
 * Unexplained claims of all pipelines grouped in time (audit clause A11). Groups seen by every pipeline may be real
 * events and stand at the head of the report.
 */
#ifndef QB_AUDIT_GROUPS_H
#define QB_AUDIT_GROUPS_H

#include "server/audit/match.h"

struct audit_group {
	size_t first, n; /* slice of audit_groups.claims */
	size_t pipelines;
	double mean_gps;
};

struct audit_groups {
	size_t *claims; /* owned; indices of unexplained claims in time order */
	size_t n_claims;
	struct audit_group *at; /* owned; in time order */
	size_t n;
};

/* Neighbours in time are linked when the gap is at most the larger of their two windows. */
struct audit_groups audit_groups_of(const struct audit_input *in, const struct audit_match *m);
void audit_groups_free(struct audit_groups *g);

#endif
