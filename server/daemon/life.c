/* Starting and stopping in order: signals, ops, HTTP, ticking; then the other way round. */
#include "server/daemon/life.h"

#include <errno.h>
#include <fcntl.h>
#include <pthread.h>
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

#include "server/api/http.h"
#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/daemon/child.h"
#include "server/ops/ops.h"

#define PEM_MAX_BYTES ((size_t)256 * 1024)

struct life {
	const struct config *config;
	struct log log;
	struct ops *ops;
	struct http *http;
	struct buf certificate, key;
	pthread_t ticker;
	pthread_mutex_t lock;
	pthread_cond_t wake;
	bool ticking;
};

static void *tick(void *state)
{
	struct life *l = state;
	pthread_mutex_lock(&l->lock);
	while (l->ticking) {
		struct timespec until;
		CHECK(clock_gettime(CLOCK_MONOTONIC, &until) == 0);
		until.tv_sec++;
		if (pthread_cond_timedwait(&l->wake, &l->lock, &until) != ETIMEDOUT)
			continue;
		pthread_mutex_unlock(&l->lock);
		ops_tick(l->ops);
		pthread_mutex_lock(&l->lock);
	}
	pthread_mutex_unlock(&l->lock);
	return NULL;
}

static void start_ticking(struct life *l)
{
	pthread_condattr_t monotonic;
	CHECK(pthread_mutex_init(&l->lock, NULL) == 0);
	CHECK(pthread_condattr_init(&monotonic) == 0 && pthread_condattr_setclock(&monotonic, CLOCK_MONOTONIC) == 0);
	CHECK(pthread_cond_init(&l->wake, &monotonic) == 0);
	pthread_condattr_destroy(&monotonic);
	l->ticking = true;
	CHECK(pthread_create(&l->ticker, NULL, tick, l) == 0);
}

static void stop_ticking(struct life *l)
{
	if (!l->ticking)
		return;
	pthread_mutex_lock(&l->lock);
	l->ticking = false;
	pthread_cond_signal(&l->wake);
	pthread_mutex_unlock(&l->lock);
	(void)pthread_join(l->ticker, NULL);
	pthread_cond_destroy(&l->wake);
	pthread_mutex_destroy(&l->lock);
}

static enum qb_status start_ops(struct life *l, struct qb_error *e)
{
	struct ops_settings s = {
	    .data_dir = l->config->data,
	    .rehearsal_clock = l->config->clock == CONFIG_CLOCK_REHEARSAL,
	    .rehearsal_seed = l->config->rehearsal_seed,
	    .system = clock_system(),
	    .spawner = {child_spawn, &l->log},
	    .log = &l->log,
	};
	return ops_open(&s, &l->ops, e);
}

static enum qb_status start_http(struct life *l, struct qb_error *e)
{
	const struct config *c = l->config;
	enum qb_status st = QB_OK;
	struct http_settings s = {
	    .ops = l->ops,
	    .log = &l->log,
	    .clock = clock_system(),
	    .host = c->host,
	    .port = c->port,
	    .authorities = c->authority[0] != NULL ? (const char *const *)c->authority : NULL,
	    .connections = (int)c->connections,
	    .event_streams = (int)c->event_streams,
	    .body_bytes = (size_t)c->body_bytes,
	    .body_memory_bytes = (size_t)c->body_memory_bytes,
	    .request_ms = (int)(c->request_ns / 1000000),
	    .answer_ms = (int)(c->answer_ns / 1000000),
	};
	if (c->tls_certificate != NULL) {
		st = file_read(c->tls_certificate, PEM_MAX_BYTES, &l->certificate, e);
		if (st == QB_OK)
			st = file_read(c->tls_key, PEM_MAX_BYTES, &l->key, e);
		s.tls_certificate = (const char *)l->certificate.data;
		s.tls_key = (const char *)l->key.data;
		if (st == QB_OK && (l->certificate.len == 0 || l->key.len == 0))
			st = qb_fail(e, QB_FORMAT, "tls", "give PEM files", "the certificate or its key is empty");
	}
	return st == QB_OK ? http_start(&s, &l->http, e) : st;
}

/* The log says it, and a file says it for scripts that asked for any free port. */
static enum qb_status announce(struct life *l, struct qb_error *e)
{
	char *path = text_printf("%s/port", l->config->data);
	char *port = text_printf("%d\n", http_port(l->http));
	char *listen = text_printf("%s:%d", l->config->host, http_port(l->http));
	enum qb_status st = file_write(path, 0600, port, strlen(port), e);
	if (st == QB_OK)
		log_event(&l->log, LOG_INFO_, "ready", "listen", listen, "clock",
		          l->config->clock == CONFIG_CLOCK_REHEARSAL ? "rehearsal" : "system", NULL);
	qb_free(path);
	qb_free(port);
	qb_free(listen);
	return st;
}

static void reload(struct life *l, const char *config_path)
{
	struct config fresh;
	struct qb_error e = {0};
	char line[900];
	if (config_read(config_path, &fresh, &e) == QB_OK) {
		/* The event is logged under the more talkative of the two levels, or a change to `error` would go
		 * unsaid. */
		enum log_level before = l->log.least, after = (enum log_level)fresh.log_level;
		__atomic_store_n(&l->log.least, after < before ? after : before, __ATOMIC_RELAXED);
		log_event(&l->log, LOG_INFO_, "reloaded", NULL);
		__atomic_store_n(&l->log.least, after, __ATOMIC_RELAXED);
	} else {
		log_event(&l->log, LOG_ERROR_, "reload-failed", "reason", qb_error_line(&e, line, sizeof line), NULL);
	}
	config_free(&fresh);
}

static void serve(struct life *l, const char *config_path, const sigset_t *signals)
{
	for (int got = 0; got != SIGTERM && got != SIGINT;) {
		if (sigwait(signals, &got) == 0 && got == SIGHUP)
			reload(l, config_path);
	}
	log_event(&l->log, LOG_INFO_, "draining", NULL);
	http_drain(l->http, (int)(l->config->drain_ns / 1000000));
}

static void remove_port_file(const struct config *c)
{
	char *path = text_printf("%s/port", c->data);
	(void)unlink(path);
	qb_free(path);
}

enum qb_status life_run(const struct config *config, const char *config_path, struct qb_error *e)
{
	struct life l = {.config = config, .log = {2, (enum log_level)config->log_level, clock_system()}};
	sigset_t signals;
	(void)sigemptyset(&signals);
	(void)sigaddset(&signals, SIGTERM);
	(void)sigaddset(&signals, SIGINT);
	(void)sigaddset(&signals, SIGHUP);
	CHECK(pthread_sigmask(SIG_BLOCK, &signals, NULL) == 0);
	CHECK(signal(SIGPIPE, SIG_IGN) != SIG_ERR);
	remove_port_file(config);
	enum qb_status st = start_ops(&l, e);
	if (st == QB_OK)
		st = start_http(&l, e);
	if (st == QB_OK) {
		start_ticking(&l);
		st = announce(&l, e);
	}
	if (st == QB_OK)
		serve(&l, config_path, &signals);
	/* Requests end first, then the clockwork, then the store. */
	http_stop(&l.http);
	stop_ticking(&l);
	ops_close(&l.ops);
	remove_port_file(config);
	buf_free(&l.certificate);
	buf_wipe(&l.key);
	if (st == QB_OK)
		log_event(&l.log, LOG_INFO_, "stopped", NULL);
	return st;
}
