/* The use cases of a sealing: asking for it, its progress, contributions, and the post box of a sealer elsewhere. */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/ops/seal_job.h"

static enum qb_status may_seal(const struct campaign *c, struct ops *o, struct qb_error *e)
{
	if (c->state != C_REHEARSED || (c->job != NULL && !c->job->ended))
		return qb_fail(e, QB_CONFLICT, "seal", "all custodians must have run quietbell campaign keygen",
		               "the campaign is %s", c->job != NULL && !c->job->ended ? "sealing" : campaign_word(c));
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
	const struct plan_person *spare;
	for (int i = 0; (spare = plan_person(c->plan, DUTY_SPARE, i)) != NULL; i++) {
		if (!c->prekeys[plan_station(c->plan, spare->of)][RECIPE_SPARE])
			return qb_fail(e, QB_CONFLICT, "seal", "start the driver on the spare host",
			               "%s, the spare of %s, has left no one-time keys", spare->name, spare->of);
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

enum qb_status case_seal(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                         struct qb_error *e)
{
	struct accepted a;
	bool remote = json_is_true(json_object_get(call->body, "remote"));
	enum qb_status st = accept_entry(o, call, c, &a, e);
	if (st != QB_OK)
		return st;
	if (remote != c->plan->has_sealer_host)
		st = remote ? qb_fail(e, QB_REFUSED, "seal", "seal without --on", "the plan names no sealer host")
		            : qb_fail(e, QB_REFUSED, "seal", "give --on HOST-FILE", "the plan names a sealer host");
	if (st == QB_OK)
		st = may_seal(c, o, e);
	/* The request stands in the ledger before anything starts; a sealer that can't start leaves it without a
	 * sequel. */
	if (st == QB_OK)
		st = enter_one(o, "seal-request", call, &a, reply, e);
	if (st == QB_OK)
		st = seal_job_start(o, c, remote, e);
	if (st == QB_OK) {
		char *path = text_printf("/v1/campaigns/%s/sealer", c->name);
		reply->http_status = 202;
		json_object_set_new(reply->doc, "progress", json_string(path));
		qb_free(path);
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

/* ---- the post box ---- */

static enum qb_status post_box(const struct campaign *c, struct qb_error *e)
{
	if (c->job == NULL || !seal_channel_is_remote(c->job->channel))
		return qb_fail(e, QB_CONFLICT, "sealer", "seal with --on first",
		               "no sealer on another machine is awaited");
	return QB_OK;
}

enum qb_status case_sealer_collect(struct ops *o, struct campaign *c, const struct ops_call *call,
                                   struct ops_reply *reply, struct qb_error *e)
{
	int64_t from;
	bool closed;
	(void)o;
	enum qb_status st = post_box(c, e);
	if (st == QB_OK && !query_int(call->query, "from", 0, INT32_MAX, 0, &from))
		st = qb_fail(e, QB_RANGE, "query", "from=0..", "is out of range");
	if (st != QB_OK)
		return st;
	json_t *list = json_array();
	seal_channel_collect(c->job->channel, (uint64_t)from, list, &closed);
	reply->http_status = 200;
	reply->doc = json_object();
	json_object_set_new(reply->doc, "messages", list);
	json_object_set_new(reply->doc, "taken", json_integer((json_int_t)seal_channel_delivered(c->job->channel)));
	json_object_set_new(reply->doc, "closed", json_boolean(closed));
	return QB_OK;
}

enum qb_status case_sealer_deliver(struct ops *o, struct campaign *c, const struct ops_call *call,
                                   struct ops_reply *reply, struct qb_error *e)
{
	static const char *const keys[] = {"first", "messages", NULL};
	const json_t *list = json_object_get(call->body, "messages");
	int64_t first = 0;
	size_t i;
	json_t *m;
	(void)o;
	enum qb_status st = post_box(c, e);
	if (st == QB_OK)
		st = json_only(call->body, keys, "request", e);
	if (st == QB_OK)
		st = json_int(call->body, "first", "request", 0, INT32_MAX, &first, e);
	if (st == QB_OK && !json_is_array(list))
		st = qb_fail(e, QB_FORMAT, "request: messages", NULL, "is not a list");
	json_array_foreach(list, i, m)
	{
		struct buf body = {0};
		int64_t type;
		if (st == QB_OK)
			st = json_int(m, "type", "message", SEALER_KEY, SEALER_FAILED, &type, e);
		if (st == QB_OK)
			st = body_base64(m, "body", SEALER_MESSAGE_MAX, &body, e);
		if (st == QB_OK)
			st = seal_channel_deliver(c->job->channel, (uint64_t)first + i, (enum sealer_message)type,
			                          &body, e);
		buf_free(&body);
		if (st != QB_OK)
			break;
	}
	if (st == QB_OK) {
		reply->http_status = 200;
		reply->doc = json_object();
		json_object_set_new(reply->doc, "taken",
		                    json_integer((json_int_t)seal_channel_delivered(c->job->channel)));
	}
	return st;
}
