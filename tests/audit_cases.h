/* Reads the audit's reference tables of tests/vectors; the tests run from the top of the tree. */
#ifndef QB_TESTS_AUDIT_CASES_H
#define QB_TESTS_AUDIT_CASES_H

#include <string.h>

#include "server/audit/input.h"
#include "server/base/buf.h"
#include "server/base/json.h"
#include "tests/near.h"

#define CASES_SMALL "tests/vectors/audit-small/"

static inline json_t *cases_json(const char *path)
{
	struct buf b = {0};
	struct qb_error e = {0};
	json_t *doc = NULL;
	assert_int_equal(file_read(path, (size_t)1 << 24, &b, &e), QB_OK);
	assert_int_equal(json_read((const char *)b.data, b.len, path, &doc, &e), QB_OK);
	buf_free(&b);
	return doc;
}

/* Calls check for every case of one function; at least `least` must be there. */
static inline void cases_each(const char *function, size_t least,
                              void (*check)(const json_t *inputs, const json_t *expected, double tolerance))
{
	json_t *doc = cases_json("tests/vectors/audit_cases.json"), *c;
	size_t i, n = 0;
	json_array_foreach(json_object_get(doc, "cases"), i, c)
	{
		if (strcmp(json_string_value(json_object_get(c, "function")), function) != 0)
			continue;
		check(json_object_get(c, "inputs"), json_object_get(c, "expected"),
		      json_number_value(json_object_get(c, "tolerance")));
		n++;
	}
	assert_true(n >= least);
	json_decref(doc);
}

static inline double cases_number(const json_t *obj, const char *key)
{
	const json_t *v = json_object_get(obj, key);
	return json_is_number(v) ? json_number_value(v) : NAN;
}

static inline double cases_at(const json_t *array, size_t i)
{
	assert_true(json_is_number(json_array_get(array, i)));
	return json_number_value(json_array_get(array, i));
}

/* The worked set, read from its files. */
static inline struct audit_input *cases_small(void)
{
	struct audit_input *in = audit_input_new();
	struct qb_error e = {0};
	struct buf b = {0};
	assert_int_equal(file_read(CASES_SMALL "settings.json", 1u << 20, &b, &e), QB_OK);
	assert_int_equal(audit_input_settings_text(in, (char *)b.data, b.len, "settings.json", &e), QB_OK);
	buf_clear(&b);
	assert_int_equal(file_read(CASES_SMALL "slots.jsonl", 1u << 20, &b, &e), QB_OK);
	assert_int_equal(audit_input_slots_text(in, (char *)b.data, b.len, "slots.jsonl", &e), QB_OK);
	buf_clear(&b);
	assert_int_equal(file_read(CASES_SMALL "claims.jsonl", 1u << 20, &b, &e), QB_OK);
	assert_int_equal(audit_input_claims_text(in, (char *)b.data, b.len, "claims.jsonl", &e), QB_OK);
	buf_free(&b);
	return in;
}

#endif
