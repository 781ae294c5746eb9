/*
 * The first half of a request: the raw target, the headers, the body within its limits. The order is the security of
 * it: nothing is read into memory, looked up or parsed before the cheaper refusals were made.
 */
#include <ctype.h>
#include <inttypes.h>
#include <stdio.h>
#include <string.h>

#include "server/api/auth.h"
#include "server/api/internal.h"
#include "server/base/alloc.h"
#include "server/base/buf.h"
#include "server/base/check.h"
#include "server/base/text.h"

#define TARGET_BYTES 1024
/* A refused body up to this size is read and dropped first, so that the client gets to read the answer. */
#define DROPPED_BYTES ((size_t)256 * 1024)

static const char path_bytes[] = "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._~-/";

static const char *const header_names[H_COUNT] = {
    "Host", "Content-Length", "Transfer-Encoding", "Content-Type", "Content-Digest", "Signature-Input", "Signature"};

static struct link *link_of(struct MHD_Connection *c)
{
	const union MHD_ConnectionInfo *info = MHD_get_connection_info(c, MHD_CONNECTION_INFO_SOCKET_CONTEXT);
	return info != NULL ? info->socket_context : NULL;
}

void exchange_deadline(struct exchange *x, int64_t ms)
{
	struct link *l = link_of(x->connection);
	if (l != NULL)
		atomic_store(&l->deadline_ms, ms == INT64_MAX ? ms : http_monotonic_ms() + ms);
}

/* Segments "." and ".." would pass as names; no path of ours needs an escape at all. */
static void check_target(struct exchange *x, const char *raw)
{
	size_t n = strlen(raw);
	if (n > TARGET_BYTES) {
		problem_set(&x->problem, 414, "too-large", "the path and query are longer than %d bytes", TARGET_BYTES);
		return;
	}
	const char *q = strchr(raw, '?');
	size_t path_n = q != NULL ? (size_t)(q - raw) : n;
	x->path = qb_memdup(raw, path_n);
	x->query = qb_strdup(q != NULL ? q + 1 : "");
	if (raw[0] != '/' || strspn(x->path, path_bytes) != path_n)
		problem_set(&x->problem, 400, "format", "the path holds bytes or escapes that no path here has");
	for (const char *s = x->path; (s = strchr(s, '/')) != NULL;) {
		size_t len = strcspn(++s, "/");
		if ((len == 1 && s[0] == '.') || (len == 2 && s[0] == '.' && s[1] == '.'))
			problem_set(&x->problem, 400, "format", "the path holds a relative segment");
	}
	for (const char *s = x->query; *s != '\0'; s++) {
		if (*s <= 0x20 || *s >= 0x7f || *s == '#' || strncmp(s, "%00", 3) == 0)
			problem_set(&x->problem, 400, "format", "the query holds bytes that are not allowed");
	}
}

struct exchange *exchange_new(struct http *h, struct MHD_Connection *connection, const char *raw_uri)
{
	struct exchange *x = QB_NEW(struct exchange);
	uint8_t id[8];
	x->http = h;
	x->connection = connection;
	x->begun_ms = http_monotonic_ms();
	random_bytes(id, sizeof id);
	hex_encode(x->id, id, sizeof id);
	atomic_fetch_add(&h->at_work, 1);
	exchange_deadline(x, h->settings.request_ms);
	check_target(x, raw_uri);
	return x;
}

static enum MHD_Result take_header(void *state, enum MHD_ValueKind kind, const char *key, size_t key_n,
                                   const char *value, size_t value_n)
{
	struct exchange *x = state;
	(void)kind;
	for (size_t i = 0; i < value_n; i++) {
		unsigned char c = (unsigned char)value[i];
		if ((c < 0x20 && c != '\t') || c == 0x7f)
			problem_set(&x->problem, 400, "format", "a header holds control characters");
	}
	for (int i = 0; i < H_COUNT; i++) {
		if (strlen(header_names[i]) != key_n || strncasecmp(header_names[i], key, key_n) != 0)
			continue;
		if (x->header[i] != NULL)
			problem_set(&x->problem, 400, "format", "the header %s stands twice", header_names[i]);
		x->header[i] = value != NULL ? value : "";
	}
	return MHD_YES;
}

static void check_framing(struct exchange *x)
{
	const char *length = x->header[H_LENGTH];
	int64_t n = 0;
	if (x->header[H_CODING] != NULL && length != NULL)
		problem_set(&x->problem, 400, "format", "Content-Length and Transfer-Encoding exclude each other");
	else if (x->header[H_CODING] != NULL)
		problem_set(&x->problem, 411, "format", "send the body with a Content-Length");
	if (length != NULL &&
	    (strlen(length) > 15 || strspn(length, "0123456789") != strlen(length) || !text_i64(length, &n)))
		problem_set(&x->problem, 400, "format", "Content-Length is not a number");
	x->length = (size_t)n;
}

