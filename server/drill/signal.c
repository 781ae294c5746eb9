/* Helpers over the table of families. */
#include "server/drill/signal.h"

#include <stdio.h>
#include <string.h>

#include "server/base/check.h"

enum qb_status signal_init(struct wave_source *s, const char *family, const char *model, const char *what,
                           struct qb_error *e)
{
	enum qb_status st = source_init(s, family, *model != '\0' ? model : NULL, what, e);
	if (st == QB_OK && strcmp(source_model_word(s), model) != 0)
		return qb_fail(e, QB_FORMAT, what, NULL, "names no model for the family '%.40s'", family);
	return st;
}

const char *signal_family_words(char *out, size_t size)
{
	out[0] = '\0';
	for (int f = 0; f < WAVE_FAMILIES; f++) {
		size_t len = strlen(out);
		(void)snprintf(out + len, size - len, "%s%s", f > 0 ? ", " : "",
		               wave_family_info((enum wave_family)f)->name);
	}
	return out;
}

const char *signal_family_name(const struct wave_source *s)
{
	return wave_family_info(s->family)->name;
}

int signal_parameter_count(const struct wave_source *s)
{
	return wave_family_info(s->family)->n_parameters;
}

const char *signal_parameter_key(const struct wave_source *s, int i)
{
	CHECK(i >= 0 && i < signal_parameter_count(s));
	return wave_family_info(s->family)->parameters[i].key;
}

double signal_parameter_value(const struct wave_source *s, int i)
{
	CHECK(i >= 0 && i < signal_parameter_count(s));
	return s->p[i];
}

void signal_parameter_put(struct wave_source *s, int i, double value)
{
	CHECK(i >= 0 && i < signal_parameter_count(s));
	s->p[i] = value;
}

bool signal_put(struct wave_source *s, const char *key, double value)
{
	int i = wave_parameter_find(s->family, key);
	if (i < 0)
		return false;
	s->p[i] = value;
	return true;
}

bool signal_get(const struct wave_source *s, const char *key, double *value)
{
	int i = wave_parameter_find(s->family, key);
	if (i < 0)
		return false;
	*value = s->p[i];
	return true;
}

bool signal_has_masses(enum wave_family family)
{
	return wave_parameter_find(family, "primary_mass_msun") >= 0 &&
	       wave_parameter_find(family, "secondary_mass_msun") >= 0;
}
