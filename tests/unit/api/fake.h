/*
 * A service without use cases behind the real HTTP layer: it knows one party of each role, remembers nonces, counts the
 * calls that got through and answers what the test says. And a raw socket client, since most of what is tested no
 * decent client would send. Included by one test program each: it defines the functions of server/ops/ops.h.
 */
#ifndef QB_TESTS_API_FAKE_H
#define QB_TESTS_API_FAKE_H

#include <arpa/inet.h>
#include <pthread.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/time.h>
#include <time.h>
#include <unistd.h>
#include <cmocka.h>

#include "server/api/http.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/ops.h"
#include "server/wire/request.h"

#define FAKE_NOW_UNIX INT64_C(1800000000)
#define FAKE_NONCES   1024

struct ops {
	pthread_mutex_t lock;
	pthread_cond_t changed;
	uint64_t size;
	int64_t now_gps_ns;
	uint8_t nonces[FAKE_NONCES][32];
	int n_nonces;
	int calls; /* that reached ops_dispatch */
	enum wire_route_id last;
	char last_party[64], last_query[64];
	uint8_t last_key[32];
	/* what ops_dispatch answers */
	enum qb_status answer;
	int64_t until_gps_ns;
};

static struct ops fake = {.lock = PTHREAD_MUTEX_INITIALIZER, .changed = PTHREAD_COND_INITIALIZER};

static inline struct secret *seed_of(int number)
{
	uint8_t bytes[32];
	memset(bytes, number + 1, sizeof bytes);
	return secret_from(bytes, sizeof bytes);
}

/* Parties are numbered by their role; other numbers are keys that nobody enrolled. */
static inline void party_of(int number, struct view_party *p)
{
	struct secret *seed = seed_of(number);
	*p = (struct view_party){.role = (enum wire_role)number};
	(void)snprintf(p->name, sizeof p->name, "%s-one", wire_role_word((enum wire_role)number));
	sign_public(seed, p->signing_key);
	sign_key_id(p->signing_key, p->key_id);
	secret_free(&seed);
}

int64_t ops_now(struct ops *o)
{
	return o->now_gps_ns;
}

void ops_wait_change(struct ops *o, uint64_t *size, int64_t *now_gps_ns, int timeout_ms)
{
	struct timespec until;
	(void)clock_gettime(CLOCK_REALTIME, &until);
	int64_t ns = until.tv_nsec + (int64_t)timeout_ms * 1000000;
	until.tv_sec += (time_t)(ns / NS_PER_S);
	until.tv_nsec = (long)(ns % NS_PER_S);
	pthread_mutex_lock(&o->lock);
	while (o->size == *size && o->now_gps_ns == *now_gps_ns) {
		if (pthread_cond_timedwait(&o->changed, &o->lock, &until) != 0)
			break;
	}
	*size = o->size;
	*now_gps_ns = o->now_gps_ns;
	pthread_mutex_unlock(&o->lock);
}

enum qb_status ops_party_by_key(struct ops *o, const uint8_t key_id[static 16], struct view_party *out,
                                struct qb_error *e)
{
	(void)o;
	for (int r = ROLE_ADMINISTRATOR; r <= ROLE_AUDITOR; r++) {
		party_of(r, out);
		if (memcmp(out->key_id, key_id, 16) == 0)
			return QB_OK;
	}
	return qb_fail(e, QB_NOT_FOUND, NULL, NULL, "the key is not enrolled");
}

enum qb_status ops_nonce_take(struct ops *o, const uint8_t key_id[static 16], const uint8_t nonce[static 16],
                              int64_t now_unix_s, struct qb_error *e)
{
	uint8_t both[32];
	enum qb_status st = QB_OK;
	(void)now_unix_s;
	memcpy(both, key_id, 16);
	memcpy(both + 16, nonce, 16);
	pthread_mutex_lock(&o->lock);
	for (int i = 0; i < o->n_nonces; i++) {
		if (memcmp(o->nonces[i], both, 32) == 0)
			st = qb_fail(e, QB_CRYPTO, "request", "sign it anew", "was sent before");
	}
	if (st == QB_OK && o->n_nonces < FAKE_NONCES)
		memcpy(o->nonces[o->n_nonces++], both, 32);
	pthread_mutex_unlock(&o->lock);
	return st;
}