static void check_authority(struct exchange *x)
{
	const char *host = x->header[H_HOST];
	if (host == NULL || host[0] == '\0' || strlen(host) >= sizeof x->authority) {
		problem_set(&x->problem, 400, "format", "the Host header is missing or too long");
		return;
	}
	for (size_t i = 0; host[i] != '\0'; i++)
		x->authority[i] = (char)tolower((unsigned char)host[i]);
	for (int i = 0; i < x->http->n_authorities; i++) {
		if (strcmp(x->http->authority[i], x->authority) == 0)
			return;
	}
	/* A signature made for another service must not count here, nor a page of another site reach this one. */
	problem_set(&x->problem, 421, "refused", "this service does not go by that name");
}

static void check_route(struct exchange *x, const char *method)
{
	bool path_known = false;
	if (x->path == NULL)
		return;
	x->matched = wire_route_match(method, x->path, &x->match, &path_known);
	if (!x->matched && path_known)
		problem_set(&x->problem, 405, "not-found", "this path does not take that method");
	else if (!x->matched)
		problem_set(&x->problem, 404, "not-found", "there is nothing here");
	else if (!answer_is_probe(x->match.route))
		check_authority(x);
}

static void check_body_size(struct exchange *x)
{
	struct http *h = x->http;
	size_t limit = x->matched ? x->match.route->body_limit : 0;
	if (limit > h->settings.body_bytes)
		limit = h->settings.body_bytes;
	/* Strangers don't get to fill our memory. */
	if (x->matched && auth_wanted(x->match.route) && (x->header[H_INPUT] == NULL || x->header[H_SIGNATURE] == NULL))
		problem_set(&x->problem, 401, "unauthorised",
		            "the request is not signed; sign it with an enrolled key");
	if (x->length > limit && limit == 0 && x->matched && x->match.route->body_limit == 0)
		problem_set(&x->problem, 413, "too-large", "no body is taken here");
	else if (x->length > limit)
		problem_set(&x->problem, 413, "too-large", "the body is larger than %zu bytes", limit);
	if (x->matched && x->match.route->body_limit > 0 && x->length == 0)
		problem_set(&x->problem, 400, "format", "a body is missing");
	if (x->length > 0 && (x->header[H_TYPE] == NULL || strcmp(x->header[H_TYPE], "application/json") != 0))
		problem_set(&x->problem, 415, "format", "send the body as application/json");
	if (x->problem.http_status != 0 || x->length == 0)
		return;
	if (atomic_fetch_add(&h->body_memory, x->length) + x->length > h->settings.body_memory_bytes) {
		atomic_fetch_sub(&h->body_memory, x->length);
		problem_set(&x->problem, 503, "busy", "too many large requests at once; try again soon");
		return;
	}
	x->reserved = x->length;
}

static enum MHD_Result begin(struct exchange *x, const char *method)
{
	(void)snprintf(x->method, sizeof x->method, "%s", method);
	(void)MHD_get_connection_values_n(x->connection, MHD_HEADER_KIND, take_header, x);
	check_framing(x);
	check_route(x, method);
	check_body_size(x);
	/* Answering now makes the library close the connection after it; the rest of a body is never read. */
	if (x->problem.http_status != 0 && (x->header[H_CODING] != NULL || x->length == 0 || x->length > DROPPED_BYTES))
		return answer_problem(x);
	return MHD_YES;
}

enum MHD_Result exchange_step(struct exchange *x, const char *method, const char *upload, size_t *upload_n)
{
	if (x == NULL)
		return MHD_NO;
	if (!x->begun) {
		x->begun = true;
		return begin(x, method);
	}
	if (*upload_n > 0) {
		if (x->problem.http_status == 0 && x->body.len + *upload_n > x->length)
			problem_set(&x->problem, 400, "format", "the body is longer than its Content-Length");
		if (x->problem.http_status == 0)
			buf_put(&x->body, upload, *upload_n);
		*upload_n = 0;
		return MHD_YES;
	}
	if (x->body.len != x->length)
		problem_set(&x->problem, 400, "format", "the body is shorter than its Content-Length");
	return answer_request(x);
}

void exchange_done(struct exchange *x, bool completed)
{
	struct http *h = x->http;
	char status[12], duration[24];
	const struct wire_route *r = x->matched ? x->match.route : NULL;
	(void)snprintf(status, sizeof status, "%d", completed ? x->status : 0);
	(void)snprintf(duration, sizeof duration, "%" PRId64, http_monotonic_ms() - x->begun_ms);
	log_event(h->settings.log, r != NULL && answer_is_probe(r) ? LOG_DEBUG_ : LOG_INFO_, "request", "request",
	          x->id, "method", r != NULL ? r->method : "other", "route", r != NULL ? r->path : "none", "status",
	          status, "duration_ms", duration, "party", x->known && x->who.name[0] != '\0' ? x->who.name : "-",
	          NULL);
	metrics_count(&h->metrics, r, x->status);
	exchange_deadline(x, h->settings.request_ms);
	if (x->reserved > 0)
		atomic_fetch_sub(&h->body_memory, x->reserved);
	buf_wipe(&x->body);
	json_decref(x->doc);
	qb_free(x->path);
	qb_free(x->query);
	atomic_fetch_sub(&h->at_work, 1);
	qb_free(x);
}
