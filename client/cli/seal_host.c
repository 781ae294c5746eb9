/*
 * `campaign seal --on HOST-FILE`: carries the messages between the service and a sealer on another machine. This client
 * reads none of them, and could not: contributions and slot keys are boxed, the rest is sealed or public.
 */
#include "client/cli/seal_host.h"

#include <errno.h>
#include <netdb.h>
#include <poll.h>
#include <stdio.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/base/yaml.h"
#include "server/wire/sealer_folder.h"

#define WAIT_MS     200
#define BATCH_BYTES ((size_t)8 << 20)

struct relay {
	struct cli_call *c;
	const struct campaign *k;
	char *address, *folder; /* one of them; owned */
	int fd;
	uint64_t to_host, from_host; /* messages passed on */
};

static enum qb_status read_host_file(struct relay *r, const char *path)
{
	struct yaml_doc *doc = NULL;
	struct buf b = {0};
	struct qb_error *e = &r->c->error;
	enum qb_status st = file_read(path, 1 << 16, &b, e);
	if (st == QB_OK)
		st = yaml_parse((const char *)b.data, b.len, path, &doc, e);
	if (st == QB_OK)
		st = yaml_is(doc, doc->root, YAML_MAP, e);
	for (int i = 0; st == QB_OK && i < doc->root->n_members; i++) {
		struct yaml_node *n = doc->root->members[i];
		char **to = strcmp(n->key, "address") == 0  ? &r->address
		            : strcmp(n->key, "folder") == 0 ? &r->folder
		                                            : NULL;
		if (to == NULL || n->kind != YAML_SCALAR || n->text[0] == '\0')
			st = yaml_refuse(doc, n, QB_FORMAT, "address: HOST:PORT, or folder: DIR", e);
		else
			*to = qb_strdup(n->text);
	}
	if (st == QB_OK && (r->address == NULL) == (r->folder == NULL))
		st = qb_fail(e, QB_FORMAT, path, "write address: HOST:PORT, or folder: DIR", "names no host, or two");
	yaml_doc_free(&doc);
	buf_free(&b);
	return st;
}

static enum qb_status connect_host(struct relay *r)
{
	struct addrinfo want = {.ai_socktype = SOCK_STREAM}, *found = NULL;
	char *host = qb_strdup(r->address), *colon = strrchr(host, ':');
	enum qb_status st = QB_OK;
	r->fd = -1;
	if (colon != NULL)
		*colon = '\0';
	if (colon == NULL || getaddrinfo(host, colon + 1, &want, &found) != 0)
		st = qb_fail(&r->c->error, QB_FORMAT, "address", "HOST:PORT", "'%.80s' can't be resolved", r->address);
	for (struct addrinfo *a = found; st == QB_OK && a != NULL && r->fd < 0; a = a->ai_next) {
		r->fd = socket(a->ai_family, SOCK_STREAM | SOCK_CLOEXEC, 0);
		if (r->fd >= 0 && connect(r->fd, a->ai_addr, a->ai_addrlen) != 0) {
			close(r->fd);
			r->fd = -1;
		}
	}
	if (st == QB_OK && r->fd < 0)
		st = qb_fail(&r->c->error, QB_UNREACHABLE, r->address, "start quietbelld sealer-host there",
		             "the sealer's host does not answer: %s", strerror(errno));
	if (found != NULL)
		freeaddrinfo(found);
	qb_free(host);
	return st;
}

static enum qb_status pass_to_host(struct relay *r, enum sealer_message type, const struct buf *body)
{
	if (r->folder != NULL)
		return sealer_folder_put(r->folder, "to", r->to_host, type, body, &r->c->error);
	if (!sealer_write(r->fd, type, body->data, body->len))
		return qb_fail(&r->c->error, QB_UNREACHABLE, r->address, "seal again", "the sealer's host is gone");
	return QB_OK;
}

