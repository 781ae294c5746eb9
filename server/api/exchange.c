/*
 * One request: the raw target, the headers, the body within its limits, then who, may he, do it, answer. The order is
 * the security of it: nothing is read into memory, looked up or parsed before the cheaper refusals were made.
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

enum header { H_HOST, H_LENGTH, H_CODING, H_TYPE, H_DIGEST, H_INPUT, H_SIGNATURE, H_COUNT };
static const char *const header_names[H_COUNT] = {
    "Host", "Content-Length", "Transfer-Encoding", "Content-Type", "Content-Digest", "Signature-Input", "Signature"};

struct exchange {
	struct http *http;
	struct MHD_Connection *connection;
	char id[17]; /* in the log and in a problem's instance */
	char *path, *query;
	char method[8];
	const char *header[H_COUNT]; /* the library's memory, until completion */
	char authority[128];
	struct wire_match match;
	bool matched, begun;
	struct problem problem;
	size_t length, reserved;
	struct buf body;
	json_t *doc;
	struct view_party who;
	bool known;
	int status;
	int64_t begun_ms;
};

static struct link *link_of(struct MHD_Connection *c)
{
	const union MHD_ConnectionInfo *info = MHD_get_connection_info(c, MHD_CONNECTION_INFO_SOCKET_CONTEXT);
	return info != NULL ? info->socket_context : NULL;
}

static void set_deadline(struct exchange *x, int64_t ms)
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
	set_deadline(x, h->settings.request_ms);
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

