/*
 * Small helpers over the wave room's table of families, so that truth records and recipes can carry any family without
 * naming its parameters one by one.
 */
#ifndef QB_DRILL_SIGNAL_H
#define QB_DRILL_SIGNAL_H

#include <stdbool.h>

#include "server/base/err.h"
#include "server/wave/source.h"

/*
 * A source of this family and model with every parameter at its default; the model must be spelt out, and is "" where
 * the family has none. Errors: QB_FORMAT for unknown words.
 */
enum qb_status signal_init(struct wave_source *s, const char *family, const char *model, const char *what,
                           struct qb_error *e) QB_MUST_USE;
/* All families' words in one line, for errors. */
const char *signal_family_words(char *out, size_t size);
const char *signal_family_name(const struct wave_source *s);

/* Parameters in the family's order. */
int signal_parameter_count(const struct wave_source *s);
const char *signal_parameter_key(const struct wave_source *s, int i);
double signal_parameter_value(const struct wave_source *s, int i);
void signal_parameter_put(struct wave_source *s, int i, double value);
/* By key; false when the family has no such parameter. */
bool signal_put(struct wave_source *s, const char *key, double value);
bool signal_get(const struct wave_source *s, const char *key, double *value);

/* The family has two masses. */
bool signal_has_masses(enum wave_family family);

#endif
