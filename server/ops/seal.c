/*
 * The service's side of a sealing: it starts the sealer, relays the boxed contributions, and takes over what comes
 * out. A thread a job reads the pipe; everything that changes the campaign happens under the lock in one transaction.
 */
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/ops/internal.h"
#include "server/ops/sealer_pipe.h"

#define SEAL_WAIT_S (24 * 3600)

struct sealed_slot {
	int64_t slot;
	uint8_t key[SLOT_KEY_BYTES], commitment[64];
	struct buf message; /* the sealer's message; the record and recipes are read from it */
};

struct seal_job {
	struct ops *o;
	struct campaign *c;
	pthread_t thread;
	int to_fd, from_fd;
	pid_t pid;
	bool started, ended; /* the campaign's projection says the rest */
	bool cancelled;
	struct buf boxes[CUSTODY_MAX]; /* waiting to be relayed, by custodian from 0 */
	bool relayed[CUSTODY_MAX];
	int64_t done;
	struct secret *contribution;
	uint8_t commitment[64];
	char failure[400];
};

enum qb_status slot_key_unbox(struct ops *o, const struct campaign *c, int64_t slot, const struct buf *boxed,
                              struct secret **out, struct qb_error *e)
{
	uint8_t ad[24];
	struct buf key = {0};
	memcpy(ad, c->id, 16);
	le64_store(ad + 16, (uint64_t)slot);
	enum qb_status st =
	    box_open(o->storage_key, "slot-key-at-rest", ad, sizeof ad, boxed->data, boxed->len, &key, e);
	if (st == QB_OK && key.len != SLOT_KEY_BYTES)
		st = qb_fail(e, QB_FAULT, "slot key", NULL, "has a bad length");
	if (st == QB_OK)
		*out = secret_from(key.data, key.len);
	buf_wipe(&key);
	return st;
}

static enum qb_status slot_key_box(struct ops *o, const struct campaign *c, const struct sealed_slot *s,
                                   struct buf *out, struct qb_error *e)
{
	uint8_t ad[24];
	memcpy(ad, c->id, 16);
	le64_store(ad + 16, (uint64_t)s->slot);
	return box_seal(o->storage_point, "slot-key-at-rest", ad, sizeof ad, s->key, sizeof s->key, sizeof s->key, out,
	                e);
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

static enum qb_status enter_sealing(struct seal_job *j, const uint8_t key[static 32], struct qb_error *e)
{
	struct txn t;
	json_t *extra = json_object();
	json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)j->c->sealing_attempt));
	json_object_set_new(extra, "sealer_key", json_hex_new(key, 32));
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

static enum qb_status relay_boxes(struct seal_job *j, struct qb_error *e)
{
	struct buf b = {0};
	enum sealer_message type;
	enum qb_status st = QB_OK;
	for (int n = 0; st == QB_OK && n < j->c->n; n++) {
		int i = next_box(j, &b);
		if (i < 0)
			st = qb_fail(e, QB_REFUSED, "sealing", NULL, "not all contributions came in time");
		else if (!sealer_write(j->to_fd, SEALER_BOX, b.data, b.len) || !sealer_read(j->from_fd, &type, &b))
			st = qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer is gone");
		else if (type != SEALER_ACCEPTED)
			st = qb_fail(e, QB_CRYPTO, "sealing", "follow custody.md",
			             "the contribution of %s is not the committed one", j->c->custodian[i].party->name);
	}
	buf_free(&b);
	return st;
}

