/*
 * The service's side of a sealing: it starts the sealer, relays the boxed contributions, and takes over what comes
 * out. A thread a job reads the pipe; everything that changes the campaign happens under the lock in one transaction.
 */
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/ops/seal_job.h"
#include "server/ops/seal_output.h"

#define SEAL_WAIT_S (24 * 3600)

enum qb_status slot_key_unbox(struct ops *o, const struct campaign *c, int64_t slot, const struct buf *boxed,
                              struct secret **out, struct qb_error *e)
{
	return slot_key_open(o->storage_key, c->id, slot, boxed, out, e);
}

/* ---- the job that the sealer gets ---- */

static void put_base64(json_t *list, const void *p, size_t n)
{
	char *text = base64_encode(p, n);
	json_array_append_new(list, json_string(text));
	qb_free(text);
}

static enum qb_status put_prekeys(struct ops *o, const struct campaign *c, json_t *job, struct qb_error *e)
{
	json_t *all = json_object();
	enum qb_status st = QB_OK;
	for (int i = 0; st == QB_OK && i < c->plan->network->n_stations; i++) {
		const char *name = c->plan->network->stations[i].name;
		json_t *places = json_array();
		for (int p = 0; st == QB_OK && p < RECIPE_PLACES; p++) {
			struct buf points = {0};
			if (!c->prekeys[i][p])
				continue;
			st = store_prekeys_get(o->store, c->id, name, p, &points, e);
			put_base64(places, points.data, points.len);
			buf_free(&points);
		}
		json_object_set_new(all, name, places);
	}
	json_object_set_new(job, "prekeys", all);
	return st;
}