static bool is_probe(const struct wire_route *r)
{
	return r->id == R_HEALTHZ || r->id == R_READYZ || r->id == R_METRICS;
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
	else if (!is_probe(x->match.route))
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

/* ---- answers ---- */

static void free_bytes(void *p)
{
	qb_free(p);
}

static enum MHD_Result send_response(struct exchange *x, struct MHD_Response *r, int status, const char *type)
{
	x->status = status;
	CHECK(r != NULL);
	bool ok = MHD_add_response_header(r, "Content-Type", type) == MHD_YES &&
	          MHD_add_response_header(r, "Cache-Control", "no-store") == MHD_YES &&
	          MHD_add_response_header(r, "X-Content-Type-Options", "nosniff") == MHD_YES;
	if (status == 401)
		ok = ok && MHD_add_response_header(r, "WWW-Authenticate", "Signature") == MHD_YES;
	if (status == 405)
		ok = ok && MHD_add_response_header(r, "Allow", strcmp(x->method, "GET") == 0 ? "POST" : "GET, POST") ==
		               MHD_YES;
	if (status == 503)
		ok = ok && MHD_add_response_header(r, "Retry-After", "2") == MHD_YES;
	if (atomic_load(&x->http->draining))
		ok = ok && MHD_add_response_header(r, "Connection", "close") == MHD_YES;
	set_deadline(x, x->http->settings.answer_ms);
	enum MHD_Result done = ok ? MHD_queue_response(x->connection, (unsigned)status, r) : MHD_NO;
	MHD_destroy_response(r);
	return done;
}

/* Takes bytes over. */
static enum MHD_Result send_bytes(struct exchange *x, int status, const char *type, void *bytes, size_t n)
{
	struct MHD_Response *r = MHD_create_response_from_buffer_with_free_callback(n, bytes, free_bytes);
	return send_response(x, r, status, type);
}

static enum MHD_Result send_problem(struct exchange *x)
{
	char instance[64];
	(void)snprintf(instance, sizeof instance, "urn:quietbell:request:%s", x->id);
	char *text = problem_text(&x->problem, instance);
	return send_bytes(x, x->problem.http_status, PROBLEM_MEDIA_TYPE, text, strlen(text));
}

static enum MHD_Result send_text(struct exchange *x, int status, const char *type, const char *text)
{
	return send_bytes(x, status, type, qb_strdup(text), strlen(text));
}

static enum MHD_Result send_metrics(struct exchange *x)
{
	struct http *h = x->http;
	struct metrics_now now = {0};
	struct buf b = {0};
	ops_wait_change(h->settings.ops, &now.ledger_size, &now.now_gps_ns, 0);
	pthread_mutex_lock(&h->lock);
	now.connections = h->n_links;
	pthread_mutex_unlock(&h->lock);
	now.event_streams = events_count(h->events);
	metrics_text(&h->metrics, &now, &b);
	return send_bytes(x, 200, "application/openmetrics-text; version=1.0.0; charset=utf-8", b.data, b.len);
}

static enum MHD_Result send_stream(struct exchange *x)
{
	struct MHD_Response *r = events_stream(x->http->events, x->connection);
	if (r == NULL) {
		problem_set(&x->problem, 503, "busy", "too many event streams; try again later");
		return send_problem(x);
	}
	enum MHD_Result done = send_response(x, r, 200, "text/event-stream");
	set_deadline(x, INT64_MAX);
	/* A stream is not work that draining waits for. */
	return done;
}

/* ---- the use case ---- */

static void log_fault(struct exchange *x, const struct qb_error *e)
{
	char line[900];
	log_event(x->http->settings.log, LOG_ERROR_, "request-failed", "request", x->id, "route", x->match.route->path,
	          "reason", qb_error_line(e, line, sizeof line), NULL);
}

static void authenticate(struct exchange *x)
{
	struct qb_error e = {0};
	struct auth_request r = {
	    .request = {x->method, x->authority, x->path, x->query, x->length > 0 ? x->header[H_TYPE] : NULL,
	                x->body.data, x->body.len},
	    .content_digest = x->header[H_DIGEST],
	    .signature_input = x->header[H_INPUT],
	    .signature = x->header[H_SIGNATURE],
	    .route = x->match.route,
	    .body = x->doc,
	};
	int64_t unix_s, ns;
	bool in_leap;
	clock_unix_from_gps(clock_now(&x->http->settings.clock), &unix_s, &ns, &in_leap);
	enum qb_status st = auth_check(x->http->settings.ops, &r, unix_s, &x->who, &e);
	x->known = st == QB_OK;
	if (st == QB_CRYPTO) {
		char line[sizeof x->problem.detail];
		problem_set(&x->problem, 401, "unauthorised", "%s", qb_error_line(&e, line, sizeof line));
	} else if (st != QB_OK) {
		problem_from_error(&x->problem, &e, 0);
		log_fault(x, &e);
	} else if ((r.route->roles & ROLE_BIT(x->who.role)) == 0) {
		problem_set(&x->problem, 403, "refused", "a %s may not do this", wire_role_word(x->who.role));
	}
}

static void parse_body(struct exchange *x)
{
	struct qb_error e = {0};
	if (x->length > 0 && x->doc == NULL &&
	    json_read((const char *)x->body.data, x->body.len, "request", &x->doc, &e) != QB_OK)
		problem_from_error(&x->problem, &e, 0);
}

static enum MHD_Result run_use_case(struct exchange *x)
{
	struct qb_error e = {0};
	struct ops_reply reply = {0};
	struct ops_call call = {&x->match, x->known ? &x->who : NULL, x->query, x->doc};
	enum qb_status st = ops_dispatch(x->http->settings.ops, &call, &reply, &e);
	enum MHD_Result done;
	if (st != QB_OK) {
		/* A status without a filled record must not pass as a success. */
		if (e.status == QB_OK)
			(void)qb_fail(&e, st, NULL, NULL, "the service refuses this");
		problem_from_error(&x->problem, &e, reply.until_gps_ns);
		if (x->problem.http_status >= 500)
			log_fault(x, &e);
		done = send_problem(x);
	} else if (reply.doc != NULL || reply.content_type == NULL) {
		char *text = reply.doc != NULL ? json_text(reply.doc) : qb_strdup("{}");
		done = send_bytes(x, reply.http_status, "application/json", text, strlen(text));
	} else {
		done = send_bytes(x, reply.http_status, reply.content_type, reply.bytes.data, reply.bytes.len);
		reply.bytes = (struct buf){0};
	}
	json_decref(reply.doc);
	qb_free(reply.content_type);
	buf_free(&reply.bytes);
	return done;
}

static enum MHD_Result answer(struct exchange *x)
{
	const struct wire_route *r = x->match.route;
	if (x->problem.http_status == 0) {
		/* An enrolment is signed by the key in its body, hence its body comes first. */
		if (r->id == R_PARTIES_POST)
			parse_body(x);
		if (x->problem.http_status == 0 && auth_wanted(r))
			authenticate(x);
		if (x->problem.http_status == 0)
			parse_body(x);
	}
	if (x->problem.http_status != 0)
		return send_problem(x);
	switch (r->id) {
	case R_HEALTHZ:
		return send_text(x, 200, "application/json", "{\"status\":\"lives\"}");
	case R_READYZ:
		if (atomic_load(&x->http->draining)) {
			problem_set(&x->problem, 503, "busy", "the service is stopping");
			return send_problem(x);
		}
		(void)ops_now(x->http->settings.ops); /* takes its lock, so that a stuck service is not called ready */
		return send_text(x, 200, "application/json", "{\"status\":\"ready\"}");
	case R_METRICS:
		return send_metrics(x);
	case R_EVENTS:
		return send_stream(x);
	default:
		return run_use_case(x);
	}
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
		return send_problem(x);
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
	return answer(x);
}

void exchange_done(struct exchange *x, bool completed)
{
	struct http *h = x->http;
	char status[12], duration[24];
	const struct wire_route *r = x->matched ? x->match.route : NULL;
	(void)snprintf(status, sizeof status, "%d", completed ? x->status : 0);
	(void)snprintf(duration, sizeof duration, "%" PRId64, http_monotonic_ms() - x->begun_ms);
	log_event(h->settings.log, r != NULL && is_probe(r) ? LOG_DEBUG_ : LOG_INFO_, "request", "request", x->id,
	          "method", r != NULL ? r->method : "other", "route", r != NULL ? r->path : "none", "status", status,
	          "duration_ms", duration, "party", x->known && x->who.name[0] != '\0' ? x->who.name : "-", NULL);
	metrics_count(&h->metrics, r, x->status);
	set_deadline(x, h->settings.request_ms);
	if (x->reserved > 0)
		atomic_fetch_sub(&h->body_memory, x->reserved);
	buf_wipe(&x->body);
	json_decref(x->doc);
	qb_free(x->path);
	qb_free(x->query);
	atomic_fetch_sub(&h->at_work, 1);
	qb_free(x);
}
