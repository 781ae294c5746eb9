/* The strict YAML walker: libyaml parses, we copy its nodes into a tree that remembers lines and who asked for what. */
#include "server/base/yaml.h"

#include <inttypes.h>
#include <stdio.h>
#include <string.h>
#include <yaml.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define YAML_MAX_BYTES ((size_t)4 << 20)
#define YAML_MAX_DEPTH 32
#define YAML_MAX_NODES 200000

struct copying {
	yaml_document_t *from;
	struct yaml_doc *doc;
	int nodes;
	struct qb_error *e;
};

static void node_free(struct yaml_node *n)
{
	if (n == NULL)
		return;
	for (int i = 0; i < n->n_members; i++)
		node_free(n->members[i]);
	qb_free(n->members);
	qb_free(n->text);
	qb_free(n->key);
	qb_free(n);
}

void yaml_doc_free(struct yaml_doc **doc)
{
	if (*doc == NULL)
		return;
	node_free((*doc)->root);
	qb_free((*doc)->file);
	qb_free(*doc);
	*doc = NULL;
}

static enum qb_status at_line(struct copying *c, int line, const char *mend, const char *what)
{
	char where[240];
	(void)snprintf(where, sizeof where, "%s:%d", c->doc->file, line);
	return qb_fail(c->e, QB_FORMAT, where, mend, "%s", what);
}

static enum qb_status copy_node(struct copying *c, int id, int depth, struct yaml_node *parent, struct yaml_node **out);

static enum qb_status copy_member(struct copying *c, int id, const char *key, int depth, struct yaml_node *parent)
{
	struct yaml_node *child = NULL;
	enum qb_status st = copy_node(c, id, depth + 1, parent, &child);
	if (st != QB_OK)
		return st;
	child->key = key != NULL ? qb_strdup(key) : NULL;
	parent->members[parent->n_members++] = child;
	return QB_OK;
}

static enum qb_status copy_map(struct copying *c, yaml_node_t *y, int depth, struct yaml_node *n)
{
	size_t count = (size_t)(y->data.mapping.pairs.top - y->data.mapping.pairs.start);
	n->kind = YAML_MAP;
	n->members = QB_NEW_ARRAY(struct yaml_node *, count);
	for (yaml_node_pair_t *p = y->data.mapping.pairs.start; p < y->data.mapping.pairs.top; p++) {
		yaml_node_t *k = yaml_document_get_node(c->from, p->key);
		int line = (int)k->start_mark.line + 1;
		if (k->type != YAML_SCALAR_NODE)
			return at_line(c, line, "use a plain word as the key", "a key is not a word");
		const char *key = (const char *)k->data.scalar.value;
		if (strlen(key) != k->data.scalar.length || !text_is_line(key, 200))
			return at_line(c, line, NULL, "a key is empty, too long or not plain text");
		for (int i = 0; i < n->n_members; i++) {
			if (strcmp(n->members[i]->key, key) == 0)
				return at_line(c, line, "remove one of the two", "the same key stands twice");
		}
		enum qb_status st = copy_member(c, p->value, key, depth, n);
		if (st != QB_OK)
			return st;
	}
	return QB_OK;
}

static enum qb_status copy_list(struct copying *c, yaml_node_t *y, int depth, struct yaml_node *n)
{
	size_t count = (size_t)(y->data.sequence.items.top - y->data.sequence.items.start);
	n->kind = YAML_LIST;
	n->members = QB_NEW_ARRAY(struct yaml_node *, count);
	for (yaml_node_item_t *i = y->data.sequence.items.start; i < y->data.sequence.items.top; i++) {
		enum qb_status st = copy_member(c, *i, NULL, depth, n);
		if (st != QB_OK)
			return st;
	}
	return QB_OK;
}

static enum qb_status copy_scalar(struct copying *c, yaml_node_t *y, struct yaml_node *n)
{
	const char *text = (const char *)y->data.scalar.value;
	if (strlen(text) != y->data.scalar.length || !text_is_utf8(text, y->data.scalar.length))
		return at_line(c, n->line, NULL, "a value holds control characters");
	n->kind = YAML_SCALAR;
	n->quoted = y->data.scalar.style != YAML_PLAIN_SCALAR_STYLE;
	n->text = qb_strdup(text);
	return QB_OK;
}

static enum qb_status copy_node(struct copying *c, int id, int depth, struct yaml_node *parent, struct yaml_node **out)
{
	yaml_node_t *y = yaml_document_get_node(c->from, id);
	int line = (int)y->start_mark.line + 1;
	if (depth > YAML_MAX_DEPTH || ++c->nodes > YAML_MAX_NODES)
		return at_line(c, line, NULL, "the document is too deep or too large");
	struct yaml_node *n = QB_NEW(struct yaml_node);
	n->line = line;
	n->parent = parent;
	enum qb_status st;
	if (y->type == YAML_MAPPING_NODE)
		st = copy_map(c, y, depth, n);
	else if (y->type == YAML_SEQUENCE_NODE)
		st = copy_list(c, y, depth, n);
	else
		st = copy_scalar(c, y, n);
	if (st != QB_OK)
		node_free(n);
	else
		*out = n;
	return st;
}

