/*
 * The pieces of the audit document that more than one file writes. JSON has no NaN: what is not known is null.
 */
#ifndef QB_AUDIT_DOCUMENT_H
#define QB_AUDIT_DOCUMENT_H

#include "server/audit/accidental.h"
#include "server/audit/efficiency.h"
#include "server/audit/groups.h"
#include "server/audit/match.h"
#include "server/base/json.h"

/* All that the blocks are computed from. */
struct audit_results {
	const struct audit_input *in;
	struct audit_match match;
	struct audit_background background;
	struct audit_accidental accidental[AUDIT_MAX_PIPELINES];
	struct audit_groups groups;
	bool *crowded; /* per slot */
};

json_t *document_real(double x); /* null unless finite */
json_t *document_count(size_t n);
json_t *document_pair(double lower, double upper);
void document_set(json_t *obj, const char *key, json_t *value); /* takes the reference */
/* found, estimate, clopper_pearson, wilson into obj; the three are null without drills. */
void document_efficiency(json_t *obj, const struct audit_efficiency *eff);

/* Blocks: one pipeline; the comparison of pipelines; lists for people. Each is owned by the caller. */
json_t *document_pipeline(const struct audit_results *r, size_t pipeline);
json_t *document_curve(const struct audit_results *r, int pipeline, const char *covariate);
json_t *document_comparison(const struct audit_results *r);
json_t *document_groups(const struct audit_results *r);
json_t *document_questions(const struct audit_results *r);
json_t *document_drills(const struct audit_results *r);
json_t *document_missed(const struct audit_results *r);
json_t *document_unexplained(const struct audit_results *r);
json_t *document_claims(const struct audit_results *r);
json_t *document_residuals(const struct audit_results *r);

#endif
