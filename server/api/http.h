/*
 * The HTTP service: listening, limits and deadlines around libmicrohttpd, and its end. What happens to one request is
 * in exchange.c; what it means is in the ops room.
 */
#ifndef QB_API_HTTP_H
#define QB_API_HTTP_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/base/clock.h"
#include "server/base/log.h"
#include "server/ops/ops.h"

struct http;

struct http_settings {
	struct ops *ops;
	const struct log *log;
	struct clock_source clock; /* the system clock (or a test's): signatures are checked against it */
	const char *host;          /* numeric address, "localhost", or "[address]" for IPv6 */
	int port;                  /* 0: any free port */
	/* host[:port] names that clients may address, NULL-ended; NULL: the loopback names with the port */
	const char *const *authorities;
	const char *tls_certificate, *tls_key; /* PEM text, or both NULL */
	int connections;                       /* at once, 2..4096 */
	int event_streams;                     /* at once, 1..connections / 2 */
	size_t body_bytes;                     /* no body is larger, whatever its route allows */
	size_t body_memory_bytes;              /* for all bodies being received together */
	int request_ms;                        /* a whole request, from its first byte to its last, takes no longer */
	int answer_ms;                         /* an answer takes no longer to be fetched */
};

/*
 * Starts to listen and to answer.
 *
 * Errors:   QB_IO      the address can't be used
 *           QB_FORMAT  certificate or key can't be used
 * Owns:     the caller ends it with http_stop; the settings' strings, ops and log must live until then
 */
enum qb_status http_start(const struct http_settings *settings, struct http **out, struct qb_error *e) QB_MUST_USE;
int http_port(const struct http *h);
/* Takes no new connection, ends event streams, and waits at most limit_ms for the requests at work. */
void http_drain(struct http *h, int limit_ms);
void http_stop(struct http **h);

#endif