static enum qb_status make_job(struct ops *o, struct campaign *c, const struct seal_job *j, json_t **out,
                               struct qb_error *e)
{
	json_t *job = json_object(), *people = json_array(), *deals = json_array(), *commitments = json_array(), *files;
	uint8_t signatures[CUSTODY_MAX][SIGN_BYTES];
	struct buf certificate = {0};
	json_array_append_new(commitments, json_hex_new(j->commitment, 64));
	for (int i = 0; i < c->n; i++) {
		const struct custodian *cu = &c->custodian[i];
		json_t *p = json_object();
		json_object_set_new(p, "signing_key", json_hex_new(cu->party->signing_key, 32));
		json_object_set_new(p, "exchange_key", json_hex_new(cu->party->exchange_key, 32));
		json_array_append_new(people, p);
		put_base64(deals, cu->deal, cu->deal_n);
		json_array_append_new(commitments, json_hex_new(cu->contribution_commitment, 64));
		memcpy(signatures[i], cu->certificate_signature, SIGN_BYTES);
	}
	keygen_certificate_encode(&c->group, (const uint8_t(*)[SIGN_BYTES])signatures, &certificate);
	char *text = base64_encode(certificate.data, certificate.len);
	json_object_set_new(job, "campaign", json_hex_new(c->id, 16));
	json_object_set_new(job, "attempt", json_integer((json_int_t)c->attempt));
	json_object_set_new(job, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
	json_object_set_new(job, "needed", json_integer(c->k));
	json_object_set_new(job, "service_id", json_hex_new(o->service_id, 16));
	json_object_set_new(job, "storage_point", json_hex_new(o->storage_point, 32));
	json_object_set_new(job, "custodians", people);
	json_object_set_new(job, "deals", deals);
	json_object_set_new(job, "certificate", json_string(text));
	json_object_set_new(job, "commitments", commitments);
	json_object_set_new(job, "plan", json_string(c->plan_text));
	qb_free(text);
	buf_free(&certificate);
	enum qb_status st = json_read(c->plan_files, strlen(c->plan_files), "plan files", &files, e);
	if (st == QB_OK) {
		json_object_set_new(job, "files", files);
		st = put_prekeys(o, c, job, e);
	}
	*out = job;
	return st;
}

static void make_contribution(struct ops *o, struct campaign *c, struct seal_job *j)
{
	j->contribution = secret_random(CONTRIBUTION_BYTES);
	if (o->rehearsal_clock && o->settings.rehearsal_seed >= 0) {
		struct transcript t;
		uint8_t h[64];
		transcript_begin(&t, "quietbell/1/rehearsal/contribution");
		transcript_u64(&t, (uint64_t)o->settings.rehearsal_seed);
		transcript_field(&t, c->context.ctx, 64);
		transcript_u64(&t, c->sealing_attempt);
		transcript_u64(&t, 0);
		transcript_end(&t, h);
		memcpy(secret_bytes(j->contribution), h, CONTRIBUTION_BYTES);
	}
	seed_commit(c->context.ctx, c->sealing_attempt, 0, secret_view(j->contribution), j->commitment);
}

/* ---- the thread ---- */

/* A statement of the sealer, signed by the host that the plan names. */
static enum qb_status check_host(const struct seal_job *j, const uint8_t statement[static 64], const uint8_t *given,
                                 size_t n, uint8_t signature[static 64], struct qb_error *e)
{
	memset(signature, 0, 64);
	if (!seal_channel_is_remote(j->channel))
		return QB_OK;
	if (n != 64 || !sign_verify(j->c->plan->sealer_host, statement, 64, given))
		return qb_fail(e, QB_CRYPTO, "sealing", "use the host that the plan names",
		               "the sealer's statement is not signed by the plan's sealer host");
	memcpy(signature, given, 64);
	return QB_OK;
}

static enum qb_status take_key(struct seal_job *j, struct qb_error *e)
{
	struct buf b = {0};
	enum sealer_message type;
	uint8_t statement[64];
	enum qb_status st = QB_OK;
	if (!seal_channel_receive(j->channel, &type, &b) || type != SEALER_KEY || b.len < POINT_BYTES + 64)
		st = qb_fail(e, QB_FAULT, "sealing", NULL, "%.300s",
		             type == SEALER_FAILED && b.data != NULL ? (const char *)b.data
		                                                     : "the sealer did not start");
	if (st == QB_OK) {
		memcpy(j->sealer_key, b.data, POINT_BYTES);
		seal_key_statement(j->c->context.ctx, j->c->sealing_attempt, j->sealer_key, statement);
		st =
		    check_host(j, statement, b.data + POINT_BYTES + 64, b.len - POINT_BYTES - 64, j->host_signature, e);
	}
	if (st == QB_OK && !group_point_ok(j->sealer_key))
		st = qb_fail(e, QB_CRYPTO, "sealing", NULL, "the sealer's key is no valid point");
	buf_free(&b);
	return st;
}

static enum qb_status enter_sealing(struct seal_job *j, struct qb_error *e)
{
	struct txn t;
	json_t *extra = json_object();
	json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)j->c->sealing_attempt));
	json_object_set_new(extra, "sealer_key", json_hex_new(j->sealer_key, 32));
	json_object_set_new(extra, "host_signature", json_hex_new(j->host_signature, 64));
	json_object_set_new(extra, "service_commitment", json_hex_new(j->commitment, 64));
	pthread_mutex_lock(&j->o->lock);
	enum qb_status st = txn_begin(&t, j->o, "sealing", e);
	if (st == QB_OK) {
		st = txn_service_entry(&t, "sealing", j->c, "a sealer was started", extra, NULL, NULL, e);
		if (st == QB_OK)
			st = txn_commit(&t, e);
		txn_end(&t);
	} else {
		json_decref(extra);
	}
	j->started = st == QB_OK;
	pthread_mutex_unlock(&j->o->lock);
	return st;
}

/* Waits for the next box that a custodian delivered; -1 when cancelled or the time is over. */
static int next_box(struct seal_job *j, struct buf *message)
{
	struct timespec until;
	int which = -1;
	CHECK(clock_gettime(CLOCK_REALTIME, &until) == 0);
	until.tv_sec += SEAL_WAIT_S;
	pthread_mutex_lock(&j->o->lock);
	while (which < 0 && !j->cancelled && !j->o->stopping) {
		for (int i = 0; i < j->c->n && which < 0; i++) {
			if (j->boxes[i].len > 0 && !j->relayed[i])
				which = i;
		}
		if (which < 0 && pthread_cond_timedwait(&j->o->changed, &j->o->lock, &until) != 0)
			break;
	}
	if (which >= 0) {
		buf_clear(message);
		buf_u32(message, (uint32_t)which + 1);
		buf_put(message, j->boxes[which].data, j->boxes[which].len);
		j->relayed[which] = true;
	}
	pthread_mutex_unlock(&j->o->lock);
	return which;
}

