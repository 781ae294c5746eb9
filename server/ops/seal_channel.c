/* Pipes and the post box. */
#include "server/ops/seal_channel.h"

#include <pthread.h>
#include <signal.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"

#define WAIT_S        (24 * 3600)
#define WAITING_BYTES ((size_t)256 << 20)
#define COLLECT_BYTES ((size_t)8 << 20)

struct message {
	enum sealer_message type;
	struct buf body;
};
struct queue {
	struct message *message; /* owned; those taken are empty */
	size_t n, cap, taken, bytes;
};

struct seal_channel {
	bool remote;
	int to_fd, from_fd;
	pid_t pid;
	pthread_mutex_t lock;
	pthread_cond_t changed;
	bool broken;
	struct queue to, from; /* the sealer */
};

struct seal_channel *seal_channel_local(int to_fd, int from_fd, pid_t pid)
{
	struct seal_channel *ch = seal_channel_remote();
	ch->remote = false;
	ch->to_fd = to_fd;
	ch->from_fd = from_fd;
	ch->pid = pid;
	return ch;
}

struct seal_channel *seal_channel_remote(void)
{
	struct seal_channel *ch = QB_NEW(struct seal_channel);
	ch->remote = true;
	ch->to_fd = ch->from_fd = -1;
	CHECK(pthread_mutex_init(&ch->lock, NULL) == 0 && pthread_cond_init(&ch->changed, NULL) == 0);
	return ch;
}

bool seal_channel_is_remote(const struct seal_channel *ch)
{
	return ch->remote;
}

static void push(struct queue *q, enum sealer_message type, struct buf *body)
{
	if (q->n == q->cap) {
		q->cap = q->cap > 0 ? 2 * q->cap : 64;
		q->message = qb_realloc(q->message, q->cap, sizeof *q->message);
	}
	q->message[q->n++] = (struct message){type, *body};
	q->bytes += body->len;
	*body = (struct buf){0};
}

bool seal_channel_send(struct seal_channel *ch, enum sealer_message type, const void *body, size_t n)
{
	struct buf b = {0};
	if (!ch->remote)
		return sealer_write(ch->to_fd, type, body, n);
	buf_put(&b, body, n);
	pthread_mutex_lock(&ch->lock);
	bool good = !ch->broken;
	if (good)
		push(&ch->to, type, &b);
	pthread_mutex_unlock(&ch->lock);
	buf_free(&b);
	return good;
}

bool seal_channel_receive(struct seal_channel *ch, enum sealer_message *type, struct buf *body)
{
	struct timespec until;
	if (!ch->remote)
		return sealer_read(ch->from_fd, type, body);
	CHECK(clock_gettime(CLOCK_REALTIME, &until) == 0);
	until.tv_sec += WAIT_S;
	pthread_mutex_lock(&ch->lock);
	struct queue *q = &ch->from;
	while (!ch->broken && q->taken == q->n) {
		if (pthread_cond_timedwait(&ch->changed, &ch->lock, &until) != 0)
			break;
	}
	bool good = !ch->broken && q->taken < q->n;
	if (good) {
		struct message *m = &q->message[q->taken++];
		q->bytes -= m->body.len;
		*type = m->type;
		buf_free(body);
		*body = m->body;
		m->body = (struct buf){0};
	}
	pthread_mutex_unlock(&ch->lock);
	return good;
}

void seal_channel_break(struct seal_channel *ch)
{
	pthread_mutex_lock(&ch->lock);
	if (!ch->remote && !ch->broken)
		(void)kill(ch->pid, SIGKILL);
	ch->broken = true;
	pthread_cond_broadcast(&ch->changed);
	pthread_mutex_unlock(&ch->lock);
}

static void queue_free(struct queue *q)
{
	for (size_t i = 0; i < q->n; i++)
		buf_free(&q->message[i].body);
	qb_free(q->message);
}

void seal_channel_close(struct seal_channel **chp)
{
	struct seal_channel *ch = *chp;
	if (ch == NULL)
		return;
	if (!ch->remote) {
		close(ch->to_fd);
		close(ch->from_fd);
		(void)waitpid(ch->pid, NULL, 0);
	}
	queue_free(&ch->to);
	queue_free(&ch->from);
	pthread_cond_destroy(&ch->changed);
	pthread_mutex_destroy(&ch->lock);
	qb_free(ch);
	*chp = NULL;
}

void seal_channel_collect(struct seal_channel *ch, uint64_t from, json_t *out, bool *closed)
{
	size_t bytes = 0;
	pthread_mutex_lock(&ch->lock);
	*closed = ch->broken;
	for (uint64_t i = from; i < ch->to.n && bytes < COLLECT_BYTES; i++) {
		const struct message *m = &ch->to.message[i];
		json_t *j = json_object();
		char *text = base64_encode(m->body.data, m->body.len);
		json_object_set_new(j, "type", json_integer((json_int_t)m->type));
		json_object_set_new(j, "body", json_string(text));
		json_array_append_new(out, j);
		bytes += m->body.len;
		qb_free(text);
	}
	pthread_mutex_unlock(&ch->lock);
}

enum qb_status seal_channel_deliver(struct seal_channel *ch, uint64_t number, enum sealer_message type,
                                    struct buf *body, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	pthread_mutex_lock(&ch->lock);
	if (ch->broken)
		st = qb_fail(e, QB_REFUSED, "sealer", "ask for a new sealing", "this run is over");
	else if (number > ch->from.n)
		st = qb_fail(e, QB_CONFLICT, "sealer: first", "send every message in its order",
		             "message %llu is the next", (unsigned long long)ch->from.n);
	else if (ch->from.bytes > WAITING_BYTES)
		st = qb_fail(e, QB_REFUSED, "sealer", "send it again later", "too much waits to be taken in");
	else if (number == ch->from.n)
		push(&ch->from, type, body);
	pthread_cond_broadcast(&ch->changed);
	pthread_mutex_unlock(&ch->lock);
	return st;
}

uint64_t seal_channel_delivered(struct seal_channel *ch)
{
	pthread_mutex_lock(&ch->lock);
	uint64_t n = ch->from.n;
	pthread_mutex_unlock(&ch->lock);
	return n;
}
