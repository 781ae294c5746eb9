/* The sealer's own machine: one run over a socket or a folder, every frame passed on, two statements signed. */
#include "server/daemon/sealer_host.h"

#include <errno.h>
#include <netdb.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/json.h"
#include "server/base/log.h"
#include "server/base/secret.h"
#include "server/base/text.h"
#include "server/daemon/child.h"
#include "server/wire/sealer_folder.h"

#define KEY_BYTES       32
#define STATEMENT_BYTES 64
#define POLL_NS         100000000L

struct host {
	struct secret *seed;
	const char *folder; /* NULL: fd is a socket */
	int fd;
	uint64_t sent, taken; /* files */
	int to_fd, from_fd;   /* the sealer */
	pid_t pid;
};

static char *key_path(const char *dir)
{
	return text_printf("%s/host.key", dir);
}

enum qb_status sealer_host_init(const char *dir, struct qb_error *e)
{
	char *path = key_path(dir), hex[65];
	uint8_t pk[SIGN_PUBLIC];
	enum qb_status st = QB_OK;
	if (mkdir(dir, 0700) != 0 && errno != EEXIST)
		st = qb_fail(e, QB_IO, dir, NULL, "can't be created: %s", strerror(errno));
	if (st == QB_OK && access(path, F_OK) == 0)
		st = qb_fail(e, QB_CONFLICT, path, "choose another directory", "there is a key already");
	if (st == QB_OK) {
		struct secret *seed = secret_random(KEY_BYTES);
		st = file_write(path, 0600, secret_view(seed), KEY_BYTES, e);
		sign_public(seed, pk);
		secret_free(&seed);
	}
	if (st == QB_OK) {
		hex_encode(hex, pk, sizeof pk);
		printf("sealer_host: %s\n", hex);
	}
	qb_free(path);
	return st;
}

static enum qb_status read_key(const char *dir, struct secret **out, struct qb_error *e)
{
	char *path = key_path(dir);
	struct stat s;
	struct buf b = {0};
	enum qb_status st = QB_OK;
	if (stat(path, &s) == 0 && (s.st_mode & 077) != 0)
		st = qb_fail(e, QB_REFUSED, path, "chmod 600 it", "can be read by others");
	if (st == QB_OK)
		st = file_read(path, KEY_BYTES, &b, e);
	if (st == QB_OK && b.len != KEY_BYTES)
		st = qb_fail(e, QB_FORMAT, path, "make it with quietbelld sealer-host-init", "is not a key");
	if (st == QB_OK)
		*out = secret_from(b.data, b.len);
	buf_wipe(&b);
	qb_free(path);
	return st;
}

/* ---- the transport ---- */

static enum qb_status listen_once(const char *address, int *out, struct qb_error *e)
{
	struct addrinfo want = {.ai_socktype = SOCK_STREAM, .ai_flags = AI_PASSIVE | AI_NUMERICHOST}, *found = NULL;
	char host[80], port[8], name[80], service[16];
	const char *colon = strrchr(address, ':');
	struct sockaddr_storage at;
	socklen_t n = sizeof at;
	int one = 1, fd = -1;
	if (colon == NULL || (size_t)(colon - address) >= sizeof host || strlen(colon + 1) >= sizeof port)
		return qb_fail(e, QB_USAGE, "--listen", "127.0.0.1:7001", "'%.60s' is not ADDRESS:PORT", address);
	(void)snprintf(host, sizeof host, "%.*s", (int)(colon - address), address);
	(void)snprintf(port, sizeof port, "%s", colon + 1);
	if (getaddrinfo(host, port, &want, &found) != 0)
		return qb_fail(e, QB_USAGE, "--listen", "127.0.0.1:7001", "'%.60s' is not ADDRESS:PORT", address);
	fd = socket(found->ai_family, SOCK_STREAM | SOCK_CLOEXEC, 0);
	if (fd >= 0)
		(void)setsockopt(fd, SOL_SOCKET, SO_REUSEADDR, &one, sizeof one);
	bool good = fd >= 0 && bind(fd, found->ai_addr, found->ai_addrlen) == 0 && listen(fd, 1) == 0 &&
	            getsockname(fd, (struct sockaddr *)&at, &n) == 0 &&
	            getnameinfo((struct sockaddr *)&at, n, name, sizeof name, service, sizeof service,
	                        NI_NUMERICHOST | NI_NUMERICSERV) == 0;
	freeaddrinfo(found);
	if (!good) {
		enum qb_status st =
		    qb_fail(e, QB_IO, address, "choose another port", "can't be listened on: %s", strerror(errno));
		if (fd >= 0)
			close(fd);
		return st;
	}
	printf("waiting on %s:%s\n", name, service);
	(void)fflush(stdout);
	do
		*out = accept4(fd, NULL, NULL, SOCK_CLOEXEC);
	while (*out < 0 && errno == EINTR);
	close(fd);
	return *out >= 0 ? QB_OK : qb_fail(e, QB_IO, address, NULL, "no connection: %s", strerror(errno));
}

