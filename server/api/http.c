/*
 * libmicrohttpd around the exchanges: epoll with two threads, the listening socket, the connection list with its
 * deadlines (the library only knows a limit of inactivity, so that a trickle of bytes would hold a connection for
 * ever).
 */
#include "server/api/http.h"

#include <arpa/inet.h>
#include <errno.h>
#include <netdb.h>
#include <netinet/in.h>
#include <stdio.h>
#include <string.h>
#include <sys/socket.h>
#include <time.h>
#include <unistd.h>

#include "server/api/internal.h"
#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"

#define THREADS      2
#define HEADER_BYTES ((size_t)64 * 1024)
#define BACKLOG      256
#define SWEEP_MS     1000

int64_t http_monotonic_ms(void)
{
	struct timespec t;
	CHECK(clock_gettime(CLOCK_MONOTONIC, &t) == 0);
	return (int64_t)t.tv_sec * 1000 + t.tv_nsec / 1000000;
}

static void on_connection(void *cls, struct MHD_Connection *c, void **state, enum MHD_ConnectionNotificationCode code)
{
	struct http *h = cls;
	struct link *l = *state;
	if (code == MHD_CONNECTION_NOTIFY_STARTED) {
		const union MHD_ConnectionInfo *info = MHD_get_connection_info(c, MHD_CONNECTION_INFO_CONNECTION_FD);
		l = QB_NEW(struct link);
		l->fd = info != NULL ? info->connect_fd : -1;
		atomic_store(&l->deadline_ms, http_monotonic_ms() + h->settings.request_ms);
		pthread_mutex_lock(&h->lock);
		l->next = h->links;
		h->links = l;
		h->n_links++;
		pthread_mutex_unlock(&h->lock);
		*state = l;
		return;
	}
	if (l == NULL)
		return;
	/* The socket is closed after this call, so that the sweeper never sees a descriptor that means another. */
	pthread_mutex_lock(&h->lock);
	for (struct link **p = &h->links; *p != NULL; p = &(*p)->next) {
		if (*p == l) {
			*p = l->next;
			h->n_links--;
			break;
		}
	}
	pthread_mutex_unlock(&h->lock);
	qb_free(l);
	*state = NULL;
}

static void *sweep(void *state)
{
	struct http *h = state;
	int step = h->settings.request_ms / 4 < SWEEP_MS ? h->settings.request_ms / 4 + 1 : SWEEP_MS;
	pthread_mutex_lock(&h->lock);
	while (h->sweeping) {
		struct timespec until;
		CHECK(clock_gettime(CLOCK_MONOTONIC, &until) == 0);
		int64_t ns = until.tv_nsec + (int64_t)step * 1000000;
		until.tv_sec += (time_t)(ns / NS_PER_S);
		until.tv_nsec = (long)(ns % NS_PER_S);
		(void)pthread_cond_timedwait(&h->end, &h->lock, &until);
		int64_t now = http_monotonic_ms();
		for (struct link *l = h->links; l != NULL; l = l->next) {
			if (now > atomic_load(&l->deadline_ms) && l->fd >= 0)
				(void)shutdown(l->fd, SHUT_RDWR);
		}
	}
	pthread_mutex_unlock(&h->lock);
	return NULL;
}

static void *on_uri(void *cls, const char *uri, struct MHD_Connection *c)
{
	return exchange_new(cls, c, uri);
}

static enum MHD_Result on_access(void *cls, struct MHD_Connection *c, const char *url, const char *method,
                                 const char *version, const char *upload, size_t *upload_n, void **state)
{
	(void)cls;
	(void)c;
	(void)url; /* decoded by the library; the raw one is what was signed */
	(void)version;
	return exchange_step(*state, method, upload, upload_n);
}

static void on_completed(void *cls, struct MHD_Connection *c, void **state, enum MHD_RequestTerminationCode code)
{
	(void)cls;
	(void)c;
	if (*state != NULL)
		exchange_done(*state, code == MHD_REQUEST_TERMINATED_COMPLETED_OK);
	*state = NULL;
}

