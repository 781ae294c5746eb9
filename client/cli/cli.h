/*
 * The command line: one table of verbs per noun, from which dispatch, usage, help, man pages and completion come, and
 * the call object through which a verb reads its options and prints its answer.
 */
#ifndef QB_CLIENT_CLI_H
#define QB_CLIENT_CLI_H

#include <stdbool.h>
#include <stdint.h>

#include "server/base/err.h"
#include "server/base/json.h"

struct cli_option {
	const char *name;  /* without the dashes; NULL ends a list */
	const char *value; /* "FILE", "GPS" ... for the usage line; NULL for a flag */
	bool required;
	const char *help;
};

struct cli_call;

struct cli_verb {
	const char *noun, *verb; /* verb "" for a noun without verbs; noun NULL ends a table */
	const char
	    *args; /* "PLAN", "CAMPAIGN N" ...: one word per positional argument, "[X]" optional, "X..." repeats */
	enum qb_status (*run)(struct cli_call *);
	const struct cli_option *options; /* beyond the common ones; may be NULL */
	const char *help;                 /* one sentence */
	const char *example;              /* one line */
};

/* Tables, one per file <noun>_verbs.c; main.c lists them. */
extern const struct cli_verb cli_wave_verbs[], cli_reach_verbs[], cli_audit_verbs[], cli_report_verbs[],
    cli_rig_verbs[], cli_scan_verbs[], cli_plan_verbs[], cli_key_verbs[], cli_party_verbs[], cli_campaign_verbs[],
    cli_slot_verbs[], cli_segments_verbs[], cli_drive_verbs[], cli_claim_verbs[], cli_opening_verbs[],
    cli_ledger_verbs[], cli_service_verbs[], cli_bundle_verbs[], cli_incident_verbs[];

/* Positional argument i, or NULL when it was not given. */
const char *cli_arg(const struct cli_call *c, int i);
int cli_arg_count(const struct cli_call *c);
/* The option's value, "" for a flag that was given, NULL when it was not. The last one wins. */
const char *cli_option(const struct cli_call *c, const char *name);
/* Numbers and times of options: the default when absent; QB_USAGE with the option's name when malformed. */
enum qb_status cli_option_double(struct cli_call *c, const char *name, double otherwise, double *out) QB_MUST_USE;
enum qb_status cli_option_int(struct cli_call *c, const char *name, int64_t min, int64_t max, int64_t otherwise,
                              int64_t *out) QB_MUST_USE;
enum qb_status cli_option_gps(struct cli_call *c, const char *name, int64_t otherwise, int64_t *out_gps_ns) QB_MUST_USE;

/* The error record of the call: fill it with qb_fail(cli_error(c), ...); main prints it as one line. */
struct qb_error *cli_error(struct cli_call *c);
/* --json was given: then print one document with cli_json and nothing else on standard output. */
bool cli_wants_json(const struct cli_call *c);
void cli_json(struct cli_call *c, const json_t *doc);
void cli_print(struct cli_call *c, const char *fmt, ...) QB_PRINTF(2, 3); /* standard output */
void cli_note(struct cli_call *c, const char *fmt, ...) QB_PRINTF(2, 3);  /* standard error */
/* A progress line, redrawn, only on a terminal. done == total ends it. */
void cli_progress(struct cli_call *c, const char *what, uint64_t done, uint64_t total);

/*
 * Common options of every verb: --json, --help, and for verbs that talk to the service --home DIR (else
 * $QUIETBELL_HOME, else ~/.config/quietbell),
 * --service URL (else the home's service file) and --passphrase-file FILE (else $QUIETBELL_PASSPHRASE_FILE, else asked
 * on the terminal).
 */

/* Runs one command line; returns the exit status. Used by main and by tests. */
int cli_main(int argc, char **argv);

#endif
