/*
 * What was asked during the campaign, out of its verified bundle: each spot request with what became of it, and how
 * long the answers took. For the report; nothing is computed from it.
 */
#include <stdlib.h>
#include <string.h>

#include "client/cli/bundle_verify.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

struct question {
	char id[33];
	int answers, retractions;
	int64_t asked_ns, answered_ns;
	json_t *j;
};

static double seconds(int64_t gps_ns)
{
	return (double)gps_ns / 1e9;
}

static json_t *ask(const struct bundle_hidden *h, const struct wire_entry *en)
{
	json_t *j = json_object();
	json_object_set_new(j, "by", json_string(en->by));
	json_object_set_new(j, "reason", json_string(en->why));
	json_object_set_new(j, "asked_gps", json_real(seconds(h->received_gps_ns)));
	json_object_set_new(j, "from_gps", json_real(seconds(wire_entry_gps(en, "from_gps"))));
	json_object_set_new(j, "to_gps", json_real(seconds(wire_entry_gps(en, "to_gps"))));
	json_object_set_new(j, "deadline_gps", json_real(seconds(wire_entry_gps(en, "deadline_gps"))));
	json_object_set(j, "recipients", (json_t *)(uintptr_t)wire_entry_json(en, "recipients"));
	json_object_set_new(j, "gave", json_array());
	json_object_set_new(j, "refused", json_array());
	return j;
}

/* What followed a question: the k-th answer ends it. */
static void follow_up(struct question *q, const struct bundle_hidden *h, const struct wire_entry *en, int needed)
{
	const char *type = en->type->type;
	if (strcmp(type, "spot-shares") == 0)
		json_array_append_new(json_object_get(q->j, "gave"), json_string(en->by));
	else if (strcmp(type, "spot-refusal") == 0)
		json_array_append_new(json_object_get(q->j, "refused"), json_string(en->by));
	else if (strcmp(type, "spot-answer") == 0 && ++q->answers == needed)
		q->answered_ns = h->received_gps_ns;
	else if (strcmp(type, "spot-retraction") == 0)
		q->retractions++;
}

static int compare(const void *a, const void *b)
{
	double x = *(const double *)a, y = *(const double *)b;
	return x < y ? -1 : x > y;
}

static json_t *summary(const struct question *q, size_t n)
{
	double *took = QB_NEW_ARRAY(double, n + 1);
	size_t answered = 0, refused = 0;
	json_t *s = json_object();
	for (size_t i = 0; i < n; i++) {
		if (q[i].answered_ns != 0)
			took[answered++] = seconds(q[i].answered_ns - q[i].asked_ns);
		refused += json_array_size(json_object_get(q[i].j, "refused")) > 0;
	}
	qsort(took, answered, sizeof *took, compare);
	json_object_set_new(s, "asked", json_integer((json_int_t)n));
	json_object_set_new(s, "answered", json_integer((json_int_t)answered));
	json_object_set_new(s, "with_refusals", json_integer((json_int_t)refused));
	if (answered > 0) {
		double median =
		    answered % 2 == 1 ? took[answered / 2] : (took[answered / 2 - 1] + took[answered / 2]) / 2;
		json_object_set_new(s, "median_s", json_real(median));
		json_object_set_new(s, "longest_s", json_real(took[answered - 1]));
	}
	qb_free(took);
	return s;
}

/* By the time of receipt, and in the ledger's order where that is the same: the bundle lists them in no order. */
static int by_receipt(const void *a, const void *b)
{
	const struct bundle_hidden *x = *(const struct bundle_hidden *const *)a,
	                           *y = *(const struct bundle_hidden *const *)b;
	if (x->received_gps_ns != y->received_gps_ns)
		return x->received_gps_ns < y->received_gps_ns ? -1 : 1;
	return x->seq < y->seq ? -1 : x->seq > y->seq;
}

static enum qb_status take_one(const struct verified *v, const struct bundle_hidden *h, bool questions,
                               struct question *q, size_t *n, struct qb_error *e)
{
	struct wire_entry en;
	enum qb_status st = wire_entry_parse((const char *)h->entry.data, h->entry.len, &en, e);
	if (st != QB_OK)
		return st;
	bool question = strcmp(en.type->type, "spot-request") == 0;
	if (questions && question) {
		hex_encode(q[*n].id, h->commitment, 16);
		q[*n].asked_ns = h->received_gps_ns;
		q[(*n)++].j = ask(h, &en);
	}
	for (size_t k = 0; !questions && !question && strncmp(en.type->type, "spot-", 5) == 0 && k < *n; k++) {
		if (strcmp(q[k].id, wire_entry_text(&en, "opening")) == 0)
			follow_up(&q[k], h, &en, v->k->k);
	}
	wire_entry_free(&en);
	return QB_OK;
}

enum qb_status bundle_questions_of(const struct verified *v, json_t *course, struct qb_error *e)
{
	struct question *q = QB_NEW_ARRAY(struct question, v->bundle->n_hidden + 1);
	json_t *list = json_array();
	size_t n = 0;
	enum qb_status st = QB_OK;
	const struct bundle_hidden **order = qb_alloc(v->bundle->n_hidden + 1, sizeof *order);
	for (size_t i = 0; i < v->bundle->n_hidden; i++)
		order[i] = &v->bundle->hidden[i];
	qsort(order, v->bundle->n_hidden, sizeof *order, by_receipt);
	for (int pass = 0; pass < 2; pass++) {
		for (size_t i = 0; st == QB_OK && i < v->bundle->n_hidden; i++)
			st = take_one(v, order[i], pass == 0, q, &n, e);
	}
	qb_free(order);
	for (size_t k = 0; k < n; k++) {
		json_object_set_new(q[k].j, "answered_gps",
		                    q[k].answered_ns != 0 ? json_real(seconds(q[k].answered_ns)) : json_null());
		json_object_set_new(q[k].j, "retracted", json_boolean(q[k].retractions >= v->k->k));
		json_array_append(list, q[k].j);
	}
	json_object_set_new(course, "questions", list);
	json_object_set_new(course, "question_times", summary(q, n));
	for (size_t k = 0; k < n; k++)
		json_decref(q[k].j);
	qb_free(q);
	return st;
}
