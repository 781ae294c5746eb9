/*
 * Sources: which families and models there are, their parameters (one table, from which parsing, errors, help and docs
 * come), and one source with its numbers.
 */
#ifndef QB_WAVE_SOURCE_H
#define QB_WAVE_SOURCE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/err.h"
#include "server/base/yaml.h"

#define WAVE_MAX_PARAMETERS 12

enum wave_family { WAVE_COMPACT_BINARY, WAVE_SINE_GAUSSIAN, WAVE_GAUSSIAN_PULSE, WAVE_FAMILIES };
enum wave_model { WAVE_NO_MODEL, WAVE_IMRPHENOMD, WAVE_TAYLORF2 };

/* Positions in wave_source.p, by family. */
enum {
	CB_PRIMARY_MASS,
	CB_SECONDARY_MASS,
	CB_PRIMARY_SPIN,
	CB_SECONDARY_SPIN,
	CB_DISTANCE,
	CB_INCLINATION,
	CB_PHASE,
	CB_PRIMARY_TIDE,
	CB_SECONDARY_TIDE
};
enum { SG_FREQUENCY, SG_QUALITY, SG_HRSS, SG_ELLIPTICITY, SG_PHASE };
enum { GP_WIDTH, GP_HRSS };

struct wave_parameter {
	const char *key;       /* with its unit suffix */
	double least, largest; /* accepted, inclusive */
	bool required;
	double fallback; /* when left out */
	const char *prose;
};

struct wave_family_info {
	const char *name;          /* as in a source file */
	const char *const *models; /* NULL-ended; the first is the default; NULL when there is none */
	const char *scale;         /* the parameter that carries the loudness */
	int n_parameters;
	const struct wave_parameter *parameters;
	const char *prose;
};

struct wave_source {
	enum wave_family family;
	enum wave_model model;
	double p[WAVE_MAX_PARAMETERS];               /* in the family's order */
	double right_ascension_rad, declination_rad; /* ICRS */
	double polarization_rad;                     /* docs/signals.md, conventions */
	int64_t arrival_gps_ns;                      /* at Earth's centre: coalescence, or the centre of a burst */
	double lowest_frequency_hz;
};

const struct wave_family_info *wave_family_info(enum wave_family family);
/* By the word of a source file; false when unknown. */
bool wave_family_find(const char *word, enum wave_family *out);
/* Position of a parameter by key, or -1. */
int wave_parameter_find(enum wave_family family, const char *key);

/* A source of this family with every default; model NULL takes the default. QB_FORMAT for an unknown word. */
enum qb_status source_init(struct wave_source *s, const char *family, const char *model, const char *what,
                           struct qb_error *e) QB_MUST_USE;
/* All numbers finite and in range, masses in order for the model, spins valid. QB_RANGE with the key. */
enum qb_status source_check(const struct wave_source *s, const char *what, struct qb_error *e) QB_MUST_USE;
const char *source_model_word(const struct wave_source *s); /* "" where the family has none */

/*
 * Reads a source file. `sky` false: an entry of a search bank, without sky, polarisation, arrival and scale.
 * Errors: QB_FORMAT, QB_RANGE with file:line and key
 */
enum qb_status source_parse(const char *text, size_t n, const char *file, struct wave_source *out,
                            struct qb_error *e) QB_MUST_USE;
enum qb_status source_read_node(const struct yaml_doc *doc, struct yaml_node *node, bool sky, struct wave_source *out,
                                struct qb_error *e) QB_MUST_USE;

/* Compact binaries; masses as in the source (0 for other families). */
double source_chirp_mass_msun(const struct wave_source *s);
double source_effective_spin(const struct wave_source *s);

#endif