enum qb_status ops_dispatch(struct ops *o, const struct ops_call *call, struct ops_reply *reply, struct qb_error *e)
{
	*reply = (struct ops_reply){.until_gps_ns = o->until_gps_ns};
	pthread_mutex_lock(&o->lock);
	o->calls++;
	o->last = call->match->route->id;
	(void)snprintf(o->last_party, sizeof o->last_party, "%s", call->who != NULL ? call->who->name : "-");
	(void)snprintf(o->last_query, sizeof o->last_query, "%s", call->query);
	if (call->who != NULL)
		memcpy(o->last_key, call->who->signing_key, 32);
	pthread_mutex_unlock(&o->lock);
	if (o->answer != QB_OK)
		return qb_fail(e, o->answer, "slot", "wait", "the fake says no with /secret/path");
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "done", json_true());
	return QB_OK;
}

static int64_t fake_now(void *state)
{
	(void)state;
	return clock_gps_from_unix(FAKE_NOW_UNIX, 0);
}

static inline struct http_settings fake_settings(void)
{
	return (struct http_settings){.ops = &fake,
	                              .clock = {fake_now, NULL},
	                              .host = "127.0.0.1",
	                              .connections = 16,
	                              .event_streams = 2,
	                              .body_bytes = (size_t)64 << 20,
	                              .body_memory_bytes = (size_t)64 << 20,
	                              .request_ms = 5000,
	                              .answer_ms = 5000};
}

static inline struct http *fake_start(const struct http_settings *s)
{
	struct http *h;
	struct qb_error e = {0};
	assert_int_equal(secret_setup(&e), QB_OK);
	if (http_start(s, &h, &e) != QB_OK)
		fail_msg("%s: %s", e.where, e.what);
	fake.calls = 0;
	fake.n_nonces = 0;
	fake.answer = QB_OK;
	fake.until_gps_ns = 0;
	return h;
}

/* ---- the raw client ---- */

static inline int connect_to(const struct http *h)
{
	struct sockaddr_in a = {.sin_family = AF_INET, .sin_port = htons((uint16_t)http_port(h))};
	struct timeval limit = {10, 0};
	int fd = socket(AF_INET, SOCK_STREAM, 0);
	a.sin_addr.s_addr = htonl(INADDR_LOOPBACK);
	assert_true(fd >= 0 && connect(fd, (struct sockaddr *)&a, sizeof a) == 0);
	assert_int_equal(setsockopt(fd, SOL_SOCKET, SO_RCVTIMEO, &limit, sizeof limit), 0);
	return fd;
}

static inline void send_all(int fd, const void *p, size_t n)
{
	for (const char *at = p; n > 0;) {
		ssize_t done = send(fd, at, n, MSG_NOSIGNAL);
		if (done <= 0)
			return; /* the service may well have answered and closed */
		at += done;
		n -= (size_t)done;
	}
}

/* Everything until the service closes. */
static inline void read_all(int fd, struct buf *out)
{
	char part[4096];
	buf_clear(out);
	for (ssize_t n; (n = recv(fd, part, sizeof part, 0)) > 0;)
		buf_put(out, part, (size_t)n);
	buf_u8(out, 0);
}

static inline int status_of(const struct buf *answer)
{
	return answer->len > 12 && memcmp(answer->data, "HTTP/1.1 ", 9) == 0 ? atoi((const char *)answer->data + 9) : 0;
}

