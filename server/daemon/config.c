/* The table of configuration keys, the parser over it, and the rules between keys. */
#include "server/daemon/config.h"

#include <arpa/inet.h>
#include <ctype.h>
#include <inttypes.h>
#include <stddef.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/clock.h"
#include "server/base/text.h"
#include "server/base/yaml.h"

#define CONFIG_MAX_BYTES ((size_t)64 * 1024)

enum key_type { KEY_TEXT, KEY_LISTEN, KEY_WORD, KEY_BOOL, KEY_INT, KEY_DURATION, KEY_AUTHORITIES };

struct config_key {
	const char *path; /* "section.key" or "key" */
	enum key_type type;
	size_t offset;
	int64_t min, max;      /* of integers and, in ns, of durations */
	const char *otherwise; /* the default, as it would be written; NULL: none; "" with `needed` */
	const char *unit;
	const char *words; /* accepted words separated by '|', numbered from 0 */
	bool needed;
	const char *prose;
};

#define AT(member) offsetof(struct config, member)
#define S          NS_PER_S
#define MIB        (INT64_C(1) << 20)

static const struct config_key keys[] = {
    {"data", KEY_TEXT, AT(data), 0, 0, NULL, "path", NULL, true,
     "Directory with the store and the service's keys, made by quietbelld init; nobody else may read it."},
    {"listen", KEY_LISTEN, AT(listen), 0, 0, "127.0.0.1:8787", "host:port", NULL, false,
     "Numeric address and port to listen on; port 0 takes any free one and names it in the log. An address beyond the "
     "loopback needs tls or behind_proxy."},
    {"tls.certificate", KEY_TEXT, AT(tls_certificate), 0, 0, NULL, "path", NULL, false,
     "PEM file with the certificate chain; read once at start."},
    {"tls.key", KEY_TEXT, AT(tls_key), 0, 0, NULL, "path", NULL, false, "PEM file with the certificate's key."},
    {"behind_proxy", KEY_BOOL, AT(behind_proxy), 0, 1, "false", NULL, NULL, false,
     "A proxy in front of this service does TLS. It must pass the Host header, the path and the query unchanged: they "
     "are "
     "signed."},
    {"authority", KEY_AUTHORITIES, AT(authority), 0, 0, NULL, "host[:port]", NULL, false,
     "List of the names under which clients reach the service; a request for any other name is refused. Needed beyond "
     "the "
     "loopback and behind a proxy; otherwise the loopback names with the port."},
    {"clock", KEY_WORD, AT(clock), 0, 0, "system", NULL, "system|rehearsal", false,
     "The service's time. A rehearsal clock is moved by the administrator, only on the loopback, and marks every "
     "campaign "
     "made under it as a rehearsal for ever. It must be what quietbelld init was told."},
    {"rehearsal_seed", KEY_INT, AT(rehearsal_seed), -1, INT64_MAX, "-1", NULL, NULL, false,
     "With a rehearsal clock: fixes the service's contribution to every draw, so that documentation shows reproducible "
     "output. -1: none."},
    {"log.level", KEY_WORD, AT(log_level), 0, 0, "info", NULL, "debug|info|warning|error", false,
     "Least level that is logged; read anew on SIGHUP."},
    {"limits.connections", KEY_INT, AT(connections), 4, 4096, "256", NULL, NULL, false,
     "Connections at once; more wait in the backlog."},
    {"limits.event_streams", KEY_INT, AT(event_streams), 1, 2048, "32", NULL, NULL, false,
     "Event streams at once, at most half of the connections."},
    {"limits.body_bytes", KEY_INT, AT(body_bytes), 65536, 64 * MIB, "67108864", "bytes", NULL, false,
     "No request body is larger, whatever its route allows."},
    {"limits.body_memory_bytes", KEY_INT, AT(body_memory_bytes), MIB, 16384 * MIB, "268435456", "bytes", NULL, false,
     "Memory for all bodies being received together; beyond it the answer is 503."},
    {"limits.request", KEY_DURATION, AT(request_ns), S, 600 * S, "60 s", "duration", NULL, false,
     "A whole request, from its first byte to its last, takes no longer; an idle connection lives no longer."},
    {"limits.answer", KEY_DURATION, AT(answer_ns), S, 3600 * S, "10 min", "duration", NULL, false,
     "A client takes no longer to fetch an answer."},
    {"limits.drain", KEY_DURATION, AT(drain_ns), 0, 600 * S, "10 s", "duration", NULL, false,
     "On SIGTERM, requests at work get this long to end."},
};
#define N_KEYS (sizeof keys / sizeof keys[0])

