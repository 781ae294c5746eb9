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

/* One request, from its request line to its completion. */
struct exchange;
struct exchange *exchange_new(struct http *h, struct MHD_Connection *connection, const char *raw_uri);
/* libmicrohttpd's access handler. */
enum MHD_Result exchange_step(struct exchange *x, const char *method, const char *upload, size_t *upload_n);
/* Logs, counts, gives everything back. */
void exchange_done(struct exchange *x, bool completed);

#endif
