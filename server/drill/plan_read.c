/* The sticky getters of the plan reader. */
#include "server/drill/plan_read.h"

#include <stdio.h>
#include <string.h>

#include "server/base/clock.h"
#include "server/base/text.h"

struct yaml_node *read_find(struct plan_reader *r, struct yaml_node *map, const char *key)
{
	return r->status == QB_OK && map != NULL ? yaml_find(map, key) : NULL;
}

static struct yaml_node *need(struct plan_reader *r, struct yaml_node *map, const char *key)
{
	struct yaml_node *n = NULL;
	if (r->status == QB_OK && map != NULL)
		r->status = yaml_need(r->doc, map, key, &n, r->e);
	return r->status == QB_OK ? n : NULL;
}

struct yaml_node *read_need(struct plan_reader *r, struct yaml_node *map, const char *key, enum yaml_kind kind)
{
	struct yaml_node *n = need(r, map, key);
	if (n != NULL)
		r->status = yaml_is(r->doc, n, kind, r->e);
	return r->status == QB_OK ? n : NULL;
}

struct yaml_node *read_optional(struct plan_reader *r, struct yaml_node *map, const char *key, enum yaml_kind kind)
{
	struct yaml_node *n = read_find(r, map, key);
	if (n != NULL)
		r->status = yaml_is(r->doc, n, kind, r->e);
	return r->status == QB_OK ? n : NULL;
}

void read_double_of(struct plan_reader *r, const struct yaml_node *n, double min, double max, double *out)
{
	if (r->status == QB_OK && n != NULL)
		r->status = yaml_double(r->doc, n, min, max, out, r->e);
}

void read_double(struct plan_reader *r, struct yaml_node *map, const char *key, double min, double max, double *out)
{
	read_double_of(r, read_find(r, map, key), min, max, out);
}

void read_double_needed(struct plan_reader *r, struct yaml_node *map, const char *key, double min, double max,
                        double *out)
{
	read_double_of(r, need(r, map, key), min, max, out);
}

static void int_of(struct plan_reader *r, const struct yaml_node *n, int min, int max, int *out)
{
	int64_t v = 0;
	if (r->status != QB_OK || n == NULL)
		return;
	r->status = yaml_int(r->doc, n, min, max, &v, r->e);
	if (r->status == QB_OK)
		*out = (int)v;
}

void read_int(struct plan_reader *r, struct yaml_node *map, const char *key, int min, int max, int *out)
{
	int_of(r, read_find(r, map, key), min, max, out);
}

void read_int_needed(struct plan_reader *r, struct yaml_node *map, const char *key, int min, int max, int *out)
{
	int_of(r, need(r, map, key), min, max, out);
}

void read_bool(struct plan_reader *r, struct yaml_node *map, const char *key, bool *out)
{
	struct yaml_node *n = read_find(r, map, key);
	if (n != NULL)
		r->status = yaml_bool(r->doc, n, out, r->e);
}

void read_duration(struct plan_reader *r, struct yaml_node *map, const char *key, double min_s, double max_s,
                   int64_t *out_ns)
{
	struct yaml_node *n = read_find(r, map, key);
	int64_t v = 0;
	if (n == NULL)
		return;
	r->status = yaml_duration(r->doc, n, &v, r->e);
	if (r->status != QB_OK)
		return;
	double s = (double)v / (double)NS_PER_S;
	if (s < min_s || s > max_s) {
		char accepted[80];
		(void)snprintf(accepted, sizeof accepted, "%.10g s to %.10g s", min_s, max_s);
		read_refuse(r, n, QB_RANGE, accepted);
		return;
	}
	*out_ns = v;
}

void read_name_of(struct plan_reader *r, const struct yaml_node *n, char out[PLAN_NAME_MAX])
{
	const char *s = NULL;
	if (r->status != QB_OK || n == NULL)
		return;
	r->status = yaml_name(r->doc, n, &s, r->e);
	if (r->status == QB_OK)
		(void)snprintf(out, PLAN_NAME_MAX, "%s", s);
}

void read_name_needed(struct plan_reader *r, struct yaml_node *map, const char *key, char out[PLAN_NAME_MAX])
{
	read_name_of(r, need(r, map, key), out);
}

void read_key_of(struct plan_reader *r, const struct yaml_node *n, char out[PLAN_NAME_MAX])
{
	if (r->status != QB_OK || n == NULL)
		return;
	if (n->kind != YAML_SCALAR || n->text[0] < 'a' || n->text[0] > 'z' || strlen(n->text) >= PLAN_NAME_MAX ||
	    n->text[strspn(n->text, "abcdefghijklmnopqrstuvwxyz0123456789_")] != '\0') {
		read_refuse(r, n, QB_FORMAT, "the key of a parameter: a-z, 0-9 and _");
		return;
	}
	(void)snprintf(out, PLAN_NAME_MAX, "%s", n->text);
}

int read_word(struct plan_reader *r, struct yaml_node *map, const char *key, const char *const *words, int fallback)
{
	struct yaml_node *n = read_find(r, map, key);
	char accepted[200] = "";
	if (n == NULL)
		return fallback;
	for (int i = 0; words[i] != NULL; i++) {
		if (n->kind == YAML_SCALAR && strcmp(n->text, words[i]) == 0)
			return i;
		size_t len = strlen(accepted);
		(void)snprintf(accepted + len, sizeof accepted - len, "%s%s", i > 0 ? ", " : "", words[i]);
	}
	read_refuse(r, n, QB_FORMAT, accepted);
	return fallback;
}

/* A list of at most PLAN_MAX_LIST entries, or NULL. */
static struct yaml_node *short_list(struct plan_reader *r, struct yaml_node *map, const char *key)
{
	struct yaml_node *n = read_optional(r, map, key, YAML_LIST);
	if (n != NULL && n->n_members > PLAN_MAX_LIST) {
		read_refuse(r, n, QB_RANGE, "at most 32 entries");
		return NULL;
	}
	return n;
}

void read_names(struct plan_reader *r, struct yaml_node *map, const char *key, struct plan_names *out)
{
	struct yaml_node *n = short_list(r, map, key);
	if (n == NULL)
		return;
	out->n = n->n_members;
	for (int i = 0; i < n->n_members; i++)
		read_name_of(r, n->members[i], out->name[i]);
}

void read_keys(struct plan_reader *r, struct yaml_node *map, const char *key, struct plan_names *out)
{
	struct yaml_node *n = short_list(r, map, key);
	if (n == NULL)
		return;
	out->n = n->n_members;
	for (int i = 0; i < n->n_members; i++)
		read_key_of(r, n->members[i], out->name[i]);
}

void read_numbers(struct plan_reader *r, struct yaml_node *map, const char *key, double min, double max,
                  struct plan_numbers *out)
{
	struct yaml_node *n = short_list(r, map, key);
	if (n == NULL)
		return;
	out->n = n->n_members;
	for (int i = 0; i < n->n_members; i++)
		read_double_of(r, n->members[i], min, max, &out->value[i]);
}

void read_refuse(struct plan_reader *r, const struct yaml_node *n, enum qb_status status, const char *accepted)
{
	if (r->status == QB_OK)
		r->status = yaml_refuse(r->doc, n, status, accepted, r->e);
}
