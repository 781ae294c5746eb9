/*
 * A ledger service small enough to sit in a test: it stands in for the client's transport, signs whatever history it is
 * given, and can be told to lie.
 */
#ifndef QB_TESTS_LEDGER_SERVICE_H
#define QB_TESTS_LEDGER_SERVICE_H

#include "tests/hex.h"

#include <stdio.h>
#include <stdlib.h>
#include <sys/stat.h>
#include <unistd.h>

#include "client/link/heads.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

#define LEAVES_MAX 64

/* One history: leaves, and the newest head that others cosigned. */
struct history {
	struct buf frame[LEAVES_MAX];
	struct ledger_hash leaf[LEAVES_MAX];
	uint64_t n;
	int64_t time_ns; /* of the next head */
};
struct ledger_service {
	struct secret *seed;
	uint8_t key[32], id[16];
	struct history here, there;
	struct history *shown;
	uint64_t show;    /* leaves of the head that is shown; 0: all */
	bool withhold;    /* no leaves are given */
	json_t *cosigned; /* owned; NULL: the member is missing */
	int posted;       /* cosignatures taken */
	uint64_t posted_size[8];
	struct home home;
	struct link link;
	char dir[64];
};
static struct ledger_service *ledger; /* the transport's functions have no other way to it */

static inline struct head history_head(const struct history *x, uint64_t n)
{
	struct tree_array a;
	struct tree_leaves l = tree_from_array(&a, x->leaf, n);
	struct head h = {.size = n, .time_gps_ns = x->time_ns};
	assert_int_equal(tree_root_of(&l, n, &h.root, NULL), QB_OK);
	head_sign(&h, ledger->seed);
	return h;
}

static inline json_t *head_json(const struct head *h)
{
	struct buf b = {0};
	head_format(h, &b);
	json_t *j = json_string((const char *)b.data);
	buf_free(&b);
	return j;
}

enum qb_status link_get(struct link *l, const char *path, json_t **out, struct qb_error *e)
{
	unsigned long long from, limit;
	(void)l;
	*out = json_object();
	if (strcmp(path, "/v1/ledger/head") == 0) {
		struct head h = history_head(ledger->shown, ledger->show > 0 ? ledger->show : ledger->shown->n);
		json_object_set_new(*out, "head", head_json(&h));
		if (ledger->cosigned != NULL)
			json_object_set(*out, "cosigned", ledger->cosigned);
		return QB_OK;
	}
	if (sscanf(path, "/v1/ledger/entries?from=%llu&limit=%llu", &from, &limit) != 2)
		return qb_fail(e, QB_NOT_FOUND, path, NULL, "is no path of this service");
	json_t *list = json_array();
	for (uint64_t i = from; i < ledger->shown->n && i < from + limit && !ledger->withhold; i++) {
		char *text = base64_encode(ledger->shown->frame[i].data, ledger->shown->frame[i].len);
		json_array_append_new(list, json_string(text));
		qb_free(text);
	}
	json_object_set_new(*out, "entries", list);
	return QB_OK;
}

enum qb_status link_post(struct link *l, const char *path, const json_t *body, json_t **out, struct qb_error *e)
{
	(void)l;
	(void)e;
	assert_string_equal(path, "/v1/ledger/cosignatures");
	assert_null(out);
	ledger->posted_size[ledger->posted++] = (uint64_t)json_integer_value(json_object_get(body, "size"));
	return QB_OK;
}

/* ---- writing a history ---- */

static inline void history_add(struct history *x, const char *type, const char *by, const struct secret *seed,
                               json_t *extra)
{
	char *text;
	struct entry en = {.kind = ENTRY_PUBLIC, .seq = x->n, .received_gps_ns = x->time_ns};
	assert_int_equal(wire_entry_compose(type, by, NULL, x->time_ns, "-", extra, &text, NULL), QB_OK);
	en.body = (const uint8_t *)text;
	en.body_len = strlen(text);
	entry_sign(&en, seed);
	assert_int_equal(entry_encode(&en, &x->frame[x->n], NULL), QB_OK);
	hash_leaf(&x->leaf[x->n], x->frame[x->n].data, x->frame[x->n].len);
	x->n++;
	x->time_ns += 1000000000;
	qb_free(text);
	json_decref(extra);
}

