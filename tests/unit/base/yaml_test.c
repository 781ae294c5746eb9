/* The strict walker: lines and key paths in errors, nothing guessed, nothing unknown accepted. */
#include "server/base/yaml.h"
#include "tests/near.h"

#include <stdio.h>
#include <string.h>

static struct yaml_doc *parse(const char *text)
{
	struct yaml_doc *doc = NULL;
	struct qb_error e = {0};
	assert_int_equal(yaml_parse(text, strlen(text), "f.yaml", &doc, &e), QB_OK);
	return doc;
}

static void refused(const char *text, int line)
{
	struct yaml_doc *doc = NULL;
	struct qb_error e = {0};
	char where[32];
	assert_int_equal(yaml_parse(text, strlen(text), "f.yaml", &doc, &e), QB_FORMAT);
	assert_null(doc);
	snprintf(where, sizeof where, "f.yaml:%d", line);
	if (line > 0)
		assert_string_equal(e.where, where);
	assert_true(e.what[0] != '\0');
}

static void values_have_their_types(void **state)
{
	struct yaml_doc *d = parse("mass: 31.5\nn: 7\nyes: true\nname: tarn\nlead: 120 s\nlist: [1, 2]\nq: \"7\"\n");
	struct yaml_node *n;
	double v;
	int64_t i;
	bool b;
	const char *t;
	struct qb_error e = {0};
	(void)state;
	assert_int_equal(yaml_need(d, d->root, "mass", &n, &e), QB_OK);
	assert_int_equal(yaml_double(d, n, 0, 100, &v, &e), QB_OK);
	near_abs(v, 31.5, 0);
	assert_int_equal(yaml_int(d, n, 0, 100, &i, &e), QB_FORMAT); /* 31.5 is never 31 */
	assert_string_equal(e.where, "f.yaml:1: mass");
	assert_non_null(strstr(e.what, "31.5"));
	e = (struct qb_error){0};
	assert_int_equal(yaml_double(d, n, 0, 10, &v, &e), QB_RANGE);
	assert_int_equal(yaml_need(d, d->root, "n", &n, NULL), QB_OK);
	assert_int_equal(yaml_int(d, n, 0, 10, &i, NULL), QB_OK);
	assert_int_equal(i, 7);
	assert_int_equal(yaml_bool(d, yaml_find(d->root, "yes"), &b, NULL), QB_OK);
	assert_true(b);
	assert_int_equal(yaml_name(d, yaml_find(d->root, "name"), &t, NULL), QB_OK);
	assert_int_equal(yaml_duration(d, yaml_find(d->root, "lead"), &i, NULL), QB_OK);
	assert_true(i == INT64_C(120000000000));
	assert_int_equal(yaml_int(d, yaml_find(d->root, "q"), 0, 10, &i, NULL), QB_FORMAT); /* quoted: text */
	e = (struct qb_error){0};
	assert_int_equal(yaml_all_used(d, d->root, &e), QB_FORMAT);
	assert_string_equal(e.where, "f.yaml:6: list");
	e = (struct qb_error){0};
	assert_int_equal(yaml_need(d, d->root, "missing", &n, &e), QB_FORMAT);
	assert_non_null(strstr(e.what, "missing"));
	yaml_doc_free(&d);
	assert_null(d);
}

static void nested_paths_are_named(void **state)
{
	struct yaml_doc *d = parse("stations:\n  - name: tarn\n  - name: heron\n    tilt: bent\n");
	struct yaml_node *s = yaml_find(d->root, "stations"), *t;
	double v;
	struct qb_error e = {0};
	(void)state;
	t = yaml_find(s->members[1], "tilt");
	assert_int_equal(yaml_double(d, t, -1, 1, &v, &e), QB_FORMAT);
	assert_string_equal(e.where, "f.yaml:4: stations[1].tilt");
	yaml_doc_free(&d);
}

static void extras_are_refused(void **state)
{
	(void)state;
	refused("a: 1\na: 2\n", 2);
	refused("a: &x 1\nb: *x\n", 1);
	refused("a: !!int 1\n", 1);
	refused("a: 1\n---\nb: 2\n", 0);
	refused("", 0);
	refused("a: [1, 2\n", 0);
	refused("{[1]: 2}\n", 1);
	refused("a: \"\\x1b\"\n", 1);
}

static void json_is_accepted(void **state)
{
	struct yaml_doc *d = parse("{\"a\": {\"b\": [1.5, true]}}");
	double v;
	(void)state;
	assert_int_equal(yaml_double(d, yaml_find(yaml_find(d->root, "a"), "b")->members[0], 0, 2, &v, NULL), QB_OK);
	near_abs(v, 1.5, 0);
	yaml_doc_free(&d);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(values_have_their_types),
	    cmocka_unit_test(nested_paths_are_named),
	    cmocka_unit_test(extras_are_refused),
	    cmocka_unit_test(json_is_accepted),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