/* What the service has for the sealer since the last time. */
static enum qb_status collect(struct relay *r, bool *closed)
{
	json_t *doc = NULL, *m;
	size_t i;
	char *path =
	    text_printf("/v1/campaigns/%s/sealer/messages?from=%llu", r->k->name, (unsigned long long)r->to_host);
	enum qb_status st = link_get(&r->c->link, path, &doc, &r->c->error);
	json_array_foreach(json_object_get(doc, "messages"), i, m)
	{
		struct buf body = {0};
		const char *text = NULL;
		int64_t type = 0;
		if (st == QB_OK)
			st = json_int(m, "type", "message", SEALER_JOB, SEALER_FAILED, &type, &r->c->error);
		if (st == QB_OK)
			st = json_str(m, "body", "message", &text, &r->c->error);
		if (st == QB_OK && !base64_decode(text, &body))
			st = qb_fail(&r->c->error, QB_FORMAT, "message", NULL, "is not base64");
		if (st == QB_OK)
			st = pass_to_host(r, (enum sealer_message)type, &body);
		r->to_host += st == QB_OK;
		buf_free(&body);
	}
	*closed = json_is_true(json_object_get(doc, "closed"));
	json_decref(doc);
	qb_free(path);
	return st;
}

/* One message from the host, if there is one; *got false else. A socket is waited on for a moment. */
static enum qb_status next_from_host(struct relay *r, uint64_t number, enum sealer_message *type, struct buf *body,
                                     bool *got)
{
	*got = false;
	if (r->folder != NULL) {
		enum qb_status st = sealer_folder_get(r->folder, "from", number, type, body, &r->c->error);
		*got = st == QB_OK;
		return st == QB_NOT_FOUND ? QB_OK : st;
	}
	struct pollfd p = {r->fd, POLLIN, 0};
	if (poll(&p, 1, number == r->from_host ? WAIT_MS : 0) <= 0)
		return QB_OK;
	if (!sealer_read(r->fd, type, body))
		return qb_fail(&r->c->error, QB_UNREACHABLE, r->address, "seal again", "the sealer's host is gone");
	*got = true;
	return QB_OK;
}

static enum qb_status deliver(struct relay *r, bool *last)
{
	json_t *list = json_array(), *doc = json_object(), *answer = NULL;
	struct buf body = {0};
	size_t bytes = 0;
	bool got = true;
	enum qb_status st = QB_OK;
	while (got && !*last && bytes < BATCH_BYTES) {
		enum sealer_message type;
		st = next_from_host(r, r->from_host + json_array_size(list), &type, &body, &got);
		if (st != QB_OK || !got)
			break;
		char *text = base64_encode(body.data, body.len);
		json_t *m = json_object();
		json_object_set_new(m, "type", json_integer((json_int_t)type));
		json_object_set_new(m, "body", json_string(text));
		json_array_append_new(list, m);
		bytes += body.len;
		*last = type == SEALER_DONE || type == SEALER_FAILED || type == SEALER_REJECTED;
		qb_free(text);
	}
	size_t n = json_array_size(list);
	json_object_set_new(doc, "first", json_integer((json_int_t)r->from_host));
	json_object_set_new(doc, "messages", list);
	if (st == QB_OK && n > 0) {
		char *path = text_printf("/v1/campaigns/%s/sealer/messages", r->k->name);
		st = link_post(&r->c->link, path, doc, &answer, &r->c->error);
		r->from_host += n;
		qb_free(path);
	}
	json_decref(answer);
	json_decref(doc);
	buf_free(&body);
	return st;
}

enum qb_status cli_seal_relay(struct cli_call *c, const struct campaign *k, const char *host_file)
{
	struct relay r = {.c = c, .k = k, .fd = -1};
	bool closed = false, last = false;
	enum qb_status st = read_host_file(&r, host_file);
	if (st == QB_OK && r.address != NULL)
		st = connect_host(&r);
	if (st == QB_OK)
		st = cli_seal_ask(c, k, true);
	while (st == QB_OK && !closed && !last) {
		st = collect(&r, &closed);
		if (st == QB_OK)
			st = deliver(&r, &last);
		cli_progress(c, "messages from the sealer", r.from_host, r.from_host + !last);
		if (st == QB_OK && r.folder != NULL)
			(void)poll(NULL, 0, WAIT_MS);
	}
	if (r.fd >= 0)
		close(r.fd);
	qb_free(r.address);
	qb_free(r.folder);
	return st;
}