static bool address_of(const char *host, int port, struct sockaddr_storage *out, socklen_t *n)
{
	char bare[80], service[8];
	size_t len = strlen(host);
	struct addrinfo hints = {.ai_flags = AI_NUMERICHOST | AI_NUMERICSERV, .ai_socktype = SOCK_STREAM},
	                *found = NULL;
	if (strcmp(host, "localhost") == 0)
		host = "127.0.0.1";
	if (len > 2 && host[0] == '[' && host[len - 1] == ']') {
		(void)snprintf(bare, sizeof bare, "%.*s", (int)(len - 2 < 70 ? len - 2 : 70), host + 1);
		host = bare;
	}
	(void)snprintf(service, sizeof service, "%d", port);
	if (getaddrinfo(host, service, &hints, &found) != 0)
		return false;
	memcpy(out, found->ai_addr, found->ai_addrlen);
	*n = found->ai_addrlen;
	freeaddrinfo(found);
	return true;
}

static enum qb_status listen_on(struct http *h, struct qb_error *e)
{
	struct sockaddr_storage a = {0};
	socklen_t n;
	char where[120];
	int yes = 1;
	(void)snprintf(where, sizeof where, "listen %s:%d", h->settings.host, h->settings.port);
	if (!address_of(h->settings.host, h->settings.port, &a, &n))
		return qb_fail(e, QB_IO, where, "give a numeric address, 127.0.0.1:8787", "is not an address");
	h->listen_fd = socket(a.ss_family, SOCK_STREAM | SOCK_CLOEXEC | SOCK_NONBLOCK, 0);
	if (h->listen_fd < 0 || setsockopt(h->listen_fd, SOL_SOCKET, SO_REUSEADDR, &yes, sizeof yes) != 0 ||
	    bind(h->listen_fd, (struct sockaddr *)&a, n) != 0 || listen(h->listen_fd, BACKLOG) != 0)
		return qb_fail(e, QB_IO, where, "choose a free address and port", "can't listen: %s", strerror(errno));
	n = sizeof a;
	CHECK(getsockname(h->listen_fd, (struct sockaddr *)&a, &n) == 0);
	h->port = ntohs(a.ss_family == AF_INET6 ? ((struct sockaddr_in6 *)&a)->sin6_port
	                                        : ((struct sockaddr_in *)&a)->sin_port);
	return QB_OK;
}

static void set_authorities(struct http *h)
{
	static const char *const loopback[] = {"127.0.0.1", "localhost", "[::1]"};
	const char *const *given = h->settings.authorities;
	for (int i = 0; given != NULL && given[i] != NULL && h->n_authorities < HTTP_AUTHORITIES; i++)
		h->authority[h->n_authorities++] = qb_strdup(given[i]);
	for (int i = 0; given == NULL && i < 3; i++)
		h->authority[h->n_authorities++] = text_printf("%s:%d", loopback[i], h->port);
}

