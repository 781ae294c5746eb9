/*
 * Incidents: somebody saw what the blind should have hidden. Which slots, what kind and what happened are in the sealed
 * record alone: "slot 31 was seen" would itself tell something.
 */
#include "server/ops/internal.h"

enum qb_status case_incident(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
                             struct qb_error *e)
{
	struct accepted a;
	struct buf b = {0};
	struct record rec;
	enum qb_status st = submit_open(c, e);
	if (st != QB_OK || (st = accept_entry(o, call, c, &a, e)) != QB_OK)
		return st;
	st = body_base64(call->body, "record", RECORD_BYTES_MAX, &b, e);
	if (st == QB_OK)
		st = submit_check(o, c, call, &a, RECORD_INCIDENT, &b, &rec, e);
	if (st == QB_OK)
		st = submit_take(o, c, call, &a, &rec, reply, e);
	buf_free(&b);
	accepted_free(&a);
	return st;
}