static enum qb_status set_word(const struct yaml_doc *doc, const struct yaml_node *n, const struct config_key *k,
                               int64_t *out, struct qb_error *e)
{
	int64_t i = 0;
	size_t len = n->kind == YAML_SCALAR ? strlen(n->text) : 0;
	for (const char *w = k->words; len > 0 && *w != '\0'; i++) {
		size_t word_n = strcspn(w, "|");
		if (word_n == len && strncmp(w, n->text, len) == 0) {
			*out = i;
			return QB_OK;
		}
		w += word_n + (w[word_n] == '|');
	}
	return yaml_refuse(doc, n, QB_FORMAT, k->words, e);
}

static enum qb_status set_authorities(const struct yaml_doc *doc, const struct yaml_node *n, char **out,
                                      struct qb_error *e)
{
	const char *s;
	enum qb_status st = yaml_is(doc, n, YAML_LIST, e);
	if (st == QB_OK && (n->n_members < 1 || n->n_members > CONFIG_AUTHORITIES))
		st = yaml_refuse(doc, n, QB_RANGE, "a list of 1 to 16 names", e);
	for (int i = 0; st == QB_OK && i < n->n_members; i++) {
		const struct yaml_node *m = n->members[i];
		if ((st = yaml_text(doc, m, 120, &s, e)) != QB_OK)
			break;
		if (strspn(s, "abcdefghijklmnopqrstuvwxyz0123456789.:[]-") != strlen(s))
			st = yaml_refuse(doc, m, QB_FORMAT, "host or host:port in lower case", e);
		else
			out[i] = qb_strdup(s);
	}
	return st;
}

static enum qb_status set_one(const struct yaml_doc *doc, const struct yaml_node *n, const struct config_key *k,
                              struct config *c, struct qb_error *e)
{
	void *at = (char *)c + k->offset;
	const char *s;
	bool yes = false;
	enum qb_status st = QB_OK;
	switch (k->type) {
	case KEY_TEXT:
	case KEY_LISTEN:
		st = yaml_text(doc, n, 1000, &s, e);
		if (st == QB_OK && k->type == KEY_LISTEN && !config_listen_split(s, c->host, &c->port, &c->loopback))
			st = yaml_refuse(doc, n, QB_FORMAT, "a numeric address and a port, such as 127.0.0.1:8787", e);
		if (st == QB_OK)
			*(char **)at = qb_strdup(s);
		return st;
	case KEY_WORD:
		return set_word(doc, n, k, at, e);
	case KEY_BOOL:
		st = yaml_bool(doc, n, &yes, e);
		*(int64_t *)at = yes;
		return st;
	case KEY_INT:
		return yaml_int(doc, n, k->min, k->max, at, e);
	case KEY_DURATION:
		st = yaml_duration(doc, n, at, e);
		if (st == QB_OK && (*(int64_t *)at < k->min || *(int64_t *)at > k->max)) {
			char accepted[80];
			(void)snprintf(accepted, sizeof accepted, "%" PRId64 " s to %" PRId64 " s", k->min / S,
			               k->max / S);
			return yaml_refuse(doc, n, QB_RANGE, accepted, e);
		}
		return st;
	case KEY_AUTHORITIES:
		return set_authorities(doc, n, at, e);
	}
	return qb_fail(e, QB_FAULT, k->path, NULL, "has no type");
}

