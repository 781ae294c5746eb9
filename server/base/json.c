/* Strict JSON on top of jansson. */
#include "server/base/json.h"

#include <inttypes.h>
#include <malloc.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/secret.h"
#include "server/base/text.h"

#define JSON_MAX_BYTES ((size_t)64 << 20)
#define JSON_MAX_DEPTH 64

/* Depth is bounded before jansson sees the text, since it recurses. Brackets inside strings are skipped. */
static bool too_deep(const char *p, size_t n)
{
	int depth = 0;
	bool string = false;
	for (size_t i = 0; i < n; i++) {
		if (string) {
			if (p[i] == '\\')
				i++;
			else if (p[i] == '"')
				string = false;
		} else if (p[i] == '"') {
			string = true;
		} else if (p[i] == '{' || p[i] == '[') {
			if (++depth > JSON_MAX_DEPTH)
				return true;
		} else if (p[i] == '}' || p[i] == ']') {
			depth--;
		}
	}
	return false;
}

enum qb_status json_read(const char *text, size_t n, const char *what, json_t **out, struct qb_error *e)
{
	*out = NULL;
	if (n > JSON_MAX_BYTES || too_deep(text, n))
		return qb_fail(e, QB_FORMAT, what, NULL, "is too large or too deeply nested");
	json_error_t je;
	*out = json_loadb(text, n, JSON_REJECT_DUPLICATES | JSON_DECODE_ANY, &je);
	if (*out == NULL) {
		char where[240];
		(void)snprintf(where, sizeof where, "%s:%d:%d", what, je.line, je.column);
		return qb_fail(e, QB_FORMAT, where, "correct the JSON text", "is not valid JSON: %s", je.text);
	}
	return QB_OK;
}

static void wipe_and_free(void *p)
{
	if (p != NULL)
		wipe(p, malloc_usable_size(p));
	free(p);
}

static char *dump(const json_t *doc, size_t flags, const char *end)
{
	char *t = json_dumps(doc, flags | JSON_REAL_PRECISION(17) | JSON_ENCODE_ANY);
	char *out = text_printf("%s%s", t != NULL ? t : "null", end);
	wipe_and_free(t);
	return out;
}

void json_wipe_on_free(void)
{
	json_set_alloc_funcs(malloc, wipe_and_free);
}

char *json_text(const json_t *doc)
{
	return dump(doc, JSON_COMPACT, "");
}

char *json_pretty(const json_t *doc)
{
	return dump(doc, JSON_INDENT(2), "\n");
}

static enum qb_status member(const json_t *obj, const char *key, const char *what, json_t **out, char *where,
                             size_t size, struct qb_error *e)
{
	(void)snprintf(where, size, "%s: %s", what, key);
	if (!json_is_object(obj))
		return qb_fail(e, QB_FORMAT, what, NULL, "is not a JSON object");
	*out = json_object_get(obj, key);
	if (*out == NULL)
		return qb_fail(e, QB_FORMAT, where, "add it", "is missing");
	return QB_OK;
}

enum qb_status json_str(const json_t *obj, const char *key, const char *what, const char **out, struct qb_error *e)
{
	char where[240];
	json_t *v;
	enum qb_status st = member(obj, key, what, &v, where, sizeof where, e);
	if (st != QB_OK)
		return st;
	if (!json_is_string(v))
		return qb_fail(e, QB_FORMAT, where, NULL, "is not a string");
	*out = json_string_value(v);
	return QB_OK;
}

enum qb_status json_int(const json_t *obj, const char *key, const char *what, int64_t min, int64_t max, int64_t *out,
                        struct qb_error *e)
{
	char where[240];
	json_t *v;
	enum qb_status st = member(obj, key, what, &v, where, sizeof where, e);
	if (st != QB_OK)
		return st;
	if (!json_is_integer(v))
		return qb_fail(e, QB_FORMAT, where, NULL, "is not an integer");
	if (json_integer_value(v) < min || json_integer_value(v) > max)
		return qb_fail(e, QB_RANGE, where, NULL, "is %" PRId64 ", accepted: %" PRId64 " to %" PRId64,
		               (int64_t)json_integer_value(v), min, max);
	*out = json_integer_value(v);
	return QB_OK;
}

enum qb_status json_num(const json_t *obj, const char *key, const char *what, double *out, struct qb_error *e)
{
	char where[240];
	json_t *v;
	enum qb_status st = member(obj, key, what, &v, where, sizeof where, e);
	if (st != QB_OK)
		return st;
	if (!json_is_number(v) || !isfinite(json_number_value(v)))
		return qb_fail(e, QB_FORMAT, where, NULL, "is not a finite number");
	*out = json_number_value(v);
	return QB_OK;
}

enum qb_status json_hex(const json_t *obj, const char *key, const char *what, uint8_t *out, size_t n,
                        struct qb_error *e)
{
	const char *s;
	enum qb_status st = json_str(obj, key, what, &s, e);
	if (st != QB_OK)
		return st;
	if (strlen(s) != 2 * n || !hex_decode(out, n, s)) {
		char where[240];
		(void)snprintf(where, sizeof where, "%s: %s", what, key);
		return qb_fail(e, QB_FORMAT, where, NULL, "is not %zu lower-case hexadecimal digits", 2 * n);
	}
	return QB_OK;
}

enum qb_status json_gps(const json_t *obj, const char *key, const char *what, int64_t *out_ns, struct qb_error *e)
{
	char where[240];
	json_t *v;
	enum qb_status st = member(obj, key, what, &v, where, sizeof where, e);
	if (st != QB_OK)
		return st;
	if (json_is_string(v) && clock_gps_parse(json_string_value(v), out_ns))
		return QB_OK;
	double d = json_number_value(v);
	if (json_is_number(v) && d >= 0 && d < 8589934592.0) {
		double whole = floor(d);
		*out_ns = (int64_t)whole * NS_PER_S + (int64_t)llround((d - whole) * 1e9);
		return QB_OK;
	}
	return qb_fail(e, QB_FORMAT, where, "write GPS seconds, for example \"1456789012.5\"", "is not a GPS time");
}

enum qb_status json_only(const json_t *obj, const char *const *keys, const char *what, struct qb_error *e)
{
	if (!json_is_object(obj))
		return qb_fail(e, QB_FORMAT, what, NULL, "is not a JSON object");
	const char *key;
	json_t *value;
	json_object_foreach((json_t *)obj, key, value)
	{
		size_t i = 0;
		while (keys[i] != NULL && strcmp(keys[i], key) != 0)
			i++;
		if (keys[i] == NULL)
			return qb_fail(e, QB_FORMAT, what, "remove it or correct its spelling",
			               "has the unknown key '%.60s'", key);
	}
	return QB_OK;
}

json_t *json_hex_new(const uint8_t *p, size_t n)
{
	char *s = qb_alloc(2 * n + 1, 1);
	hex_encode(s, p, n);
	json_t *j = json_string(s);
	wipe(s, 2 * n);
	qb_free(s);
	return j;
}

json_t *json_gps_new(int64_t gps_ns)
{
	char t[32];
	return json_string(clock_gps_text(gps_ns, t, sizeof t));
}
