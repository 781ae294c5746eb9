/*
 * The plan: the human-written file that fixes a campaign before anything is drawn. Reading it (strict: shape and
 * ranges) is kept apart from checking it (the rules that tie its parts together), so that `plan check` can list every
 * broken rule at once. docs/plan.md is written from the table of keys at the end.
 */
#ifndef QB_DRILL_PLAN_H
#define QB_DRILL_PLAN_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/buf.h"
#include "server/base/yaml.h"
#include "server/drill/population.h"
#include "server/drill/slots.h"
#include "server/wave/network.h"

#define PLAN_NAME_MAX     64 /* bytes of any name, with its end */
#define PLAN_MAX_PEOPLE   64 /* in one list */
#define PLAN_MAX_FAMILIES 16
#define PLAN_MAX_LIST     32 /* entries of any other list */
#define PLAN_MAX_DUTIES   512

enum plan_phase { PLAN_OBSERVING, PLAN_ENGINEERING, PLAN_REHEARSAL };
enum plan_then { PLAN_RELEASE_WITH_WARNING, PLAN_KEEP_HELD };
enum plan_duty {
	DUTY_CUSTODIAN,
	DUTY_REVIEWER,
	DUTY_OPERATOR,
	DUTY_LIAISON,
	DUTY_DRIVER,  /* of: the station */
	DUTY_SPARE,   /* of: the station whose driver this host stands in for */
	DUTY_ANALYST, /* of: the pipeline */
	DUTIES
};

/* One line of `parties`: a person on one side. Custodians keep their order: it is their index, from 1. */
struct plan_person {
	enum plan_duty duty;
	char name[PLAN_NAME_MAX];
	char of[PLAN_NAME_MAX]; /* station or pipeline, else "" */
	int line;
};

struct plan_names {
	int n;
	char name[PLAN_MAX_LIST][PLAN_NAME_MAX];
};
struct plan_numbers {
	int n;
	double value[PLAN_MAX_LIST];
};

/* How the loudness of a family is drawn: by network SNR (the scale follows) or by the scale itself. */
enum plan_loudness { LOUD_BY_SNR, LOUD_BY_SCALE };

struct plan_family {
	char name[PLAN_NAME_MAX];
	char family[32], model[32]; /* as in a source file; model "" where the family has none */
	double weight;              /* relative, > 0 */
	bool source_frame;          /* masses are drawn in the source frame and redshifted */
	enum plan_loudness loudness;
	char scale[POPULATION_KEY_MAX]; /* "distance_mpc" or "hrss_per_sqrt_hz": what carries the loudness */
	struct dist loud;               /* of network_snr, or of the scale */
	struct population parameters;   /* intrinsic parameters in the plan's order; bounds refer to earlier ones */
	struct population place;        /* always six: right ascension, declination, inclination, polarisation, phase,
	                                   and lowest_frequency_hz (fixed) */
	int line;
};

struct plan_alerts {
	bool given;
	struct plan_names held_for_answer, recipients;
	bool partners_told;
	int64_t no_answer_after_ns, call_next_after_ns;
	enum plan_then then;
	int spot_quota;
};

struct plan_witness {
	char station[PLAN_NAME_MAX], channel[PLAN_NAME_MAX];
	struct plan_names readers;
	bool masked;
	int line;
};

struct plan_question {
	char pipeline[PLAN_NAME_MAX]; /* or "any" */
	double efficiency_at_network_snr, at_least;
	int line;
};

struct plan_audit {
	double match_base_s, match_sigma_factor, match_max_s, confidence;
	struct plan_numbers far_thresholds_per_year, latency_marks_s;
	double far_ceiling_per_year, time_volume_far_per_year;
	struct plan_names parameters, log_parameters;
	int n_milestone_steps;
	char milestone_steps[PLAN_MAX_LIST][2][PLAN_NAME_MAX];
	int n_bins, n_time_shifts;                        /* n_bins 0: chosen by the audit */
	double band_at_network_snr, band_at_distance_mpc; /* NaN: not asked for */
	struct population population;                     /* target of the time-volume; n == 0: none */
	double recognition_chirp_mass_relative, recognition_sky_probability;
};