/* The next message for the sealer; false when the other side is gone. A folder is waited for without end. */
static bool take(struct host *h, enum sealer_message *type, struct buf *body)
{
	struct timespec pause = {0, POLL_NS};
	struct qb_error e = {0};
	enum qb_status st;
	if (h->folder == NULL)
		return sealer_read(h->fd, type, body);
	while ((st = sealer_folder_get(h->folder, "to", h->taken, type, body, &e)) == QB_NOT_FOUND)
		nanosleep(&pause, NULL);
	h->taken++;
	return st == QB_OK;
}

static bool give(struct host *h, enum sealer_message type, const struct buf *body)
{
	struct qb_error e = {0};
	if (h->folder == NULL)
		return sealer_write(h->fd, type, body->data, body->len);
	return sealer_folder_put(h->folder, "from", h->sent++, type, body, &e) == QB_OK;
}

/* The sealer's two statements are signed on their way; everything else passes as it is. */
static void sign_statement(const struct host *h, enum sealer_message type, struct buf *body)
{
	uint8_t signature[SIGN_BYTES];
	size_t at = type == SEALER_KEY ? 32 : 8;
	if ((type != SEALER_KEY && type != SEALER_DONE) || body->len != at + STATEMENT_BYTES)
		return;
	sign_bytes(h->seed, body->data + at, STATEMENT_BYTES, signature);
	buf_put(body, signature, sizeof signature);
}

/*
 * The sealer takes a job, gives its key, takes the service's and every custodian's box with an answer to each, and then
 * gives records: it is always clear whose turn it is, so one thread passes everything on.
 */
static enum qb_status pass_on(struct host *h, struct qb_error *e)
{
	struct buf b = {0};
	enum sealer_message type = SEALER_JOB;
	bool to_sealer = true, good = true, done = false;
	uint64_t records = 0;
	json_t *job = NULL;
	size_t boxes = 0, boxes_due = 0;
	while (good && !done) {
		if (to_sealer) {
			good = take(h, &type, &b);
			if (good && type == SEALER_JOB &&
			    json_read((const char *)b.data, b.len, "job", &job, e) == QB_OK)
				boxes_due = json_array_size(json_object_get(job, "custodians")) + 1;
			good = good && sealer_write(h->to_fd, type, b.data, b.len);
		} else {
			good = sealer_read(h->from_fd, &type, &b);
			if (good)
				sign_statement(h, type, &b);
			good = good && give(h, type, &b);
			done = type == SEALER_DONE || type == SEALER_FAILED || type == SEALER_REJECTED;
			records += type == SEALER_RECORD;
			boxes += type == SEALER_ACCEPTED;
		}
		to_sealer = !to_sealer && (type == SEALER_KEY || type == SEALER_ACCEPTED) && boxes < boxes_due;
	}
	json_decref(job);
	buf_free(&b);
	if (!good)
		return qb_fail(e, QB_NO, "sealer host", "ask for a new sealing", "the %s is gone",
		               to_sealer ? "service" : "sealer");
	if (type != SEALER_DONE)
		return qb_fail(e, QB_NO, "sealer host", "see the service", "the run ended without a seal");
	printf("sealed: %llu records left this machine, signed\n", (unsigned long long)records);
	return QB_OK;
}

enum qb_status sealer_host_run(const char *dir, const char *address, const char *folder, struct qb_error *e)
{
	struct log log = {2, LOG_INFO_, clock_system()};
	struct host h = {.folder = folder, .fd = -1};
	enum qb_status st = read_key(dir, &h.seed, e);
	(void)signal(SIGPIPE, SIG_IGN);
	if (st == QB_OK && folder == NULL)
		st = listen_once(address, &h.fd, e);
	if (st == QB_OK && !child_spawn(&log, &h.to_fd, &h.from_fd, &h.pid))
		st = qb_fail(e, QB_FAULT, "sealer host", NULL, "the sealer can't be started");
	else if (st == QB_OK) {
		st = pass_on(&h, e);
		if (st != QB_OK)
			(void)kill(h.pid, SIGKILL);
		close(h.to_fd);
		close(h.from_fd);
		(void)waitpid(h.pid, NULL, 0);
	}
	if (h.fd >= 0)
		close(h.fd);
	secret_free(&h.seed);
	return st;
}
