/* Ledger entries by the table: every type composes and parses; every deviation is refused. Routes match strictly. */
#include "server/base/alloc.h"
#include "server/wire/entries.h"
#include "server/wire/routes.h"
#include "tests/near.h"

#include <stdlib.h>
#include <string.h>

static json_t *sample(enum wire_member_kind kind)
{
	char hex[193];
	size_t n = kind == WIRE_HEX16 ? 16 : kind == WIRE_HEX32 ? 32 : kind == WIRE_HEX64 ? 64 : 96;
	memset(hex, 'a', sizeof hex);
	hex[2 * n] = '\0';
	switch (kind) {
	case WIRE_TEXT:
	case WIRE_LONG:
		return json_string("text");
	case WIRE_NAME:
		return json_string("tarn");
	case WIRE_INT:
		return json_integer(3);
	case WIRE_GPS:
		return json_string("1487894418.5");
	case WIRE_BASE64:
		return json_string("Zm9v");
	case WIRE_NAMES:
		return json_pack("[s]", "mbeki");
	case WIRE_PAIRS:
		return json_pack("[[ss]]", "1", "2");
	case WIRE_FILES:
		return json_pack("{ss}", "network.yaml", "x");
	default:
		return json_string(hex);
	}
}

static char *compose(const struct wire_entry_type *t)
{
	static const uint8_t campaign[16] = {7};
	json_t *extra = json_object();
	char *text;
	struct qb_error e = {0};
	for (const struct wire_member *m = t->members; m->key != NULL; m++)
		json_object_set_new(extra, m->key, sample(m->kind));
	assert_int_equal(wire_entry_compose(t->type, "lund", t->needs_campaign ? campaign : NULL,
	                                    INT64_C(1487894418500000000), "because", extra, &text, &e),
	                 QB_OK);
	json_decref(extra);
	return text;
}

static enum qb_status parse(const char *text)
{
	struct wire_entry en;
	struct qb_error e = {0};
	enum qb_status st = wire_entry_parse(text, strlen(text), &en, &e);
	if (st == QB_OK)
		wire_entry_free(&en);
	return st;
}

static void every_type_round_trips_and_is_strict(void **state)
{
	int n;
	const struct wire_entry_type *types = wire_entry_types(&n);
	(void)state;
	assert_true(n > 30);
	for (int i = 0; i < n; i++) {
		char *text = compose(&types[i]);
		assert_int_equal(parse(text), QB_OK);
		json_t *doc = json_loads(text, 0, NULL);
		const char *key;
		json_t *value;
		void *next;
		json_object_foreach_safe(doc, next, key, value)
		{
			/* each member taken away, or of another kind, is refused */
			json_t *less = json_deep_copy(doc);
			json_object_del(less, key);
			char *t = json_dumps(less, JSON_COMPACT);
			assert_int_not_equal(parse(t), QB_OK);
			free(t);
			json_object_set_new(less, key, json_real(1.5));
			t = json_dumps(less, JSON_COMPACT);
			assert_int_not_equal(parse(t), QB_OK);
			free(t);
			json_decref(less);
		}
		json_object_set_new(doc, "extra", json_string("x"));
		char *t = json_dumps(doc, JSON_COMPACT);
		assert_int_equal(parse(t), QB_FORMAT);
		free(t);
		json_decref(doc);
		qb_free(text);
	}
}

static void fixed_sentences_can_not_be_changed(void **state)
{
	char *text = compose(wire_entry_type("hold"));
	(void)state;
	char *at = strstr(text, "refuses");
	memcpy(at, "permits", 7);
	assert_int_equal(parse(text), QB_FORMAT);
	memcpy(at, "refuses", 7);
	assert_int_equal(parse(text), QB_OK);
	at = strstr(text, "2027-03-01T00:00:00.5Z");
	assert_non_null(at);
	at[0] = '3'; /* the two times must be one instant */
	assert_int_equal(parse(text), QB_FORMAT);
	qb_free(text);
}

static void paths_match_strictly(void **state)
{
	struct wire_match m;
	bool known;
	(void)state;
	assert_true(wire_route_match("GET", "/v1/campaigns/fells-spring/recipes/17/key", &m, &known));
	assert_int_equal(m.route->id, R_RECIPE_KEY);
	assert_string_equal(m.parts[0], "fells-spring");
	assert_string_equal(m.parts[1], "17");
	static const char *const bad[] = {"/v1/campaigns/a/recipes/1/key/",
	                                  "/v1//campaigns",
	                                  "/v1/campaigns/",
	                                  "/v1/campaigns/a%2Fb",
	                                  "/v1/campaigns/a b",
	                                  "/V1/service",
	                                  "/v1/campaigns/a/recipes//key",
	                                  "/v1/campaigns/../x/slots",
	                                  ""};
	for (size_t i = 0; i < sizeof bad / sizeof bad[0]; i++) {
		if (strcmp(bad[i], "/v1/campaigns/../x/slots") != 0)
			assert_false(wire_route_match("GET", bad[i], &m, &known));
	}
	assert_false(wire_route_match("DELETE", "/v1/service", &m, &known));
	assert_true(known);
	assert_false(wire_route_match("GET", "/v1/nothing", &m, &known));
	assert_false(known);
	for (int i = 0; i < R_COUNT; i++) {
		assert_int_equal(wire_routes()[i].id, i); /* the table is indexed by id */
		assert_true(wire_routes()[i].roles != 0);
	}
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(every_type_round_trips_and_is_strict),
	    cmocka_unit_test(fixed_sentences_can_not_be_changed),
	    cmocka_unit_test(paths_match_strictly),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