/* The service's own contribution takes the same way as everybody's. */
static enum qb_status send_own_box(struct seal_job *j, struct qb_error *e)
{
	struct buf b = {0}, answer = {0};
	enum sealer_message type;
	buf_u32(&b, 0);
	enum qb_status st = box_seal(j->sealer_key, BOX_SEALER, j->c->context.ctx, 64, secret_view(j->contribution),
	                             CONTRIBUTION_BYTES, CONTRIBUTION_BYTES, &b, e);
	if (st == QB_OK && (!seal_channel_send(j->channel, SEALER_BOX, b.data, b.len) ||
	                    !seal_channel_receive(j->channel, &type, &answer) || type != SEALER_ACCEPTED))
		st = qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer did not take the service's contribution");
	buf_free(&b);
	buf_free(&answer);
	return st;
}

static enum qb_status relay_boxes(struct seal_job *j, struct qb_error *e)
{
	struct buf b = {0};
	enum sealer_message type;
	enum qb_status st = send_own_box(j, e);
	for (int n = 0; st == QB_OK && n < j->c->n; n++) {
		int i = next_box(j, &b);
		if (i < 0)
			st = qb_fail(e, QB_REFUSED, "sealing", NULL, "not all contributions came in time");
		else if (!seal_channel_send(j->channel, SEALER_BOX, b.data, b.len) ||
		         !seal_channel_receive(j->channel, &type, &b))
			st = qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer is gone");
		else if (type != SEALER_ACCEPTED)
			st = qb_fail(e, QB_CRYPTO, "sealing", "follow custody.md",
			             "the contribution of %s is not the committed one", j->c->custodian[i].party->name);
	}
	buf_free(&b);
	return st;
}

static enum qb_status read_slots(struct seal_job *j, struct buf *messages, struct buf *last, struct qb_error *e)
{
	enum sealer_message type;
	struct sealed_message m;
	for (int64_t n = 0;; n++) {
		struct buf b = {0};
		if (!seal_channel_receive(j->channel, &type, &b))
			return qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer is gone");
		if (type == SEALER_DONE && n == j->c->n_slots + 1 && b.len >= 8 + 64) {
			*last = b;
			return QB_OK;
		}
		if (type != SEALER_RECORD || n > j->c->n_slots) {
			enum qb_status st = qb_fail(e, QB_REFUSED, "sealing", NULL, "%.300s",
			                            type == SEALER_FAILED && b.data != NULL
			                                ? (const char *)b.data
			                                : "the sealer gave the wrong number of records");
			buf_free(&b);
			return st;
		}
		messages[n] = b;
		if (sealed_message_read(&messages[n], &m, e) != QB_OK || m.slot != n - 1)
			return qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer's message is malformed");
		pthread_mutex_lock(&j->o->lock);
		j->done = n;
		pthread_mutex_unlock(&j->o->lock);
	}
}

static enum qb_status store_recipes(struct txn *t, const struct campaign *c, struct sealed_message *m,
                                    struct transcript *all, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	uint8_t station, place;
	const uint8_t *recipe;
	uint32_t n;
	while (st == QB_OK && sealed_message_recipe(m, &station, &place, &recipe, &n)) {
		if (station >= c->plan->network->n_stations)
			return qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer's message is malformed");
		transcript_field(all, recipe, n);
		st = store_recipe_put(t->o->store, c->id, m->slot, c->plan->network->stations[station].name, place,
		                      recipe, n, e);
	}
	if (st == QB_OK && m->recipes.bad)
		st = qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer's message is malformed");
	return st;
}

/* What the statement at the end of a run is about, gathered while it is stored. */
struct stored {
	struct transcript recipes, output;
	uint8_t recipes_hash[64], statement[64];
};

