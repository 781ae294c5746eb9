/*
 * The order of a campaign's steps. The projection takes what comes; whoever verifies asks in addition whether each step
 * came when it was due, since a service that enters the closing after the opening would otherwise be believed.
 */
#include <inttypes.h>
#include <string.h>

#include "client/cli/bundle_verify.h"

#define TYPES_MAX 128

/* An entry of this type comes after one of the type `after` and never after one of the type `never_after`. */
static const struct {
	const char *type, *after, *never_after;
} steps[] = {
    {"certify", "deal", "canary"},
    {"canary", "certify", NULL},
    {"rehearsal", "canary", NULL},
    {"rehearsed", "rehearsal", NULL},
    {"seal-request", "rehearsed", "closing"},
    {"sealing", "seal-request", "closing"},
    {"contribution", "sealing", "closing"},
    {"record", "contribution", "closing"},
    {"sealed", "record", "closing"},
    {"freeze", "sealed", "closing"},
    {"play-note", "sealed", NULL},
    {"play-report", "sealed", NULL},
    {"reshare-request", "sealed", "opening-request"},
    {"reshared", "reshare-rehearsal", "opening-request"},
    {"hidden-summary", "sealed", "closing"},
    {"closing", "hidden-summary", "closing"},
    {"opening-request", "closing", "opened"},
    {"opening-shares", "opening-request", "opened"},
    {"opened", "opening-shares", "opened"},
    {"audit-signature", "opened", NULL},
};

static enum qb_status no(struct qb_error *e, uint64_t seq, const char *type, const char *what)
{
	return qb_fail(e, QB_NO, "bundle", "ask the custodians how this could happen", "entry %" PRIu64 " ('%s') %s",
	               seq, type, what);
}

static int type_index(const char *type)
{
	int n;
	const struct wire_entry_type *all = wire_entry_types(&n);
	const struct wire_entry_type *t = wire_entry_type(type);
	return t != NULL && n <= TYPES_MAX ? (int)(t - all) : -1;
}

static bool seen_type(const bool seen[TYPES_MAX], const char *type)
{
	return type != NULL && type_index(type) >= 0 && seen[type_index(type)];
}

/* An end before the time is a closing as far as the order goes. */
static const char *step_of(const struct verified *v, const struct wire_entry *en, const struct entry *leaf)
{
	bool ends = (int64_t)leaf->seq == v->k->ending_seq && v->k->ending_seq == v->k->closing_seq;
	return ends ? "closing" : en->type->type;
}

static enum qb_status check_step(const struct verified *v, const bool seen[TYPES_MAX], const struct wire_entry *en,
                                 const struct entry *leaf, struct qb_error *e)
{
	const char *type = step_of(v, en, leaf);
	for (size_t i = 0; i < sizeof steps / sizeof steps[0]; i++) {
		if (strcmp(steps[i].type, type) != 0)
			continue;
		if (!seen_type(seen, steps[i].after) || seen_type(seen, steps[i].never_after))
			return no(e, leaf->seq, type, "came before its time or after it");
	}
	if (strcmp(type, "freeze") == 0) {
		int64_t slot = wire_entry_int(en, "slot");
		if (slot < 0 || slot >= v->k->n_slots || leaf->received_gps_ns < slots_freeze(&v->k->plan->slots, slot))
			return no(e, leaf->seq, type, "came before its slot's lead");
	}
	if (strcmp(type, "closing") == 0) {
		struct entry before;
		struct wire_entry summary;
		if (leaf->seq == 0 || follow_entry(&v->follow, leaf->seq - 1, &before, &summary, NULL) != QB_OK)
			return no(e, leaf->seq, type, "does not follow the count of hidden entries");
		bool follows = strcmp(summary.type->type, "hidden-summary") == 0;
		wire_entry_free(&summary);
		if (!follows)
			return no(e, leaf->seq, type, "does not follow the count of hidden entries");
	}
	return QB_OK;
}

/* All had committed before the sealer ran, and all had contributed before it fixed a record. */
static enum qb_status check_contributions(const struct verified *v, int64_t first_record, struct qb_error *e)
{
	int n;
	const struct custodian *drawer = campaign_drawers(v->k, &n);
	for (int i = 0; i < n; i++) {
		const struct custodian *cu = &drawer[i];
		if (cu->commitment_seq == NO_SEQ || cu->commitment_seq > v->k->sealing_seq)
			return no(e, (uint64_t)v->k->sealing_seq, "sealing",
			          "came before all had committed themselves");
		if (cu->contribution_seq < v->k->sealing_seq || cu->contribution_seq > first_record)
			return no(e, (uint64_t)first_record, "record", "came before all had contributed to the draw");
	}
	return QB_OK;
}

enum qb_status verify_order(struct verified *v, struct qb_error *e)
{
	bool seen[TYPES_MAX] = {false};
	int64_t first_record = NO_SEQ, opened = NO_SEQ;
	enum qb_status st = QB_OK;
	for (uint64_t i = 0; st == QB_OK && i < v->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		if (follow_entry(&v->follow, i, &leaf, &en, NULL) != QB_OK)
			continue;
		if (en.has_campaign && memcmp(en.campaign, v->k->id, 16) == 0) {
			st = check_step(v, seen, &en, &leaf, e);
			if (type_index(step_of(v, &en, &leaf)) >= 0)
				seen[type_index(step_of(v, &en, &leaf))] = true;
			if (strcmp(en.type->type, "record") == 0 && first_record < v->k->sealing_seq)
				first_record = (int64_t)i;
			if (strcmp(en.type->type, "opened") == 0)
				opened = (int64_t)i;
		}
		wire_entry_free(&en);
	}
	if (st == QB_OK && v->k->state != C_OPENED)
		st = qb_fail(e, QB_NO, "bundle", "wait for the full opening", "the campaign is %s, not opened",
		             campaign_word(v->k));
	if (st == QB_OK)
		st = check_contributions(v, first_record, e);
	verify_note(v, "sealed by entry %" PRId64 ", closed by %" PRId64 ", opened by %" PRId64, v->k->sealed_seq,
	            v->k->closing_seq, opened);
	return st;
}
