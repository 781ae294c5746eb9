/* The second half of a request: authentication, role, use case, and the forms an answer takes. */
#include <malloc.h>
#include <stdio.h>
#include <string.h>

#include "server/api/auth.h"
#include "server/api/internal.h"
#include "server/base/alloc.h"
#include "server/base/check.h"

bool answer_is_probe(const struct wire_route *r)
{
	return r->id == R_HEALTHZ || r->id == R_READYZ || r->id == R_METRICS;
}

/* An answer may carry a slot key. */
static void free_bytes(void *p)
{
	if (p != NULL)
		wipe(p, malloc_usable_size(p));
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
	exchange_deadline(x, x->http->settings.answer_ms);
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

enum MHD_Result answer_problem(struct exchange *x)
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
		return answer_problem(x);
	}
	enum MHD_Result done = send_response(x, r, 200, "text/event-stream");
	exchange_deadline(x, INT64_MAX);
	/* A stream is not work that draining waits for. */
	return done;
}

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
		problem_set(&x->problem, 403, "refused", "the role '%s' may not do this", wire_role_word(x->who.role));
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
		done = answer_problem(x);
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

enum MHD_Result answer_request(struct exchange *x)
{
	const struct wire_route *r = x->match.route;
	exchange_deadline(x, x->http->settings.answer_ms);
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
		return answer_problem(x);
	switch (r->id) {
	case R_HEALTHZ:
		return send_text(x, 200, "application/json", "{\"status\":\"lives\"}");
	case R_READYZ:
		if (atomic_load(&x->http->draining)) {
			problem_set(&x->problem, 503, "busy", "the service is stopping");
			return answer_problem(x);
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