static enum qb_status find(const struct yaml_doc *doc, const struct config_key *k, const struct yaml_node **out,
                           struct qb_error *e)
{
	struct yaml_node *map = doc->root;
	const char *dot = strchr(k->path, '.');
	*out = NULL;
	if (dot != NULL) {
		char section[32];
		(void)snprintf(section, sizeof section, "%.*s", (int)(dot - k->path), k->path);
		if ((map = yaml_find(map, section)) == NULL)
			return QB_OK;
		enum qb_status st = yaml_is(doc, map, YAML_MAP, e);
		if (st != QB_OK)
			return st;
	}
	*out = yaml_find(map, dot != NULL ? dot + 1 : k->path);
	return QB_OK;
}

static enum qb_status set_key(const struct yaml_doc *doc, const struct config_key *k, struct config *c,
                              struct qb_error *e)
{
	const struct yaml_node *n;
	enum qb_status st = find(doc, k, &n, e);
	if (st != QB_OK)
		return st;
	if (n == NULL && k->needed)
		return qb_fail(e, QB_FORMAT, doc->file, "add it", "the key '%s' is missing", k->path);
	if (n != NULL)
		return set_one(doc, n, k, c, e);
	if (k->otherwise == NULL)
		return QB_OK;
	/* Defaults go through the same parser, so that a wrong one can't hide. */
	struct yaml_node node = {.kind = YAML_SCALAR, .text = (char *)(uintptr_t)k->otherwise};
	return set_one(doc, &node, k, c, e);
}

/* Each value is fine alone; these are unsafe or make no sense together. */
static enum qb_status check_together(const struct config *c, const char *file, struct qb_error *e)
{
	bool tls = c->tls_certificate != NULL;
	if (tls != (c->tls_key != NULL))
		return qb_fail(e, QB_FORMAT, file, "give both or none", "tls.certificate and tls.key belong together");
	if (!c->loopback && !tls && !c->behind_proxy)
		return qb_fail(e, QB_REFUSED, file, "configure tls, listen on 127.0.0.1, or say behind_proxy: true",
		               "listen: %s is reachable from outside without TLS", c->listen);
	if (c->clock == CONFIG_CLOCK_REHEARSAL && !c->loopback)
		return qb_fail(e, QB_REFUSED, file, "listen on 127.0.0.1",
		               "a rehearsal clock is for the loopback only");
	if (c->rehearsal_seed >= 0 && c->clock != CONFIG_CLOCK_REHEARSAL)
		return qb_fail(e, QB_REFUSED, file, "remove it, or say clock: rehearsal",
		               "rehearsal_seed would make a real draw predictable");
	if ((!c->loopback || c->behind_proxy) && c->authority[0] == NULL)
		return qb_fail(e, QB_FORMAT, file, "list the names that clients use, authority: [bell.example]",
		               "the key 'authority' is missing");
	if (c->event_streams > c->connections / 2)
		return qb_fail(e, QB_RANGE, file, "lower it, or raise limits.connections",
		               "limits.event_streams is more than half of limits.connections");
	return QB_OK;
}

enum qb_status config_parse(const char *text, size_t n, const char *file, struct config *out, struct qb_error *e)
{
	struct yaml_doc *doc = NULL;
	*out = (struct config){0};
	enum qb_status st = yaml_parse(text, n, file, &doc, e);
	if (st == QB_OK)
		st = yaml_is(doc, doc->root, YAML_MAP, e);
	for (size_t i = 0; st == QB_OK && i < N_KEYS; i++)
		st = set_key(doc, &keys[i], out, e);
	if (st == QB_OK)
		st = yaml_all_used(doc, doc->root, e);
	if (st == QB_OK)
		st = check_together(out, file, e);
	yaml_doc_free(&doc);
	return st;
}

enum qb_status config_read(const char *path, struct config *out, struct qb_error *e)
{
	struct buf b = {0};
	*out = (struct config){0};
	enum qb_status st = file_read(path, CONFIG_MAX_BYTES, &b, e);
	if (st == QB_OK)
		st = config_parse(b.len > 0 ? (const char *)b.data : "", b.len, path, out, e);
	buf_free(&b);
	return st;
}

