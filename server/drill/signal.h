/*
 * What the drill room needs to know about a signal, whatever its family: the list of its parameters in a fixed order,
 * so that truth records and recipes can carry any family without naming its parameters one by one.
 */
#ifndef QB_DRILL_SIGNAL_H
#define QB_DRILL_SIGNAL_H

#include <stdbool.h>

#include "server/base/err.h"
#include "server/wave/source.h"

struct signal_parameter {
	const char *key; /* with its unit suffix */
	double min, max; /* accepted, inclusive */
	bool required;   /* has no default */
};

struct signal_family {
	const char *name;
	const char *const *models; /* NULL-ended; the first is the default; empty where there is none */
	const char *scale;         /* "distance_mpc" or "hrss_per_sqrt_hz": SNR is proportional to it or its inverse */
	bool has_masses;           /* primary_mass_msun, secondary_mass_msun */
	int n_parameters;
	const struct signal_parameter *parameters; /* all but sky, polarisation, arrival and lowest frequency */
};

/* The family by its word in a source file, or NULL. */
const struct signal_family *signal_family_find(const char *word);
/* Its parameter by key, or NULL. */
const struct signal_parameter *signal_family_parameter(const struct signal_family *f, const char *key);
/* All families' words in one line, for errors. */
const char *signal_family_words(void);

/* A source of this family and model with every parameter at its default. Errors: QB_FORMAT for unknown words. */
enum qb_status signal_init(struct wave_source *s, const char *family, const char *model, const char *what,
                           struct qb_error *e) QB_MUST_USE;
/* Every number finite and in its range. Errors: QB_RANGE with the key. */
enum qb_status signal_check(const struct wave_source *s, const char *what, struct qb_error *e) QB_MUST_USE;
const char *signal_family_name(const struct wave_source *s);
const char *signal_model_name(const struct wave_source *s); /* "" where the family has none */

/* Parameters in the family's order. */
int signal_parameter_count(const struct wave_source *s);
const char *signal_parameter_key(const struct wave_source *s, int i);
double signal_parameter_value(const struct wave_source *s, int i);
void signal_parameter_put(struct wave_source *s, int i, double value);
/* By key; false when the family has no such parameter. */
bool signal_put(struct wave_source *s, const char *key, double value);
bool signal_get(const struct wave_source *s, const char *key, double *value);

/* Compact binaries: has two masses. Masses as seen at the stations. */
bool signal_is_binary(const struct wave_source *s);
double signal_chirp_mass_msun(const struct wave_source *s);
double signal_effective_spin(const struct wave_source *s);

#endif