/* Anchors and aliases could make a small file a huge tree, and tags could change types: a first pass refuses them. */
static enum qb_status refuse_extras(const char *text, size_t n, struct copying *c)
{
	yaml_parser_t p;
	enum qb_status st = QB_OK;
	bool end = false;
	int documents = 0;
	if (!yaml_parser_initialize(&p))
		return qb_fail(c->e, QB_FAULT, NULL, NULL, "the YAML parser can't be started");
	yaml_parser_set_input_string(&p, (const unsigned char *)text, n);
	while (!end && st == QB_OK) {
		yaml_event_t ev;
		if (!yaml_parser_parse(&p, &ev)) {
			st = at_line(c, (int)p.problem_mark.line + 1, "correct the YAML text",
			             p.problem != NULL ? p.problem : "can't be parsed");
			break;
		}
		int line = (int)ev.start_mark.line + 1;
		bool extra =
		    ev.type == YAML_ALIAS_EVENT ||
		    (ev.type == YAML_SCALAR_EVENT && (ev.data.scalar.anchor != NULL || ev.data.scalar.tag != NULL)) ||
		    (ev.type == YAML_MAPPING_START_EVENT &&
		     (ev.data.mapping_start.anchor != NULL || ev.data.mapping_start.tag != NULL)) ||
		    (ev.type == YAML_SEQUENCE_START_EVENT &&
		     (ev.data.sequence_start.anchor != NULL || ev.data.sequence_start.tag != NULL));
		documents += ev.type == YAML_DOCUMENT_START_EVENT;
		end = ev.type == YAML_STREAM_END_EVENT;
		yaml_event_delete(&ev);
		if (extra)
			st = at_line(c, line, "write the value out", "anchors, aliases and tags are not accepted");
		else if (documents > 1)
			st = at_line(c, line, "keep one", "holds more than one document");
	}
	yaml_parser_delete(&p);
	return st;
}

enum qb_status yaml_parse(const char *text, size_t n, const char *file, struct yaml_doc **out, struct qb_error *e)
{
	*out = NULL;
	if (n > YAML_MAX_BYTES)
		return qb_fail(e, QB_FORMAT, file, NULL, "is larger than 4 MiB");
	struct yaml_doc *doc = QB_NEW(struct yaml_doc);
	doc->file = qb_strdup(file);
	yaml_document_t y;
	yaml_parser_t p;
	struct copying c = {.from = &y, .doc = doc, .e = e};
	enum qb_status st = refuse_extras(text, n, &c);
	if (st == QB_OK && !yaml_parser_initialize(&p))
		st = qb_fail(e, QB_FAULT, NULL, NULL, "the YAML parser can't be started");
	else if (st == QB_OK) {
		yaml_parser_set_input_string(&p, (const unsigned char *)text, n);
		if (!yaml_parser_load(&p, &y)) {
			st = at_line(&c, (int)p.problem_mark.line + 1, "correct the YAML text",
			             p.problem != NULL ? p.problem : "can't be parsed");
		} else {
			if (yaml_document_get_root_node(&y) == NULL)
				st = qb_fail(e, QB_FORMAT, file, "write the document", "is empty");
			else
				st = copy_node(&c, 1, 0, NULL, &doc->root);
			yaml_document_delete(&y);
		}
		yaml_parser_delete(&p);
	}
	if (st != QB_OK)
		yaml_doc_free(&doc);
	*out = doc;
	return st;
}

static void put_path(const struct yaml_node *n, char *out, size_t size)
{
	if (n->parent == NULL)
		return;
	put_path(n->parent, out, size);
	size_t len = strlen(out);
	if (n->key != NULL) {
		(void)snprintf(out + len, size - len, "%s%s", len > 0 ? "." : "", n->key);
		return;
	}
	for (int i = 0; i < n->parent->n_members; i++) {
		if (n->parent->members[i] == n)
			(void)snprintf(out + len, size - len, "[%d]", i);
	}
}

const char *yaml_where(const struct yaml_doc *doc, const struct yaml_node *n, char *out, size_t size)
{
	char path[160] = "";
	put_path(n, path, sizeof path);
	(void)snprintf(out, size, "%s:%d%s%s", doc->file, n->line, path[0] != '\0' ? ": " : "", path);
	return out;
}

enum qb_status yaml_refuse(const struct yaml_doc *doc, const struct yaml_node *n, enum qb_status status,
                           const char *accepted, struct qb_error *e)
{
	char where[240];
	yaml_where(doc, n, where, sizeof where);
	const char *seen = n->kind == YAML_SCALAR ? n->text : n->kind == YAML_LIST ? "(a list)" : "(a map)";
	return qb_fail(e, status, where, NULL, "is '%.80s'; accepted: %s", seen, accepted);
}

struct yaml_node *yaml_find(struct yaml_node *map, const char *key)
{
	if (map == NULL || map->kind != YAML_MAP)
		return NULL;
	for (int i = 0; i < map->n_members; i++) {
		if (strcmp(map->members[i]->key, key) == 0) {
			map->members[i]->used = true;
			return map->members[i];
		}
	}
	return NULL;
}

