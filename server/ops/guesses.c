/*
 * Guesses: a sealed belief that a slot is live or null, given before it starts. Which slot is in the hidden entry, so
 * that the time can be held; the belief itself is in the record alone.
 */
#include <string.h>

#include "server/ops/internal.h"

/* The record is about the slot of the entry, and the slot is still to come. */
static enum qb_status check_slot(struct ops *o, const struct campaign *c, const struct accepted *a,
                                 const struct record *rec, struct qb_error *e)
{
	const struct slots *sl = &c->plan->slots;
	int64_t n = wire_entry_int(&a->entry, "slot");
	if (n < 0 || n >= c->n_slots)
		return qb_fail(e, QB_NOT_FOUND, "slot", "see quietbell slot list", "the campaign has no slot %lld",
		               (long long)n);
	if (now_locked(o) >= slots_start(sl, n))
		return qb_fail(e, QB_CONFLICT, "guess", "guess before a slot starts", "slot %lld has started",
		               (long long)n);
	if (rec->header.start_gps_ns != slots_start(sl, n) || rec->header.duration_ns != (uint64_t)sl->slot_ns)
		return qb_fail(e, QB_CRYPTO, "record: slot", NULL, "the record is about another slot than the entry");
	return QB_OK;
}

enum qb_status case_guess(struct ops *o, struct campaign *c, const struct ops_call *call, struct ops_reply *reply,
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
		st = submit_check(o, c, call, &a, RECORD_GUESS, &b, &rec, e);
	if (st == QB_OK)
		st = check_slot(o, c, &a, &rec, e);
	if (st == QB_OK)
		st = submit_take(o, c, call, &a, &rec, reply, e);
	buf_free(&b);
	accepted_free(&a);
	return st;
}