static enum qb_status store_slot(struct txn *t, const struct campaign *c, const struct buf *message, struct stored *all,
                                 struct qb_error *e)
{
	struct sealed_message m;
	struct record rec;
	enum qb_status st = sealed_message_read(message, &m, e);
	if (st == QB_OK)
		st = record_check(&c->group, m.record, m.record_n, &rec, e);
	if (st == QB_OK)
		st = record_expect(&rec, m.slot < 0 ? RECORD_SEED : RECORD_SLOT, m.slot < 0 ? 0 : (uint64_t)m.slot, e);
	if (st == QB_OK)
		st = put_sealed(t->o, c, &rec, m.slot, "", e);
	if (st == QB_OK && m.slot >= 0)
		st = store_slot_key_put(t->o->store, c->id, m.slot, m.boxed_key, m.boxed_key_n, e);
	if (st == QB_OK)
		st = store_recipes(t, c, &m, &all->recipes, e);
	if (st == QB_OK) {
		json_t *extra = json_object();
		seal_output_record(&all->output, rec.id, m.commitment);
		json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
		json_object_set_new(extra, "slot", json_integer(m.slot));
		json_object_set_new(extra, "record_id", json_hex_new(rec.id, 64));
		json_object_set_new(extra, "slot_key_commitment", json_hex_new(m.commitment, 64));
		st = txn_service_entry(t, "record", c, "the sealer gave it", extra, NULL, NULL, e);
	}
	return st;
}

static enum qb_status store_all(struct seal_job *j, const struct buf *messages, const struct buf *last,
                                struct qb_error *e)
{
	struct txn t;
	struct stored all;
	struct campaign *c = j->c;
	uint8_t signature[64];
	pthread_mutex_lock(&j->o->lock);
	transcript_begin(&all.recipes, "quietbell/1/recipe/all");
	seal_output_begin(&all.output, c->context.ctx, c->sealing_attempt, j->sealer_key);
	enum qb_status st = c->ending == ENDING_NONE
	                        ? txn_begin(&t, j->o, "sealed", e)
	                        : qb_fail(e, QB_REFUSED, "sealing", NULL, "the campaign was abandoned meanwhile");
	if (st == QB_OK) {
		for (int64_t n = 0; st == QB_OK && n <= c->n_slots; n++)
			st = store_slot(&t, c, &messages[n], &all, e);
		transcript_end(&all.recipes, all.recipes_hash);
		seal_output_end(&all.output, all.recipes_hash, all.statement);
		if (st == QB_OK)
			st = check_host(j, all.statement, last->data + 72, last->len - 72, signature, e);
		if (st == QB_OK) {
			json_t *extra = json_object();
			json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
			json_object_set_new(extra, "slots", json_integer(c->n_slots));
			json_object_set_new(extra, "recipes_hash", json_hex_new(all.recipes_hash, 64));
			json_object_set_new(extra, "host_signature", json_hex_new(signature, 64));
			st = txn_service_entry(&t, "sealed", c, "the sealer is done", extra, NULL, NULL, e);
		}
		if (st == QB_OK)
			st = txn_commit(&t, e);
		txn_end(&t);
	}
	pthread_mutex_unlock(&j->o->lock);
	return st;
}

static void close_failed(struct seal_job *j, const struct qb_error *why)
{
	struct txn t;
	struct qb_error e = {0};
	char line[900];
	qb_error_line(why, line, sizeof line);
	pthread_mutex_lock(&j->o->lock);
	(void)snprintf(j->failure, sizeof j->failure, "%.399s", line);
	log_event(j->o->settings.log, LOG_ERROR_, "sealing-failed", "campaign", j->c->name, "reason", line, NULL);
	if (j->started && !j->o->stopping && txn_begin(&t, j->o, "sealing-failed", &e) == QB_OK) {
		json_t *extra = json_object();
		json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)j->c->sealing_attempt));
		if (txn_service_entry(&t, "sealing-failed", j->c, line, extra, NULL, NULL, &e) != QB_OK ||
		    txn_commit(&t, &e) != QB_OK)
			log_event(j->o->settings.log, LOG_ERROR_, "sealing-not-closed", "reason", e.what, NULL);
		txn_end(&t);
	}
	pthread_mutex_unlock(&j->o->lock);
}