static inline int talk(const struct http *h, const void *p, size_t n, struct buf *answer)
{
	int fd = connect_to(h);
	send_all(fd, p, n);
	read_all(fd, answer);
	(void)close(fd);
	return status_of(answer);
}

/* Sends a text in which every '@' that begins "@HOST" is the address of the service. */
static inline int talk_text(const struct http *h, const char *fmt, struct buf *answer, ...) QB_PRINTF(2, 4);
static inline int talk_text(const struct http *h, const char *fmt, struct buf *answer, ...)
{
	char text[8192];
	va_list ap;
	va_start(ap, answer);
	int n = vsnprintf(text, sizeof text, fmt, ap);
	va_end(ap);
	assert_true(n > 0 && (size_t)n < sizeof text);
	return talk(h, text, (size_t)n, answer);
}

/* What a test may spoil between signing and sending. */
struct spoiled {
	const char *query, *body, *type, *path, *method, *host, *digest;
	int64_t created_off_s;
	int nonce; /* 0: a fresh one */
};

static inline void signed_text(const struct http *h, int party, const char *method, const char *path, const char *query,
                               const char *body, const struct spoiled *s, struct buf *out)
{
	static int counter = 1000;
	static const struct spoiled nothing;
	char host[40];
	uint8_t nonce[16] = {0};
	struct view_party p;
	struct wire_signature_headers headers;
	struct secret *seed = seed_of(party);
	if (s == NULL)
		s = &nothing;
	int number = s->nonce != 0 ? s->nonce : counter++;
	memcpy(nonce, &number, sizeof number);
	party_of(party, &p);
	(void)snprintf(host, sizeof host, "127.0.0.1:%d", http_port(h));
	struct wire_request r = {
	    method, host, path, query, body != NULL ? "application/json" : NULL, body, body != NULL ? strlen(body) : 0};
	wire_request_sign(&r, seed, p.key_id, FAKE_NOW_UNIX + s->created_off_s, nonce, &headers);
	query = s->query != NULL ? s->query : query;
	body = s->body != NULL ? s->body : body;
	buf_printf(out, "%s %s%s%s HTTP/1.1\r\nHost: %s\r\nConnection: close\r\n",
	           s->method != NULL ? s->method : method, s->path != NULL ? s->path : path,
	           query[0] != '\0' ? "?" : "", query, s->host != NULL ? s->host : host);
	buf_printf(out, "Signature-Input: %s\r\nSignature: %s\r\n", headers.signature_input, headers.signature);
	if (headers.content_digest != NULL)
		buf_printf(out, "Content-Digest: %s\r\n", s->digest != NULL ? s->digest : headers.content_digest);
	if (body != NULL)
		buf_printf(out, "Content-Type: %s\r\nContent-Length: %zu\r\n",
		           s->type != NULL ? s->type : "application/json", strlen(body));
	buf_printf(out, "\r\n%s", body != NULL ? body : "");
	wire_signature_headers_free(&headers);
	secret_free(&seed);
}

static inline int talk_signed(const struct http *h, int party, const char *method, const char *path, const char *query,
                              const char *body, const struct spoiled *s, struct buf *answer)
{
	struct buf b = {0};
	signed_text(h, party, method, path, query, body, s, &b);
	int status = talk(h, b.data, b.len, answer);
	buf_free(&b);
	return status;
}

static inline const char *text_of(const struct buf *answer)
{
	return (const char *)answer->data;
}

static inline void assert_problem(const struct buf *answer, const char *word)
{
	char type[80];
	(void)snprintf(type, sizeof type, "\"type\":\"urn:quietbell:problem:%s\"", word);
	if (strstr(text_of(answer), "\r\nContent-Type: application/problem+json\r\n") == NULL ||
	    strstr(text_of(answer), type) == NULL || strstr(text_of(answer), "\r\nCache-Control: no-store\r\n") == NULL)
		fail_msg("no problem document '%s' in: %s", word, text_of(answer));
}

#endif
