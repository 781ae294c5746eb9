/* Many records on several threads; see batch.h. */
#include "server/custody/batch.h"

#include <pthread.h>
#include <string.h>
#include <unistd.h>

#include "server/base/check.h"

struct work {
	const struct batch *b;
	size_t from, to;
	enum qb_status (*one)(const struct work *w, size_t r, struct qb_error *e);
	/* checking records */
	const struct buf *const *bytes;
	struct record *rec;
	/* making */
	uint32_t i;
	const struct secret *share;
	uint8_t *out;
	/* checking and opening */
	const struct batch_set *set;
	size_t n_sets;
	struct buf *content;
	bool *opens;
	/* what came of it */
	enum qb_status status;
	size_t bad;
	struct qb_error error;
};

static struct partial_authority authority(const struct batch *b, size_t r)
{
	struct partial_authority a = {.purpose = partial_full_purpose(b->record[r]->header.type)};
	memcpy(a.hash, b->leaf, sizeof b->leaf);
	return a;
}

static void *run(void *arg)
{
	struct work *w = arg;
	for (size_t r = w->from; r < w->to && w->status == QB_OK; r++) {
		w->bad = r;
		w->status = w->one(w, r, &w->error);
	}
	return NULL;
}

static int threads_of(const struct batch *b)
{
	long n = b->threads > 0 ? b->threads : sysconf(_SC_NPROCESSORS_ONLN);
	n = n < 1 ? 1 : n > BATCH_THREADS_MAX ? BATCH_THREADS_MAX : n;
	return (size_t)n > b->n ? (int)(b->n > 0 ? b->n : 1) : (int)n;
}

/* Each thread has a stretch of its own; a thread that can't be had leaves its stretch to this one. */
static enum qb_status share_out(const struct work *what, size_t *bad, struct qb_error *e)
{
	struct work w[BATCH_THREADS_MAX];
	pthread_t thread[BATCH_THREADS_MAX];
	bool started[BATCH_THREADS_MAX] = {false};
	int n = threads_of(what->b);
	for (int t = 0; t < n; t++) {
		w[t] = *what;
		w[t].from = what->b->n * (size_t)t / (size_t)n;
		w[t].to = what->b->n * ((size_t)t + 1) / (size_t)n;
		started[t] = t > 0 && pthread_create(&thread[t], NULL, run, &w[t]) == 0;
	}
	for (int t = 0; t < n; t++) {
		if (!started[t])
			run(&w[t]);
	}
	enum qb_status st = QB_OK;
	for (int t = 0; t < n; t++) {
		if (started[t])
			CHECK(pthread_join(thread[t], NULL) == 0);
		if (st == QB_OK && w[t].status != QB_OK) {
			st = w[t].status;
			if (bad != NULL)
				*bad = w[t].bad;
			if (e != NULL)
				*e = w[t].error;
		}
	}
	return st;
}

static enum qb_status record_one(const struct work *w, size_t r, struct qb_error *e)
{
	return record_check(w->b->group, w->bytes[r]->data, w->bytes[r]->len, &w->rec[r], e);
}

enum qb_status batch_records(const struct custody_group *g, const struct buf *const *bytes, size_t n, int threads,
                             struct record *out, size_t *bad, struct qb_error *e)
{
	struct batch b = {.group = g, .n = n, .threads = threads};
	struct work w = {.b = &b, .one = record_one, .bytes = bytes, .rec = out};
	return share_out(&w, bad, e);
}

static enum qb_status make_one(const struct work *w, size_t r, struct qb_error *e)
{
	struct partial_authority a = authority(w->b, r);
	struct buf part = {0};
	enum qb_status st = partial_make_checked(w->b->group, w->b->record[r], w->i, w->share, &a, &part, e);
	if (st == QB_OK)
		memcpy(w->out + r * PARTIAL_BYTES, part.data, PARTIAL_BYTES);
	buf_free(&part);
	return st;
}

enum qb_status batch_make(const struct batch *b, uint32_t i, const struct secret *share, uint8_t *out, size_t *bad,
                          struct qb_error *e)
{
	struct work w = {.b = b, .one = make_one, .i = i, .share = share, .out = out};
	enum qb_status st = partial_share_check(b->group, i, share, e);
	if (st != QB_OK && bad != NULL)
		*bad = 0;
	return st == QB_OK ? share_out(&w, bad, e) : st;
}

static enum qb_status check_sets(const struct work *w, size_t r, struct partial *p, struct qb_error *e)
{
	struct partial_authority a = authority(w->b, r);
	enum qb_status st = QB_OK;
	for (size_t s = 0; st == QB_OK && s < w->n_sets; s++) {
		st = partial_check(w->b->group, w->b->record[r], &a, w->set[s].partials + r * PARTIAL_BYTES,
		                   PARTIAL_BYTES, &p[s], e);
		if (st == QB_OK && p[s].i != w->set[s].i)
			st = qb_fail(e, QB_CRYPTO, "opening", NULL,
			             "a partial opening is another custodian's: %u's among those of %u", p[s].i,
			             w->set[s].i);
	}
	return st;
}

static enum qb_status check_one(const struct work *w, size_t r, struct qb_error *e)
{
	struct partial p[1];
	return check_sets(w, r, p, e);
}

enum qb_status batch_check(const struct batch *b, const struct batch_set *set, size_t *bad, struct qb_error *e)
{
	struct work w = {.b = b, .one = check_one, .set = set, .n_sets = 1};
	return share_out(&w, bad, e);
}

static enum qb_status open_one(const struct work *w, size_t r, struct qb_error *e)
{
	struct partial p[CUSTODY_MAX];
	enum qb_status st = check_sets(w, r, p, e);
	if (st == QB_OK)
		st = partial_open_filed(w->b->group, w->b->record[r], p, w->n_sets, &w->content[r], &w->opens[r], e);
	return st;
}

enum qb_status batch_open(const struct batch *b, const struct batch_set *set, size_t n_sets, struct buf *content,
                          bool *opens, size_t *bad, struct qb_error *e)
{
	struct work w = {.b = b, .one = open_one, .set = set, .n_sets = n_sets, .content = content, .opens = opens};
	if (n_sets > CUSTODY_MAX)
		return qb_fail(e, QB_CRYPTO, "opening", NULL, "there are more sets than custodians");
	return share_out(&w, bad, e);
}
