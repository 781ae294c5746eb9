/*
 * Offline verification of a bundle: each property by name, how it was checked, and whether it holds; then everything
 * that was opened, for the audit.
 */
#ifndef QB_CLIENT_CLI_BUNDLE_VERIFY_H
#define QB_CLIENT_CLI_BUNDLE_VERIFY_H

#include "client/cli/bundle_file.h"
#include "server/audit/input.h"
#include "server/drill/truth.h"

#define VERIFY_CHECKS 20

struct verify_check {
	const char *property, *how;
	bool done, holds;
	char detail[400]; /* counts, or why not */
};
struct verified {
	struct bundle *bundle; /* owned; NULL when the file is none */
	struct follow follow;  /* the ledger, verified leaf by leaf */
	struct campaign *k;    /* in follow.view */
	struct custody_group group;
	struct opening *opening; /* the full one */
	struct buf *content;     /* of each record, opened; owned */
	bool *opens;             /* of each record: false when its author sealed it to nobody; owned */
	struct secret *seed;
	uint64_t audit_seed;
	struct verify_check check[VERIFY_CHECKS];
	int n_checks;
	bool all;
	char note[400]; /* what a check that holds has to add; taken into its detail */
};
/*
 * The whole list, up to the first property that fails: what rests on a broken property is not judged.
 *
 * Returned: *out    also when a property fails (out->all is false); NULL only when the file can't be opened
 * Errors:   QB_NO   something does not hold (e says the first); QB_IO
 */
enum qb_status bundle_verify(const char *path, struct verified **out, struct qb_error *e) QB_MUST_USE;
void verified_free(struct verified **v);
/* What no verifier of a bundle can see, as full sentences; NULL-ended. */
extern const char *const verify_not_checked[];

/* One check each (bundle_verify.c, bundle_order.c). Errors: QB_NO with what is wrong. */
enum qb_status verify_fingerprints(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_ledger(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_head(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_order(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_key(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_sealer(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_records(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_hidden(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_recipes(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_opening(struct verified *v, struct qb_error *e) QB_MUST_USE;
/* What the check has to say when it holds. */
void verify_note(struct verified *v, const char *fmt, ...) QB_PRINTF(2, 3);

/* Re-derivation from the seed (bundle_redraw.c). Errors: QB_NO with what differs. */
enum qb_status verify_seed(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_reseal(struct verified *v, struct qb_error *e) QB_MUST_USE;
enum qb_status verify_redraw(struct verified *v, struct qb_error *e) QB_MUST_USE;

/* The campaign was closed when and as it may be, and nothing was frozen after an early end (bundle_course.c). */
enum qb_status verify_ending(struct verified *v, struct qb_error *e) QB_MUST_USE;
/* Every guess was received before its slot started, and is about it (bundle_guesses.c). */
enum qb_status verify_guesses(struct verified *v, struct qb_error *e) QB_MUST_USE;
/* Appends the standing guesses: the newest of each person about each slot. */
enum qb_status bundle_guesses_of(const struct verified *v, json_t *list, struct qb_error *e) QB_MUST_USE;

/* Position of the checked record with this id; the number of records when there is none (bundle_guesses.c). */
size_t bundle_record(const struct bundle *b, const uint8_t id[static 64]);

/* What happened beside the claims, for the report: see docs/audit.md, "The course" (bundle_course.c). */
enum qb_status bundle_course_of(const struct verified *v, json_t *course, struct qb_error *e) QB_MUST_USE;
/* Its part about questions and answers during the campaign (bundle_questions.c). */
enum qb_status bundle_questions_of(const struct verified *v, json_t *course, struct qb_error *e) QB_MUST_USE;

/* Settings, slots, claims and guesses of a verified bundle as the audit reads them, owned by the caller. */
struct bundle_audit {
	json_t *settings, *slots, *claims, *guesses; /* object, arrays */
	json_t *course;                              /* object */
};
enum qb_status bundle_audit_of(const struct verified *v, struct bundle_audit *out, struct qb_error *e) QB_MUST_USE;
void bundle_audit_free(struct bundle_audit *a);
/* The same as an input for audit_run. */
enum qb_status audit_source_bundle(const char *path, struct audit_input **out, struct qb_error *e) QB_MUST_USE;

#endif