static inline json_t *keys_json(const struct party_key *key)
{
	struct party_public pub;
	json_t *j = json_object();
	party_key_public(key, &pub);
	json_object_set_new(j, "signing_key", json_hex_new(pub.sign, 32));
	json_object_set_new(j, "exchange_key", json_hex_new(pub.exchange, 32));
	return j;
}

/* The administrator invites somebody: one more leaf, different for each name. */
static inline void history_invite(struct history *x, const struct party_key *admin, const char *name)
{
	uint8_t hash[64] = {1};
	json_t *j = json_object();
	json_object_set_new(j, "role", json_string("auditor"));
	json_object_set_new(j, "name", json_string(name));
	json_object_set_new(j, "code_hash", json_hex_new(hash, 64));
	history_add(x, "invitation", "admin", admin->seed, j);
}

static inline void history_enrol(struct history *x, const char *role, const char *name, const struct party_key *key)
{
	json_t *j = keys_json(key);
	json_object_set_new(j, "role", json_string(role));
	json_object_set_new(j, "name", json_string(name));
	json_object_set_new(j, "invitation", json_integer(-1));
	history_add(x, "enrolment", name, key->seed, j);
}

static inline void history_begin(struct history *x, const struct party_key *admin)
{
	json_t *start = json_object(), *j = keys_json(admin);
	x->time_ns = INT64_C(1400000000) * 1000000000;
	json_object_set_new(start, "service_key", json_hex_new(ledger->key, 32));
	json_object_set_new(start, "administrator_key", json_hex_new(ledger->key, 32));
	json_object_set_new(start, "clock", json_string("system"));
	history_add(x, "service-start", "service", ledger->seed, start);
	json_object_set_new(j, "role", json_string("administrator"));
	json_object_set_new(j, "name", json_string("admin"));
	json_object_set_new(j, "invitation", json_integer(0));
	history_add(x, "enrolment", "service", ledger->seed, j);
}

static inline void history_copy(struct history *to, const struct history *from, uint64_t n)
{
	for (uint64_t i = 0; i < n; i++) {
		buf_put(&to->frame[i], from->frame[i].data, from->frame[i].len);
		to->leaf[i] = from->leaf[i];
	}
	to->n = n;
	to->time_ns = from->time_ns;
}

static inline void history_free(struct history *x)
{
	for (uint64_t i = 0; i < x->n; i++)
		buf_free(&x->frame[i]);
	*x = (struct history){0};
}

/* ---- a home that has pinned it ---- */

static inline void ledger_service_open(struct ledger_service *s)
{
	*s = (struct ledger_service){.shown = &s->here, .cosigned = json_array()};
	ledger = s;
	s->seed = secret_random(32);
	sign_public(s->seed, s->key);
	sign_key_id(s->key, s->id);
	(void)snprintf(s->dir, sizeof s->dir, "/tmp/qb-ledger-XXXXXX");
	assert_non_null(mkdtemp(s->dir));
	s->home.dir = s->dir;
	s->home.has_service = true;
	memcpy(s->home.service_key, s->key, 32);
	s->link.home = &s->home;
}

static inline void ledger_service_close(struct ledger_service *s)
{
	char *command = text_printf("rm -rf %s", s->dir);
	assert_int_equal(system(command), 0);
	qb_free(command);
	history_free(&s->here);
	history_free(&s->there);
	json_decref(s->cosigned);
	secret_free(&s->seed);
}

/* How many files of this beginning the home has. */
static inline int home_files(const char *pattern)
{
	char *command = text_printf("test $(ls %s/%s 2>/dev/null | wc -l) -gt 0", ledger->dir, pattern);
	int found = system(command) == 0;
	qb_free(command);
	return found;
}

#endif