static void *seal_thread(void *arg)
{
	struct seal_job *j = arg;
	struct qb_error e = {0};
	struct buf last = {0}, *messages = QB_NEW_ARRAY(struct buf, (size_t)j->c->n_slots + 1);
	enum qb_status st = take_key(j, &e);
	if (st == QB_OK)
		st = enter_sealing(j, &e);
	if (st == QB_OK)
		st = relay_boxes(j, &e);
	if (st == QB_OK)
		st = read_slots(j, messages, &last, &e);
	if (st == QB_OK)
		st = store_all(j, messages, &last, &e);
	if (st != QB_OK)
		close_failed(j, &e);
	seal_channel_break(j->channel);
	for (int64_t n = 0; n <= j->c->n_slots; n++)
		buf_free(&messages[n]);
	qb_free(messages);
	buf_free(&last);
	pthread_mutex_lock(&j->o->lock);
	secret_free(&j->contribution);
	j->ended = true;
	pthread_cond_broadcast(&j->o->changed);
	pthread_mutex_unlock(&j->o->lock);
	return NULL;
}

void seal_job_cancel(struct ops *o, struct campaign *c)
{
	if (c->job == NULL)
		return;
	c->job->cancelled = true;
	seal_channel_break(c->job->channel);
	pthread_cond_broadcast(&o->changed);
}

void seal_job_stop(struct campaign *c)
{
	struct seal_job *j = c->job;
	if (j == NULL)
		return;
	pthread_mutex_lock(&j->o->lock);
	j->cancelled = true;
	seal_channel_break(j->channel);
	pthread_cond_broadcast(&j->o->changed);
	pthread_mutex_unlock(&j->o->lock);
	pthread_join(j->thread, NULL);
	for (int i = 0; i < CUSTODY_MAX; i++)
		buf_free(&j->boxes[i]);
	secret_free(&j->contribution);
	seal_channel_close(&j->channel);
	qb_free(j);
	c->job = NULL;
}

static enum qb_status open_channel(struct ops *o, struct seal_job *j, bool remote, struct qb_error *e)
{
	int to_fd, from_fd;
	pid_t pid;
	if (remote) {
		j->channel = seal_channel_remote();
		return QB_OK;
	}
	if (!o->settings.spawner.spawn(o->settings.spawner.state, &to_fd, &from_fd, &pid))
		return qb_fail(e, QB_FAULT, "seal", "see the service's log", "the sealer can't be started");
	j->channel = seal_channel_local(to_fd, from_fd, pid);
	return QB_OK;
}

static enum qb_status start_sealer(struct ops *o, struct campaign *c, struct seal_job *j, bool remote,
                                   struct qb_error *e)
{
	json_t *job = NULL;
	enum qb_status st = make_job(o, c, j, &job, e);
	if (st == QB_OK)
		st = open_channel(o, j, remote, e);
	if (st == QB_OK) {
		char *text = json_text(job);
		if (!seal_channel_send(j->channel, SEALER_JOB, text, strlen(text)))
			st = qb_fail(e, QB_FAULT, "seal", "see the service's log", "the sealer ended at once");
		qb_free(text);
		if (st == QB_OK && pthread_create(&j->thread, NULL, seal_thread, j) != 0)
			st = qb_fail(e, QB_FAULT, "seal", NULL, "no thread can be made");
		if (st != QB_OK) {
			seal_channel_break(j->channel);
			seal_channel_close(&j->channel);
		}
	}
	json_decref(job);
	return st;
}

void seal_job_drop(struct campaign *c)
{
	struct seal_job *j = c->job;
	if (j == NULL)
		return;
	pthread_join(j->thread, NULL);
	for (int i = 0; i < CUSTODY_MAX; i++)
		buf_free(&j->boxes[i]);
	seal_channel_close(&j->channel);
	qb_free(j);
	c->job = NULL;
}

enum qb_status seal_job_start(struct ops *o, struct campaign *c, bool remote, struct qb_error *e)
{
	seal_job_drop(c);
	struct seal_job *j = QB_NEW(struct seal_job);
	j->o = o;
	j->c = c;
	make_contribution(o, c, j);
	enum qb_status st = start_sealer(o, c, j, remote, e);
	if (st == QB_OK) {
		c->job = j;
	} else {
		secret_free(&j->contribution);
		qb_free(j);
	}
	return st;
}