static enum qb_status start_daemon(struct http *h, struct qb_error *e)
{
	const struct http_settings *s = &h->settings;
	bool tls = s->tls_certificate != NULL;
	struct MHD_OptionItem tls_options[] = {
	    {MHD_OPTION_HTTPS_MEM_CERT, 0, (void *)(uintptr_t)s->tls_certificate},
	    {MHD_OPTION_HTTPS_MEM_KEY, 0, (void *)(uintptr_t)s->tls_key},
	    {MHD_OPTION_HTTPS_PRIORITIES, 0, (void *)(uintptr_t) "SECURE128:-VERS-ALL:+VERS-TLS1.3:+VERS-TLS1.2"},
	    {MHD_OPTION_END, 0, NULL}};
	struct MHD_OptionItem none[] = {{MHD_OPTION_END, 0, NULL}};
	unsigned flags = MHD_USE_EPOLL_INTERNAL_THREAD | MHD_USE_SUSPEND_RESUME | (tls ? MHD_USE_TLS : 0u);
	h->daemon = MHD_start_daemon(flags, 0, NULL, NULL, on_access, h, MHD_OPTION_LISTEN_SOCKET, h->listen_fd,
	                             MHD_OPTION_THREAD_POOL_SIZE, (unsigned)THREADS, MHD_OPTION_CONNECTION_LIMIT,
	                             (unsigned)s->connections, MHD_OPTION_CONNECTION_TIMEOUT,
	                             (unsigned)(s->request_ms / 1000 + 1), MHD_OPTION_CONNECTION_MEMORY_LIMIT,
	                             HEADER_BYTES, MHD_OPTION_STRICT_FOR_CLIENT, 1, MHD_OPTION_URI_LOG_CALLBACK, on_uri,
	                             h, MHD_OPTION_NOTIFY_COMPLETED, on_completed, h, MHD_OPTION_NOTIFY_CONNECTION,
	                             on_connection, h, MHD_OPTION_ARRAY, tls ? tls_options : none, MHD_OPTION_END);
	if (h->daemon == NULL && tls)
		return qb_fail(e, QB_FORMAT, "tls", "give a PEM certificate chain and its key",
		               "the certificate can't be used");
	if (h->daemon == NULL)
		return qb_fail(e, QB_IO, "listen", NULL, "the HTTP service can't be started");
	return QB_OK;
}

enum qb_status http_start(const struct http_settings *settings, struct http **out, struct qb_error *e)
{
	struct http *h = QB_NEW(struct http);
	pthread_condattr_t monotonic;
	*out = NULL;
	h->settings = *settings;
	h->listen_fd = -1;
	h->metrics.started_unix_s = (int64_t)time(NULL);
	CHECK(pthread_mutex_init(&h->lock, NULL) == 0);
	CHECK(pthread_condattr_init(&monotonic) == 0 && pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC) == 0);
	CHECK(pthread_cond_init(&h->end, &monotonic) == 0);
	pthread_condattr_destroy(&monotonic);
	enum qb_status st = listen_on(h, e);
	if (st == QB_OK) {
		set_authorities(h);
		h->events = events_start(settings->ops, settings->event_streams);
		h->sweeping = true;
		CHECK(pthread_create(&h->sweeper, NULL, sweep, h) == 0);
		st = start_daemon(h, e);
	}
	if (st != QB_OK)
		http_stop(&h);
	*out = h;
	return st;
}

int http_port(const struct http *h)
{
	return h->port;
}

void http_drain(struct http *h, int limit_ms)
{
	int64_t until = http_monotonic_ms() + limit_ms;
	atomic_store(&h->draining, true);
	if (MHD_quiesce_daemon(h->daemon) != MHD_INVALID_SOCKET) {
		(void)close(h->listen_fd);
		h->listen_fd = -1;
	}
	events_end(h->events);
	while (atomic_load(&h->at_work) > 0 && http_monotonic_ms() < until) {
		struct timespec pause = {0, 5000000};
		(void)nanosleep(&pause, NULL);
	}
}

void http_stop(struct http **hp)
{
	struct http *h = *hp;
	if (h == NULL)
		return;
	if (h->events != NULL)
		events_end(h->events);
	if (h->sweeping) {
		pthread_mutex_lock(&h->lock);
		h->sweeping = false;
		pthread_cond_signal(&h->end);
		pthread_mutex_unlock(&h->lock);
		(void)pthread_join(h->sweeper, NULL);
	}
	/* The library closes the listening socket, too, unless it gave it back before. */
	if (h->daemon != NULL)
		MHD_stop_daemon(h->daemon);
	else if (h->listen_fd >= 0)
		(void)close(h->listen_fd);
	events_free(&h->events);
	for (int i = 0; i < h->n_authorities; i++)
		qb_free(h->authority[i]);
	pthread_cond_destroy(&h->end);
	pthread_mutex_destroy(&h->lock);
	qb_free(h);
	*hp = NULL;
}
