/*
 * What an audit starts from: the pre-registered settings, the opened truth of every slot, and every claim. It can be
 * built in memory by a bundle reader (one call per JSON object) or from the text of an audit folder's files; nothing
 * here reads a file.
 */
#ifndef QB_AUDIT_INPUT_H
#define QB_AUDIT_INPUT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/audit/segments.h"
#include "server/base/err.h"
#include "server/base/json.h"

#define AUDIT_MAX_PIPELINES  30
#define AUDIT_MAX_COLUMNS    64
#define AUDIT_MAX_THRESHOLDS 64
#define AUDIT_MAX_QUESTIONS  64
#define AUDIT_MAX_SLOTS      ((size_t)1 << 22)
#define AUDIT_MAX_CLAIMS     ((size_t)1 << 22)
#define AUDIT_MAX_SEGMENTS   ((size_t)1 << 20)

/* State of a slot, from the operations log (audit clause A0). */
enum audit_state {
	AUDIT_LIVE,            /* the signal was played and the readback verified it */
	AUDIT_FAILED_DELIVERY, /* played, but out of tolerance */
	AUDIT_ABORTED,         /* stopped after the start */
	AUDIT_VETOED,          /* stopped before the start */
	AUDIT_SKIPPED,         /* not ready */
	AUDIT_NULL,            /* nothing to play, by the draw */
	AUDIT_STATE_COUNT
};

const char *audit_state_word(enum audit_state s); /* "live", "failed_delivery" ... */
/* Some of the signal reached the instrument: live, failed_delivery or aborted. */
bool audit_state_actuated(enum audit_state s);

/* One numeric truth parameter, or the stated quantiles of one; `column` indexes audit_input.columns. */
struct audit_value {
	unsigned column;
	double value;
};

struct audit_quantiles {
	unsigned column;
	double q[5]; /* at 5, 25, 50, 75 and 95 % */
	bool increasing;
};

struct audit_slot {
	char *slot_id;
	enum audit_state state;
	bool drawn_live; /* the draw, whatever became of it */
	double planned_gps, arrival_gps;
	struct audit_value *values; /* owned */
	size_t n_values;
};

struct audit_claim {
	char *claim_id;
	unsigned pipeline;   /* index into settings.pipelines */
	char *revision_of;   /* claim_id of the claim it replaces, or NULL */
	double arrival_gps;  /* NaN when the file has no usable number */
	double sigma_s;      /* 0 when missing, not positive or not finite */
	double far_per_year; /* NaN when missing */
	bool far_malformed;  /* stated, but negative or not a finite number */
	double submitted_gps;
	double network_snr; /* NaN when missing */
	struct audit_quantiles *quantiles;
	size_t n_quantiles;
};

/* Where the plan wants the valid band of the efficiency read. */
struct audit_band_point {
	char *covariate;
	double at;
};

/* A question of the plan: is the efficiency at this network SNR at least so much? */
struct audit_question {
	int pipeline; /* index, or -1 for "any" */
	double network_snr, at_least;
};

struct audit_settings {
	char *name; /* of the set or the campaign */
	double confidence, closing_gps;
	uint64_t seed;
	double match_base_s, match_sigma_factor, match_max_s;
	char *pipelines[AUDIT_MAX_PIPELINES];
	size_t n_pipelines;
	char *parameters[AUDIT_MAX_COLUMNS];
	size_t n_parameters;
	char *log_parameters[AUDIT_MAX_COLUMNS];
	size_t n_log_parameters;
	double far_thresholds_per_year[AUDIT_MAX_THRESHOLDS];
	size_t n_far_thresholds;
	size_t n_bins; /* 0: as clause B3 */
	struct audit_band_point band_at[AUDIT_MAX_QUESTIONS];
	size_t n_band_at;
	struct audit_question questions[AUDIT_MAX_QUESTIONS];
	size_t n_questions;
	struct audit_segments observing, vetoes; /* tidy */
	json_t *unknown_keys;                    /* array of names that were not understood; printed, never guessed */
};

struct audit_input {
	struct audit_settings settings;
	char *columns[AUDIT_MAX_COLUMNS]; /* names of truth parameters and stated quantiles */
	size_t n_columns;
	struct audit_slot *slots;
	size_t n_slots, cap_slots;
	struct audit_claim *claims;
	size_t n_claims, cap_claims;
	json_t *course; /* object or NULL: what happened beside the claims; printed, never computed from */
};

/* An empty input with the default settings; audit_input_free() releases everything and nulls the pointer. */
struct audit_input *audit_input_new(void);
void audit_input_free(struct audit_input **in);

/*
 * Settings, then slots and claims, each one JSON object with the keys of the audit folder (docs/audit.md). Times are
 * read as numbers or decimal strings.
 *
 * Given:    in      settings must come first, since claims name their pipeline
 *           doc     not kept
 *           what    the place, for errors ("claims.jsonl:17")
 * Errors:   QB_FORMAT for missing identifiers, unknown states and pipelines; QB_RANGE for settings outside their range.
 *           A claim whose times or rate are no finite numbers is kept: the audit calls it malformed and goes on.
 */
enum qb_status audit_input_settings(struct audit_input *in, const json_t *doc, const char *what,
                                    struct qb_error *e) QB_MUST_USE;
enum qb_status audit_input_slot(struct audit_input *in, const json_t *doc, const char *what,
                                struct qb_error *e) QB_MUST_USE;
enum qb_status audit_input_claim(struct audit_input *in, const json_t *doc, const char *what,
                                 struct qb_error *e) QB_MUST_USE;

/* At most once. QB_FORMAT when it is no object. */
enum qb_status audit_input_course(struct audit_input *in, const json_t *doc, const char *what,
                                  struct qb_error *e) QB_MUST_USE;

/* The same from the text of settings.json, slots.jsonl and claims.jsonl; blank lines are skipped. */
enum qb_status audit_input_settings_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                         struct qb_error *e) QB_MUST_USE;
enum qb_status audit_input_slots_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                      struct qb_error *e) QB_MUST_USE;
enum qb_status audit_input_claims_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                       struct qb_error *e) QB_MUST_USE;
enum qb_status audit_input_course_text(struct audit_input *in, const char *text, size_t n, const char *what,
                                       struct qb_error *e) QB_MUST_USE;

/* A number given as a number or as a decimal string; NaN when it is neither. */
double audit_number(const json_t *v);
/* Index of a column, or -1. */
int audit_column(const struct audit_input *in, const char *name);
/* A slot's truth parameter by name (arrival_gps included), NaN when it has none. */
double audit_truth(const struct audit_input *in, const struct audit_slot *s, const char *name);
/* A claim's stated quantiles of a parameter, or NULL. */
const struct audit_quantiles *audit_stated(const struct audit_input *in, const struct audit_claim *c, const char *name);
/* Is the parameter judged on a logarithmic scale? */
bool audit_is_log(const struct audit_settings *s, const char *parameter);

#endif