void config_free(struct config *c)
{
	qb_free(c->data);
	qb_free(c->listen);
	qb_free(c->tls_certificate);
	qb_free(c->tls_key);
	for (int i = 0; i < CONFIG_AUTHORITIES; i++)
		qb_free(c->authority[i]);
	*c = (struct config){0};
}

bool config_listen_split(const char *listen, char host[static 80], int *port, bool *loopback)
{
	const char *colon = strrchr(listen, ':');
	int64_t number;
	char bare[80];
	struct in_addr v4;
	struct in6_addr v6;
	if (colon == NULL || colon == listen || colon - listen >= 80 || !isdigit((unsigned char)colon[1]) ||
	    !text_i64(colon + 1, &number) || number > 65535)
		return false;
	(void)snprintf(host, 80, "%.*s", (int)(colon - listen), listen);
	*port = (int)number;
	size_t n = strlen(host);
	if (strcmp(host, "localhost") == 0) {
		*loopback = true;
		return true;
	}
	if (host[0] == '[' && host[n - 1] == ']') {
		(void)snprintf(bare, sizeof bare, "%.*s", (int)n - 2, host + 1);
		*loopback = inet_pton(AF_INET6, bare, &v6) == 1 && memcmp(&v6, &in6addr_loopback, sizeof v6) == 0;
		return inet_pton(AF_INET6, bare, &v6) == 1;
	}
	if (inet_pton(AF_INET, host, &v4) != 1)
		return false;
	*loopback = (ntohl(v4.s_addr) >> 24) == 127;
	return true;
}

static void put_accepted(const struct config_key *k, struct buf *out)
{
	if (k->type == KEY_BOOL)
		buf_text(out, "true or false");
	else if (k->type == KEY_INT && k->max == INT64_MAX)
		buf_printf(out, "%" PRId64 " or more", k->min);
	else if (k->type == KEY_INT)
		buf_printf(out, "%" PRId64 " to %" PRId64 "%s%s", k->min, k->max, k->unit != NULL ? " " : "",
		           k->unit != NULL ? k->unit : "");
	else if (k->type == KEY_DURATION)
		buf_printf(out, "%" PRId64 " s to %" PRId64 " s", k->min / S, k->max / S);
	else if (k->type == KEY_AUTHORITIES)
		buf_printf(out, "list of %s", k->unit);
	else
		buf_text(out, k->words != NULL ? k->words : k->unit);
}

void config_roff(struct buf *out)
{
	for (size_t i = 0; i < N_KEYS; i++) {
		const struct config_key *k = &keys[i];
		buf_printf(out, ".TP\n.B %s\n%s\n(", k->path, k->prose);
		put_accepted(k, out);
		if (k->needed)
			buf_text(out, "; must be given");
		else if (k->otherwise != NULL)
			buf_printf(out, "; default %s", k->otherwise);
		buf_text(out, ")\n");
	}
}

void config_show(const struct config *c, struct buf *out)
{
	for (size_t i = 0; i < N_KEYS; i++) {
		const struct config_key *k = &keys[i];
		const void *at = (const char *)c + k->offset;
		if (k->type == KEY_AUTHORITIES) {
			for (int j = 0; c->authority[j] != NULL; j++)
				buf_printf(out, "%s %s\n", k->path, c->authority[j]);
		} else if (k->type == KEY_TEXT || k->type == KEY_LISTEN) {
			const char *s = *(char *const *)at;
			if (s != NULL)
				buf_printf(out, "%s %s\n", k->path, s);
		} else if (k->type == KEY_WORD) {
			const char *w = k->words;
			for (int64_t j = 0; j < *(const int64_t *)at; j++)
				w += strcspn(w, "|") + 1;
			buf_printf(out, "%s %.*s\n", k->path, (int)strcspn(w, "|"), w);
		} else if (k->type == KEY_BOOL) {
			buf_printf(out, "%s %s\n", k->path, *(const int64_t *)at != 0 ? "true" : "false");
		} else if (k->type == KEY_DURATION) {
			buf_printf(out, "%s %g s\n", k->path, (double)*(const int64_t *)at / 1e9);
		} else {
			buf_printf(out, "%s %" PRId64 "\n", k->path, *(const int64_t *)at);
		}
	}
}