enum qb_status yaml_need(const struct yaml_doc *doc, struct yaml_node *map, const char *key, struct yaml_node **out,
                         struct qb_error *e)
{
	enum qb_status st = yaml_is(doc, map, YAML_MAP, e);
	if (st != QB_OK)
		return st;
	*out = yaml_find(map, key);
	if (*out == NULL) {
		char where[240];
		yaml_where(doc, map, where, sizeof where);
		return qb_fail(e, QB_FORMAT, where, "add it", "the key '%s' is missing", key);
	}
	return QB_OK;
}

enum qb_status yaml_is(const struct yaml_doc *doc, const struct yaml_node *n, enum yaml_kind kind, struct qb_error *e)
{
	static const char *const words[] = {"a single value", "a list", "a map of keys and values"};
	if (n->kind == kind)
		return QB_OK;
	return yaml_refuse(doc, n, QB_FORMAT, words[kind], e);
}

enum qb_status yaml_double(const struct yaml_doc *doc, const struct yaml_node *n, double min, double max, double *out,
                           struct qb_error *e)
{
	char accepted[80];
	(void)snprintf(accepted, sizeof accepted, "a number from %.10g to %.10g", min, max);
	if (n->kind != YAML_SCALAR || n->quoted || !text_double(n->text, out))
		return yaml_refuse(doc, n, QB_FORMAT, accepted, e);
	if (*out < min || *out > max)
		return yaml_refuse(doc, n, QB_RANGE, accepted, e);
	return QB_OK;
}

enum qb_status yaml_int(const struct yaml_doc *doc, const struct yaml_node *n, int64_t min, int64_t max, int64_t *out,
                        struct qb_error *e)
{
	char accepted[80];
	(void)snprintf(accepted, sizeof accepted, "a whole number from %" PRId64 " to %" PRId64, min, max);
	if (n->kind != YAML_SCALAR || n->quoted || !text_i64(n->text, out))
		return yaml_refuse(doc, n, QB_FORMAT, accepted, e);
	if (*out < min || *out > max)
		return yaml_refuse(doc, n, QB_RANGE, accepted, e);
	return QB_OK;
}

enum qb_status yaml_bool(const struct yaml_doc *doc, const struct yaml_node *n, bool *out, struct qb_error *e)
{
	bool yes = n->kind == YAML_SCALAR && !n->quoted && strcmp(n->text, "true") == 0;
	bool no = n->kind == YAML_SCALAR && !n->quoted && strcmp(n->text, "false") == 0;
	if (!yes && !no)
		return yaml_refuse(doc, n, QB_FORMAT, "true or false", e);
	*out = yes;
	return QB_OK;
}

enum qb_status yaml_text(const struct yaml_doc *doc, const struct yaml_node *n, size_t max, const char **out,
                         struct qb_error *e)
{
	if (n->kind != YAML_SCALAR || !text_is_line(n->text, max)) {
		char accepted[60];
		(void)snprintf(accepted, sizeof accepted, "one line of text, at most %zu bytes", max);
		return yaml_refuse(doc, n, QB_FORMAT, accepted, e);
	}
	*out = n->text;
	return QB_OK;
}

enum qb_status yaml_name(const struct yaml_doc *doc, const struct yaml_node *n, const char **out, struct qb_error *e)
{
	if (n->kind != YAML_SCALAR || !text_is_name(n->text))
		return yaml_refuse(doc, n, QB_FORMAT, "a name: a-z, 0-9 and -, a letter first, at most 63", e);
	*out = n->text;
	return QB_OK;
}

enum qb_status yaml_duration(const struct yaml_doc *doc, const struct yaml_node *n, int64_t *out_ns, struct qb_error *e)
{
	if (n->kind != YAML_SCALAR || !text_duration_ns(n->text, out_ns))
		return yaml_refuse(doc, n, QB_FORMAT, "a duration such as '1 h', '10 min', '120 s' or '30 d'", e);
	return QB_OK;
}

enum qb_status yaml_time(const struct yaml_doc *doc, const struct yaml_node *n, int64_t *out_gps_ns, struct qb_error *e)
{
	if (n->kind == YAML_SCALAR && (clock_utc_parse(n->text, out_gps_ns) || clock_gps_parse(n->text, out_gps_ns)))
		return QB_OK;
	return yaml_refuse(doc, n, QB_FORMAT, "UTC such as 2027-03-01T00:00:00Z, or GPS seconds", e);
}

enum qb_status yaml_all_used(const struct yaml_doc *doc, const struct yaml_node *n, struct qb_error *e)
{
	for (int i = 0; i < n->n_members; i++) {
		const struct yaml_node *m = n->members[i];
		if (n->kind == YAML_MAP && !m->used) {
			char where[240];
			yaml_where(doc, m, where, sizeof where);
			return qb_fail(e, QB_FORMAT, where, "remove it or correct its spelling", "unknown key '%.60s'",
			               m->key);
		}
		enum qb_status st = yaml_all_used(doc, m, e);
		if (st != QB_OK)
			return st;
	}
	return QB_OK;
}
