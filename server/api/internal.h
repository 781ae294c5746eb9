/* What http.c and exchange.c share: the running service, its connections, and one request with its answer. */
#ifndef QB_API_INTERNAL_H
#define QB_API_INTERNAL_H

#include <microhttpd.h>
#include <pthread.h>
#include <stdatomic.h>

#include "server/api/events.h"
#include "server/api/http.h"
#include "server/api/metrics.h"
#include "server/api/problem.h"

#define HTTP_AUTHORITIES 16

/* One open connection; a sweeper ends it when its deadline has passed. */
struct link {
	int fd;
	atomic_llong deadline_ms; /* monotonic */
	struct link *next;
};

struct http {
	struct http_settings settings;
	struct MHD_Daemon *daemon;
	int listen_fd, port;
	char *authority[HTTP_AUTHORITIES]; /* owned; lower case */
	int n_authorities;
	struct events *events;
	struct metrics metrics;
	pthread_mutex_t lock; /* links, sweeping */
	pthread_cond_t end;
	struct link *links;
	int n_links;
	pthread_t sweeper;
	bool sweeping;
	atomic_bool draining;
	atomic_int at_work; /* requests between their first line and their last byte */
	atomic_size_t body_memory;
};

int64_t http_monotonic_ms(void);

/* The headers that mean something here; each may stand once. */
enum header { H_HOST, H_LENGTH, H_CODING, H_TYPE, H_DIGEST, H_INPUT, H_SIGNATURE, H_COUNT };

/* One request, from its request line to its completion. */
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

struct exchange *exchange_new(struct http *h, struct MHD_Connection *connection, const char *raw_uri);
/* libmicrohttpd's access handler. */
enum MHD_Result exchange_step(struct exchange *x, const char *method, const char *upload, size_t *upload_n);
/* From now on the connection lives this long; INT64_MAX: for ever. */
void exchange_deadline(struct exchange *x, int64_t ms);
/* Everything after the last byte of the request: who, may he, do it, answer. */
enum MHD_Result answer_request(struct exchange *x);
/* Sends x->problem. */
enum MHD_Result answer_problem(struct exchange *x);
bool answer_is_probe(const struct wire_route *r);
/* Logs, counts, gives everything back. */
void exchange_done(struct exchange *x, bool completed);

#endif
