/*
 * Canaries and rehearsals in the projection: who has shown that their share works, and who has not for how long. Every
 * opening's proof is checked again here, so that the margin that a campaign shows is nobody's mere statement.
 */
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/view/keyholders.h"

bool view_rehearsal_holds(const struct custody_group *g, const uint8_t *canary, size_t canary_n,
                          const uint8_t leaf[static 32], const struct wire_entry *en, uint32_t index)
{
	struct partial_authority auth = {.purpose = PARTIAL_REHEARSAL};
	struct record rec;
	struct partial p;
	struct buf share = {0};
	struct qb_error ignored = {0};
	memcpy(auth.hash, leaf, 32);
	CHECK(base64_decode(wire_entry_text(en, "share"), &share));
	bool good = record_check(g, canary, canary_n, &rec, &ignored) == QB_OK &&
	            partial_check(g, &rec, &auth, share.data, share.len, &p, &ignored) == QB_OK && p.i == index;
	buf_free(&share);
	return good;
}

int campaign_margin(const struct campaign *c)
{
	int opened = 0;
	for (int i = 0; i < c->n; i++)
		opened += c->custodian[i].rehearsal_seq != NO_SEQ;
	return opened - c->k;
}

int campaign_missed(const struct campaign *c, int i)
{
	const struct custodian *cu = &c->custodian[i];
	if (cu->rehearsal_seq != NO_SEQ || cu->unopened == 0)
		return 0;
	int64_t intervals = (c->canary_ns - cu->opened_ns) / c->plan->rehearsals_ns - 1;
	return intervals < 0 ? 0 : intervals < cu->unopened ? (int)intervals : cu->unopened;
}

static void apply_canary(struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                         const uint8_t leaf_hash[static 32])
{
	struct buf b = {0};
	bool first = c->state == C_DRAFTED;
	if (c->state > C_CLOSED ||
	    (first && (c->stalled || !view_all_did(c->custodian, c->n, offsetof(struct custodian, certify_seq)))))
		return;
	CHECK(base64_decode(wire_entry_text(en, "record"), &b));
	for (int i = 0; i < c->n; i++) {
		struct custodian *cu = &c->custodian[i];
		cu->unopened += !first && cu->rehearsal_seq == NO_SEQ;
		cu->rehearsal_seq = NO_SEQ;
		if (first)
			cu->opened_ns = leaf->received_gps_ns;
	}
	if (first) {
		c->state = C_CERTIFIED;
		c->step_ns = leaf->received_gps_ns;
		view_keep_founders(c);
	}
	qb_free(c->canary);
	c->canary = b.data;
	c->canary_n = b.len;
	c->canary_seq = (int64_t)leaf->seq;
	c->canary_ns = leaf->received_gps_ns;
	c->canary_index = campaign_next_canary(c);
	c->n_canaries++;
	memcpy(c->canary_leaf, leaf_hash, 32);
}

static void apply_rehearsal(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	int i = custodian_index(c, en->by);
	if (i < 0 || c->canary_seq == NO_SEQ || c->custodian[i].rehearsal_seq != NO_SEQ ||
	    !view_rehearsal_holds(&c->group, c->canary, c->canary_n, c->canary_leaf, en, (uint32_t)i + 1))
		return;
	c->custodian[i].rehearsal_seq = (int64_t)leaf->seq;
	c->custodian[i].unopened = 0;
	c->custodian[i].opened_ns = c->canary_ns;
	c->step_ns = leaf->received_gps_ns;
}

bool view_apply_rehearsals(struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                           const uint8_t leaf_hash[static 32])
{
	const char *type = en->type->type;
	if (strcmp(type, "canary") == 0) {
		apply_canary(c, en, leaf, leaf_hash);
	} else if (strcmp(type, "rehearsal") == 0) {
		apply_rehearsal(c, en, leaf);
	} else if (strcmp(type, "rehearsed") == 0) {
		if (c->state == C_CERTIFIED &&
		    view_all_did(c->custodian, c->n, offsetof(struct custodian, rehearsal_seq)))
			c->state = C_REHEARSED;
	} else {
		return strcmp(type, "rehearsal-request") == 0; /* the canary that follows it says all */
	}
	return true;
}