static enum qb_status read_slots(struct seal_job *j, struct sealed_slot *slots, struct qb_error *e)
{
	enum sealer_message type;
	for (int64_t n = 0;; n++) {
		struct buf b = {0};
		if (!sealer_read(j->from_fd, &type, &b))
			return qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer is gone");
		if (type == SEALER_DONE && n == j->c->n_slots + 1) {
			buf_free(&b);
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
		struct cursor c = cursor_over(b.data, b.len);
		slots[n].slot = cursor_i64(&c);
		cursor_copy(&c, slots[n].key, SLOT_KEY_BYTES);
		cursor_copy(&c, slots[n].commitment, 64);
		slots[n].message = b;
		if (c.bad || slots[n].slot != n - 1)
			return qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer's message is malformed");
		pthread_mutex_lock(&j->o->lock);
		j->done = n;
		pthread_mutex_unlock(&j->o->lock);
	}
}

static enum qb_status store_recipes(struct txn *t, const struct campaign *c, const struct sealed_slot *s,
                                    struct cursor *at, struct transcript *all, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	while (st == QB_OK && at->left > 0) {
		uint8_t station = cursor_u8(at), place = cursor_u8(at);
		uint32_t n = cursor_u32(at);
		const uint8_t *recipe = cursor_take(at, n);
		if (recipe == NULL || station >= c->plan->network->n_stations)
			return qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer's message is malformed");
		transcript_field(all, recipe, n);
		st = store_recipe_put(t->o->store, c->id, s->slot, c->plan->network->stations[station].name, place,
		                      recipe, n, e);
	}
	return st;
}

static enum qb_status store_slot(struct txn *t, const struct campaign *c, const struct sealed_slot *s,
                                 struct transcript *all, struct qb_error *e)
{
	struct cursor at = cursor_over(s->message.data + 8 + 32 + 64, s->message.len - 8 - 32 - 64);
	struct record rec;
	struct buf boxed = {0};
	uint32_t n = cursor_u32(&at);
	const uint8_t *p = cursor_take(&at, n);
	enum qb_status st = p != NULL ? record_check(&c->group, p, n, &rec, e)
	                              : qb_fail(e, QB_FAULT, "sealing", NULL, "the sealer's message is malformed");
	if (st == QB_OK)
		st = record_expect(&rec, s->slot < 0 ? RECORD_SEED : RECORD_SLOT, s->slot < 0 ? 0 : (uint64_t)s->slot,
		                   e);
	if (st == QB_OK)
		st = put_sealed(t->o, c, &rec, s->slot, "", e);
	if (st == QB_OK && s->slot >= 0 && (st = slot_key_box(t->o, c, s, &boxed, e)) == QB_OK)
		st = store_slot_key_put(t->o->store, c->id, s->slot, boxed.data, boxed.len, e);
	if (st == QB_OK)
		st = store_recipes(t, c, s, &at, all, e);
	if (st == QB_OK) {
		json_t *extra = json_object();
		json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
		json_object_set_new(extra, "slot", json_integer(s->slot));
		json_object_set_new(extra, "record_id", json_hex_new(rec.id, 64));
		json_object_set_new(extra, "slot_key_commitment", json_hex_new(s->commitment, 64));
		st = txn_service_entry(t, "record", c, "the sealer gave it", extra, NULL, NULL, e);
	}
	buf_free(&boxed);
	return st;
}

static enum qb_status store_all(struct seal_job *j, const struct sealed_slot *slots, struct qb_error *e)
{
	struct txn t;
	struct transcript all;
	struct campaign *c = j->c;
	uint8_t hash[64];
	pthread_mutex_lock(&j->o->lock);
	transcript_begin(&all, "quietbell/1/recipe/all");
	enum qb_status st = txn_begin(&t, j->o, "sealed", e);
	if (st == QB_OK) {
		for (int64_t n = 0; st == QB_OK && n <= c->n_slots; n++)
			st = store_slot(&t, c, &slots[n], &all, e);
		transcript_end(&all, hash);
		if (st == QB_OK) {
			json_t *extra = json_object();
			json_object_set_new(extra, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
			json_object_set_new(extra, "slots", json_integer(c->n_slots));
			json_object_set_new(extra, "recipes_hash", json_hex_new(hash, 64));
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
	struct buf b = {0};
	enum sealer_message type;
	struct sealed_slot *slots = QB_NEW_ARRAY(struct sealed_slot, (size_t)j->c->n_slots + 1);
	enum qb_status st = QB_OK;
	if (!sealer_read(j->from_fd, &type, &b) || type != SEALER_KEY || b.len != POINT_BYTES)
		st = qb_fail(&e, QB_FAULT, "sealing", NULL, "%.300s",
		             type == SEALER_FAILED && b.data != NULL ? (const char *)b.data
		                                                     : "the sealer did not start");
	if (st == QB_OK)
		st = enter_sealing(j, b.data, &e);
	if (st == QB_OK)
		st = relay_boxes(j, &e);
	if (st == QB_OK)
		st = read_slots(j, slots, &e);
	if (st == QB_OK)
		st = store_all(j, slots, &e);
	if (st != QB_OK) {
		kill(j->pid, SIGKILL);
		close_failed(j, &e);
	}
	close(j->to_fd);
	close(j->from_fd);
	(void)waitpid(j->pid, NULL, 0);
	for (int64_t n = 0; n <= j->c->n_slots; n++) {
		wipe(slots[n].key, SLOT_KEY_BYTES);
		buf_wipe(&slots[n].message);
	}
	qb_free(slots);
	buf_free(&b);
	pthread_mutex_lock(&j->o->lock);
	secret_free(&j->contribution);
	j->ended = true;
	pthread_cond_broadcast(&j->o->changed);
	pthread_mutex_unlock(&j->o->lock);
	return NULL;
}

void seal_job_stop(struct campaign *c)
{
	struct seal_job *j = c->job;
	if (j == NULL)
		return;
	pthread_mutex_lock(&j->o->lock);
	j->cancelled = true;
	if (!j->ended)
		kill(j->pid, SIGKILL);
	pthread_cond_broadcast(&j->o->changed);
	pthread_mutex_unlock(&j->o->lock);
	pthread_join(j->thread, NULL);
	for (int i = 0; i < CUSTODY_MAX; i++)
		buf_free(&j->boxes[i]);
	secret_free(&j->contribution);
	qb_free(j);
	c->job = NULL;
}

/* ---- the use cases ---- */

static enum qb_status may_seal(const struct campaign *c, struct ops *o, struct qb_error *e)
{
	if (c->state != C_REHEARSED || (c->job != NULL && !c->job->ended))
		return qb_fail(e, QB_CONFLICT, "seal", "all custodians must have run quietbell campaign keygen",
		               "the campaign is %s",
		               c->job != NULL && !c->job->ended ? "sealing" : campaign_state_word(c->state));
	for (int i = 0; i < c->n; i++) {
		if (c->custodian[i].commitment_seq == NO_SEQ)
			return qb_fail(e, QB_CONFLICT, "seal", NULL, "%s has not committed to a contribution",
			               c->custodian[i].party->name);
	}
	for (int i = 0; i < c->plan->network->n_stations; i++) {
		if (!c->prekeys[i][RECIPE_MAIN])
			return qb_fail(e, QB_CONFLICT, "seal", "start its driver",
			               "the driver of %s has left no one-time keys",
			               c->plan->network->stations[i].name);
	}
	int unsigned_station = campaign_witness_missing(c);
	if (c->plan->phase == PLAN_OBSERVING && unsigned_station >= 0)
		return qb_fail(e, QB_CONFLICT, "seal", "let its operator run quietbell campaign witness",
		               "nobody has signed the witness channels of %s",
		               c->plan->network->stations[unsigned_station].name);
	if (now_locked(o) >= slots_freeze(&c->plan->slots, 0))
		return qb_fail(e, QB_CONFLICT, "seal", NULL, "the stretch has begun already");
	return QB_OK;
}

static enum qb_status start_sealer(struct ops *o, struct campaign *c, struct seal_job *j, struct qb_error *e)
{
	json_t *job = NULL;
	enum qb_status st = make_job(o, c, j, &job, e);
	if (st == QB_OK && !o->settings.spawner.spawn(o->settings.spawner.state, &j->to_fd, &j->from_fd, &j->pid))
		st = qb_fail(e, QB_FAULT, "seal", "see the service's log", "the sealer can't be started");
	if (st == QB_OK) {
		char *text = json_text(job);
		if (!sealer_write(j->to_fd, SEALER_JOB, text, strlen(text)) ||
		    !sealer_write(j->to_fd, SEALER_SERVICE, secret_view(j->contribution), CONTRIBUTION_BYTES))
			st = qb_fail(e, QB_FAULT, "seal", "see the service's log", "the sealer ended at once");
		qb_free(text);
		if (st == QB_OK && pthread_create(&j->thread, NULL, seal_thread, j) != 0)
			st = qb_fail(e, QB_FAULT, "seal", NULL, "no thread can be made");
		if (st != QB_OK) {
			kill(j->pid, SIGKILL);
			(void)waitpid(j->pid, NULL, 0);
			close(j->to_fd);
			close(j->from_fd);
		}
	}
	json_decref(job);
	return st;
}

/* An ended job's thread needs the lock no more, so it can be joined under it. */
static void drop_ended_job(struct campaign *c)
{
	struct seal_job *j = c->job;
	if (j == NULL)
		return;
	pthread_join(j->thread, NULL);
	for (int i = 0; i < CUSTODY_MAX; i++)
		buf_free(&j->boxes[i]);
	qb_free(j);
	c->job = NULL;
}

enum qb_status case_seal(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	struct accepted a;
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	if ((st = may_seal(c, o, e)) == QB_OK) {
		drop_ended_job(c);
		struct seal_job *j = QB_NEW(struct seal_job);
		j->o = o;
		j->c = c;
		make_contribution(o, c, j);
		st = enter_one(o, "seal-request", call, &a, reply, e);
		if (st == QB_OK)
			st = start_sealer(o, c, j, e);
		if (st == QB_OK) {
			c->job = j;
			char *path = text_printf("/v1/campaigns/%s/sealer", c->name);
			reply->http_status = 202;
			json_object_set_new(reply->doc, "progress", json_string(path));
			qb_free(path);
		} else {
			secret_free(&j->contribution);
			qb_free(j);
		}
	}
	accepted_free(&a);
	return st;
}

enum qb_status case_sealer(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                           struct qb_error *e)
{
	const struct seal_job *j = c->job;
	json_t *got = json_array();
	(void)o;
	(void)call;
	(void)e;
	int missing = 0;
	for (int i = 0; i < c->n; i++) {
		json_array_append_new(got, json_boolean(c->custodian[i].contribution_seq != NO_SEQ));
		missing += c->custodian[i].contribution_seq == NO_SEQ;
	}
	const char *state = c->state >= C_SEALED    ? "done"
	                    : j == NULL             ? "idle"
	                    : j->failure[0] != '\0' ? "failed"
	                    : !j->started           ? "starting"
	                    : missing > 0           ? "waiting"
	                                            : "drawing";
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "state", json_string(state));
	json_object_set_new(reply->doc, "done",
	                    json_integer(c->state >= C_SEALED ? c->n_slots
	                                 : j != NULL          ? j->done
	                                                      : 0));
	json_object_set_new(reply->doc, "of", json_integer(c->n_slots));
	json_object_set_new(reply->doc, "sealing_attempt", json_integer((json_int_t)c->sealing_attempt));
	json_object_set_new(reply->doc, "sealer_key",
	                    c->state == C_SEALING ? json_hex_new(c->sealer_key, 32) : json_null());
	json_object_set_new(reply->doc, "contributions", got);
	json_object_set_new(reply->doc, "failure",
	                    j != NULL && j->failure[0] != '\0' ? json_string(j->failure) : json_null());
	return QB_OK;
}

enum qb_status case_contribution(struct ops *o, struct campaign *c, const struct ops_call *call,
                                 struct ops_reply *reply, struct qb_error *e)
{
	struct accepted a;
	struct buf box = {0};
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	int i = custodian_index(c, a.entry.by);
	if (c->state != C_SEALING || c->job == NULL || c->job->ended ||
	    (uint64_t)wire_entry_int(&a.entry, "sealing_attempt") != c->sealing_attempt)
		st = qb_fail(e, QB_CONFLICT, "contribution", "wait for the sealer", "no sealer waits for it now");
	else if (c->custodian[i].contribution_seq != NO_SEQ)
		st = qb_fail(e, QB_CONFLICT, "contribution", NULL, "%s has contributed already", a.entry.by);
	else if (!base64_decode(wire_entry_text(&a.entry, "box"), &box) ||
	         box.len != CONTRIBUTION_BYTES + BOX_OVERHEAD_BYTES)
		st = qb_fail(e, QB_FORMAT, "contribution: box", NULL, "has a bad length");
	if (st == QB_OK)
		st = enter_one(o, "contribution", call, &a, reply, e);
	if (st == QB_OK) {
		c->job->boxes[i] = box;
		pthread_cond_broadcast(&o->changed);
	} else {
		buf_free(&box);
	}
	accepted_free(&a);
	return st;
}
