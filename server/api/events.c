/* Event streams by suspending and resuming connections: an idle stream costs no thread. */
#include "server/api/events.h"

#include <inttypes.h>
#include <pthread.h>
#include <stdio.h>
#include <string.h>
#include <time.h>

#include "server/base/alloc.h"
#include "server/base/check.h"

#define WAIT_MS      1000
#define KEEP_ALIVE_S 10 /* also when nothing changes, so that a client which left is noticed */

struct stream {
	struct events *events;
	struct MHD_Connection *connection;
	bool suspended;
	uint64_t seen; /* generation of the news that was written last */
	uint64_t seen_size;
	char pending[160];
	size_t at, n; /* pending[at..n) is to be sent */
	struct stream *next;
};

struct events {
	struct ops *ops;
	int most, count;
	pthread_mutex_t lock;
	pthread_t thread;
	bool ending, joined;
	uint64_t generation, size;
	int64_t now_gps_ns;
	struct stream *streams;
};

static void wake_all(struct events *ev)
{
	for (struct stream *s = ev->streams; s != NULL; s = s->next) {
		if (s->suspended) {
			s->suspended = false;
			MHD_resume_connection(s->connection);
		}
	}
}

static int64_t monotonic_ms(void)
{
	struct timespec t;
	CHECK(clock_gettime(CLOCK_MONOTONIC, &t) == 0);
	return (int64_t)t.tv_sec * 1000 + t.tv_nsec / 1000000;
}

static void *watch(void *state)
{
	struct events *ev = state;
	uint64_t size = ev->size;
	int64_t now = ev->now_gps_ns, told = monotonic_ms();
	for (bool ending = false; !ending;) {
		int64_t before = monotonic_ms();
		ops_wait_change(ev->ops, &size, &now, WAIT_MS);
		int64_t after = monotonic_ms();
		pthread_mutex_lock(&ev->lock);
		/* Returning early means a change; a rehearsal clock may have been moved without a new entry. */
		if (size != ev->size || after - before < WAIT_MS - 50 || after - told >= KEEP_ALIVE_S * 1000) {
			ev->generation++;
			told = after;
			wake_all(ev);
		}
		ev->size = size;
		ev->now_gps_ns = now;
		ending = ev->ending;
		pthread_mutex_unlock(&ev->lock);
		if (!ending && after == before) {
			/* Never spin, even if the source of news returns at once. */
			struct timespec pause = {0, 10000000};
			(void)nanosleep(&pause, NULL);
		}
	}
	return NULL;
}

struct events *events_start(struct ops *ops, int most)
{
	struct events *ev = QB_NEW(struct events);
	ev->ops = ops;
	ev->most = most;
	ev->generation = 1;
	ops_wait_change(ops, &ev->size, &ev->now_gps_ns, 0);
	CHECK(pthread_mutex_init(&ev->lock, NULL) == 0);
	CHECK(pthread_create(&ev->thread, NULL, watch, ev) == 0);
	return ev;
}

void events_end(struct events *ev)
{
	pthread_mutex_lock(&ev->lock);
	ev->ending = true;
	wake_all(ev);
	pthread_mutex_unlock(&ev->lock);
	if (!ev->joined)
		(void)pthread_join(ev->thread, NULL);
	ev->joined = true;
}

void events_free(struct events **evp)
{
	struct events *ev = *evp;
	if (ev == NULL)
		return;
	events_end(ev);
	CHECK(ev->streams == NULL);
	pthread_mutex_destroy(&ev->lock);
	qb_free(ev);
	*evp = NULL;
}

/* Writes the news that this stream has not seen; false when there are none. */
static bool fill(struct stream *s)
{
	struct events *ev = s->events;
	char gps[32];
	int n = 0;
	if (s->seen == ev->generation)
		return false;
	if (s->seen == 0 || s->seen_size != ev->size)
		n = snprintf(s->pending, sizeof s->pending, "event: ledger\ndata: {\"size\":%" PRIu64 "}\n\n",
		             ev->size);
	n += snprintf(s->pending + n, sizeof s->pending - (size_t)n, "event: clock\ndata: {\"now_gps\":\"%s\"}\n\n",
	              clock_gps_text(ev->now_gps_ns, gps, sizeof gps));
	CHECK(n > 0 && (size_t)n < sizeof s->pending);
	s->at = 0;
	s->n = (size_t)n;
	s->seen = ev->generation;
	s->seen_size = ev->size;
	return true;
}

static ssize_t read_stream(void *state, uint64_t pos, char *out, size_t max)
{
	struct stream *s = state;
	ssize_t given = 0;
	(void)pos;
	pthread_mutex_lock(&s->events->lock);
	if (s->at == s->n && s->events->ending) {
		given = MHD_CONTENT_READER_END_OF_STREAM;
	} else if (s->at == s->n && !fill(s)) {
		s->suspended = true;
		MHD_suspend_connection(s->connection);
	} else {
		size_t n = s->n - s->at < max ? s->n - s->at : max;
		memcpy(out, s->pending + s->at, n);
		s->at += n;
		given = (ssize_t)n;
	}
	pthread_mutex_unlock(&s->events->lock);
	return given;
}

static void free_stream(void *state)
{
	struct stream *s = state;
	struct events *ev = s->events;
	pthread_mutex_lock(&ev->lock);
	for (struct stream **p = &ev->streams; *p != NULL; p = &(*p)->next) {
		if (*p == s) {
			*p = s->next;
			ev->count--;
			break;
		}
	}
	pthread_mutex_unlock(&ev->lock);
	qb_free(s);
}

struct MHD_Response *events_stream(struct events *ev, struct MHD_Connection *connection)
{
	struct stream *s = NULL;
	pthread_mutex_lock(&ev->lock);
	if (!ev->ending && ev->count < ev->most) {
		s = QB_NEW(struct stream);
		s->events = ev;
		s->connection = connection;
		s->next = ev->streams;
		ev->streams = s;
		ev->count++;
	}
	pthread_mutex_unlock(&ev->lock);
	if (s == NULL)
		return NULL;
	struct MHD_Response *r = MHD_create_response_from_callback(MHD_SIZE_UNKNOWN, 1024, read_stream, s, free_stream);
	if (r == NULL)
		free_stream(s);
	return r;
}

int events_count(struct events *ev)
{
	pthread_mutex_lock(&ev->lock);
	int n = ev->count;
	pthread_mutex_unlock(&ev->lock);
	return n;
}