struct drill_plan {
	char campaign[PLAN_NAME_MAX];
	enum plan_phase phase;
	struct slots slots;
	char network_file[200];
	struct wave_network *network; /* owned */
	int n_people;
	struct plan_person person[PLAN_MAX_DUTIES]; /* in file order, custodians in theirs */
	int custodians, custodians_needed;
	double expected_live, empty_chance;
	int n_families;
	struct plan_family family[PLAN_MAX_FAMILIES];
	int stations_needed;
	bool has_sealer_host; /* the sealer runs on a machine of its own, whose signing key this is */
	uint8_t sealer_host[32];
	struct plan_alerts alerts;
	int64_t batch_ns, acceptance_ns, rehearsals_ns;
	double hubble_km_per_s_per_mpc, matter_density;
	int redraws;
	double delivery_amplitude, delivery_time_s, delivery_phase_rad;
	int n_witnesses;
	struct plan_witness witness[PLAN_MAX_LIST];
	int n_questions;
	struct plan_question question[PLAN_MAX_LIST];
	double largest_drive; /* fraction of the converter's range */
	int n_excluded_bands;
	double excluded_bands_hz[PLAN_MAX_LIST][2];
	struct plan_audit audit;
	struct yaml_doc *doc; /* owned; for the places of findings */
};

/*
 * Hands out the text of a file that the plan or its network names (network.yaml, noise tables).
 *
 * Returned: out     the file's bytes appended
 * Errors:   QB_NOT_FOUND, QB_IO, QB_FORMAT
 */
typedef enum qb_status (*plan_fetch)(void *state, const char *name, struct buf *out, struct qb_error *e);

/*
 * Reads a plan and the network it names.
 *
 * Given:    text, n    YAML or JSON
 *           file       its name for errors
 * Returned: *out       owned by the caller (plan_free)
 * Errors:   QB_FORMAT  unparsable, unknown key, wrong type, missing key; QB_RANGE a value outside its range; each one
 *           line with file:line, key path, the value seen and what is accepted. Both mean: the file is wrong.
 */
enum qb_status plan_parse(const char *text, size_t n, const char *file, plan_fetch fetch, void *state,
                          struct drill_plan **out, struct qb_error *e) QB_MUST_USE;
void plan_free(struct drill_plan **plan);

enum plan_severity { PLAN_WARNING, PLAN_REFUSAL };
struct plan_finding {
	enum plan_severity severity;
	char rule[40];   /* short stable word: "slot-tiling", "one-side" ... */
	char where[240]; /* file:line: key */
	char what[300];
	char mend[240];
};
struct plan_findings {
	int n, n_refusals;
	struct plan_finding *finding; /* owned */
};

/*
 * All rules of a valid plan at once.
 *
 * Returned: out       every finding, in the order of the rules; plan_findings_free
 *           QB_OK     no refusal (there may be warnings)
 *           QB_NO     at least one refusal; e says the first and how many there are
 */
enum qb_status plan_check(const struct drill_plan *plan, struct plan_findings *out, struct qb_error *e) QB_MUST_USE;
void plan_findings_free(struct plan_findings *f);
/* "refusal: what (where); mend", one line. Returns out. */
const char *plan_finding_line(const struct plan_finding *f, char *out, size_t size);

/* Probability that no slot is live: empty_chance + (1 - empty_chance)(1 - q)^n (audit J4). */
double plan_chance_of_none(const struct drill_plan *plan);
/* Mean probability that a slot is live in a campaign that is not empty: expected_live / slots. */
double plan_live_chance(const struct drill_plan *plan);
const char *plan_phase_word(enum plan_phase p);
const char *plan_duty_word(enum plan_duty d); /* "custodian", "reviewer" ... */
/* The i-th person of a duty (from 0), or NULL. */
const struct plan_person *plan_person(const struct drill_plan *plan, enum plan_duty duty, int i);
/* The person by name, or NULL. */
const struct plan_person *plan_person_named(const struct drill_plan *plan, const char *name);
/* Position of a station in the network, or -1. */
int plan_station(const struct drill_plan *plan, const char *name);

/* One key of the plan file. Drives the reader's key lists, the defaults and docs/plan.md. */
struct plan_key {
	const char *path;     /* "drills.guard" */
	const char *unit;     /* "", "s", "1 / year" ... */
	const char *range;    /* what is accepted, in words */
	const char *fallback; /* what holds when it is left out; "required" */
	const char *prose;    /* one or two sentences */
};
const struct plan_key *plan_keys(int *n);

#endif
