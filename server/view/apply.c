/*
 * The projection: what the ledger says about parties and campaigns, leaf by leaf. The same code runs at start over the
 * stored ledger and after each commit, so a restart can't come to another state.
 */
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"
#include "server/custody/seed.h"
#include "server/view/keyholders.h"
#include "server/view/people.h"
#include "server/view/view.h"

struct fetch_state {
	const json_t *files;
};

static enum qb_status fetch_file(void *state, const char *name, struct buf *out, struct qb_error *e)
{
	const struct fetch_state *f = state;
	const char *text = json_string_value(json_object_get(f->files, name));
	if (text == NULL)
		return qb_fail(e, QB_NOT_FOUND, name, "draft with all files that the plan names",
		               "is not with the plan");
	buf_text(out, text);
	return QB_OK;
}

static void apply_start(struct view *v, const struct wire_entry *en)
{
	v->started = true;
	wire_entry_hex(en, "service_key", v->service_key, 32);
	sign_key_id(v->service_key, v->service_id);
	wire_entry_hex(en, "administrator_key", v->administrator_key, 32);
	v->rehearsal_clock = strcmp(wire_entry_text(en, "clock"), "rehearsal") == 0;
}

static enum qb_status apply_plan(struct view *v, const struct wire_entry *en, const struct entry *leaf,
                                 struct qb_error *e)
{
	struct campaign *c = QB_NEW(struct campaign);
	struct transcript t;
	uint8_t hash[64];
	transcript_begin(&t, "quietbell/1/campaign/id");
	transcript_field(&t, leaf->body, leaf->body_len);
	transcript_end(&t, hash);
	memcpy(c->id, hash, 16);
	c->plan_seq = (int64_t)leaf->seq;
	c->drafted_ns = leaf->received_gps_ns;
	(void)snprintf(c->drafted_by, sizeof c->drafted_by, "%s", en->by);
	c->plan_text = qb_strdup(wire_entry_text(en, "plan"));
	c->plan_files = json_text(wire_entry_json(en, "files"));
	struct fetch_state f = {wire_entry_json(en, "files")};
	enum qb_status st = plan_parse(c->plan_text, strlen(c->plan_text), "plan", fetch_file, &f, &c->plan, e);
	if (st != QB_OK) {
		campaign_free(&c);
		return st;
	}
	(void)snprintf(c->name, sizeof c->name, "%s", c->plan->campaign);
	c->rehearsal_clock = v->rehearsal_clock;
	c->sealing_attempt = c->reshare_attempt = c->repair_attempt = 1;
	c->sealing_seq = c->sealed_seq = c->closing_seq = c->hidden_count = c->ending_seq = NO_SEQ;
	c->ended_why = qb_strdup("");
	st = view_draft_keyholders(v, c, leaf->received_gps_ns, e);
	if (st != QB_OK) {
		campaign_free(&c);
		return st;
	}
	c->n_slots = slots_count(&c->plan->slots);
	c->slot = QB_NEW_ARRAY(struct slot_public, (size_t)c->n_slots);
	for (int64_t i = 0; i < c->n_slots; i++)
		c->slot[i].freeze_seq = NO_SEQ;
	for (int i = 0; i < STATES_MAX_STATIONS; i++)
		c->witness_seq[i] = NO_SEQ;
	v->campaign = qb_realloc(v->campaign, (size_t)v->n_campaigns + 1, sizeof *v->campaign);
	v->campaign[v->n_campaigns++] = c;
	return QB_OK;
}

void campaign_free(struct campaign **cp)
{
	struct campaign *c = *cp;
	if (c == NULL)
		return;
	view_free_keyholders(c);
	for (int i = 0; i < c->n_openings; i++)
		qb_free(c->opening[i].positions);
	plan_free(&c->plan);
	qb_free(c->plan_text);
	qb_free(c->plan_files);
	qb_free(c->slot);
	qb_free(c->hold);
	qb_free(c->stop);
	qb_free(c->opening);
	qb_free(c->ended_why);
	qb_free(c);
	*cp = NULL;
}

static bool host_signed(const struct campaign *c, const struct wire_entry *en, const uint8_t statement[static 64])
{
	uint8_t signature[SIGN_BYTES];
	wire_entry_hex(en, "host_signature", signature, SIGN_BYTES);
	return c->plan->has_sealer_host && sign_verify(c->plan->sealer_host, statement, 64, signature);
}

/* Of the attempt that runs. What no honest service enters has no effect: a second set of records, records of none. */
static bool of_sealing(const struct campaign *c, const struct wire_entry *en, enum campaign_state state)
{
	return c->state == state && (uint64_t)wire_entry_int(en, "sealing_attempt") == c->sealing_attempt;
}

static void apply_sealing(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	const char *type = en->type->type;
	uint8_t statement[64], hash[64];
	if (strcmp(type, "sealing") == 0) {
		if (!of_sealing(c, en, C_REHEARSED))
			return;
		c->state = C_SEALING;
		c->sealing_records = 0;
		c->sealing_seq = (int64_t)leaf->seq;
		wire_entry_hex(en, "sealer_key", c->sealer_key, 32);
		wire_entry_hex(en, "service_commitment", c->service_commitment, 64);
		seal_key_statement(c->context.ctx, c->sealing_attempt, c->sealer_key, statement);
		c->host_signed_key = host_signed(c, en, statement);
	} else if (strcmp(type, "sealing-failed") == 0) {
		if (!of_sealing(c, en, C_SEALING))
			return;
		c->state = C_REHEARSED;
		c->sealing_attempt++;
		for (int i = 0; i < c->n; i++)
			c->custodian[i].commitment_seq = c->custodian[i].contribution_seq = NO_SEQ;
	} else if (strcmp(type, "record") == 0) {
		/* the seed's first, then the slots' in their order: each once */
		int64_t slot = wire_entry_int(en, "slot");
		if (!of_sealing(c, en, C_SEALING) || slot != c->sealing_records - 1 || slot >= c->n_slots)
			return;
		c->sealing_records++;
		if (slot < 0) {
			wire_entry_hex(en, "record_id", c->seed_record_id, 64);
		} else {
			wire_entry_hex(en, "record_id", c->slot[slot].record_id, 64);
			wire_entry_hex(en, "slot_key_commitment", c->slot[slot].slot_key_commitment, 64);
		}
	} else if (strcmp(type, "sealed") == 0) {
		if (!of_sealing(c, en, C_SEALING) || c->sealing_records != c->n_slots + 1)
			return;
		c->state = C_SEALED;
		c->sealed_seq = (int64_t)leaf->seq;
		wire_entry_hex(en, "recipes_hash", hash, 64);
		campaign_output_statement(c, 0, hash, statement);
		c->host_signed_output = host_signed(c, en, statement);
		c->last_batch_ns = leaf->received_gps_ns;
	} else if (strcmp(type, "prekeys") == 0) {
		int s = plan_station(c->plan, wire_entry_text(en, "station"));
		int64_t place = wire_entry_int(en, "place");
		if (s >= 0 && s == station_of_driver(c, en->by) && place == (int64_t)place_of_driver(c, en->by) &&
		    c->state < C_SEALING)
			c->prekeys[s][place] = true;
	}
}

static int station_or_all(const struct campaign *c, const char *name)
{
	return strcmp(name, "all") == 0 ? STATES_ALL : plan_station(c->plan, name);
}

static void apply_control(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	const char *type = en->type->type;
	int64_t at = leaf->received_gps_ns;
	if (strcmp(type, "witness-statement") == 0) {
		int s = plan_station(c->plan, wire_entry_text(en, "station"));
		if (s >= 0)
			c->witness_seq[s] = (int64_t)leaf->seq;
	}
	if (strcmp(type, "hold") == 0) {
		c->hold = qb_realloc(c->hold, (size_t)c->n_holds + 1, sizeof *c->hold);
		c->hold[c->n_holds++] =
		    (struct hold){(int64_t)leaf->seq,
		                  {station_or_all(c, wire_entry_text(en, "station")), wire_entry_gps(en, "from_gps"),
		                   wire_entry_gps(en, "to_gps"), at, STATES_NEVER}};
	} else if (strcmp(type, "stop") == 0) {
		c->stop = qb_realloc(c->stop, (size_t)c->n_stops + 1, sizeof *c->stop);
		c->stop[c->n_stops++] = (struct stop){
		    (int64_t)leaf->seq, {station_or_all(c, wire_entry_text(en, "station")), at, STATES_NEVER}};
	} else if (strcmp(type, "hold-lift") == 0) {
		for (int i = 0; i < c->n_holds; i++) {
			if (c->hold[i].seq == wire_entry_int(en, "hold"))
				c->hold[i].hold.lifted_ns = at;
		}
	} else if (strcmp(type, "stop-lift") == 0) {
		for (int i = 0; i < c->n_stops; i++) {
			if (c->stop[i].seq == wire_entry_int(en, "stop") && c->stop[i].seq != c->ending_seq)
				c->stop[i].stop.lifted_ns = at;
		}
	}
}

static uint8_t station_bits(const struct campaign *c, const json_t *names)
{
	unsigned bits = 0;
	size_t i;
	json_t *v;
	json_array_foreach(names, i, v)
	{
		int s = plan_station(c->plan, json_string_value(v));
		if (s >= 0)
			bits |= 1u << s;
	}
	return (uint8_t)bits;
}

static void apply_slot(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	const char *type = en->type->type;
	int64_t n = wire_entry_int(en, "slot");
	if (n < 0 || n >= c->n_slots)
		return;
	struct slot_public *s = &c->slot[n];
	if (strcmp(type, "freeze") == 0) {
		s->freeze_seq = (int64_t)leaf->seq;
		s->ready = station_bits(c, wire_entry_json(en, "ready"));
		s->going = station_bits(c, wire_entry_json(en, "going"));
		if (n >= c->next_freeze)
			c->next_freeze = n + 1;
		return;
	}
	int station = plan_station(c->plan, wire_entry_text(en, "station"));
	if (station < 0 || station != station_of_driver(c, en->by))
		return;
	if (strcmp(type, "play-report") == 0)
		s->reported = (uint8_t)(s->reported | 1u << station);
	else if (s->notes[station] < PLAY_NOTES_MAX)
		s->notes[station]++;
}

/* An end before the time: what was sealed is closed, and from here on a stop stands that nobody lifts. */
static void apply_ending(struct campaign *c, const struct wire_entry *en, const struct entry *leaf)
{
	bool early = strcmp(en->type->type, "early-closing") == 0;
	if (!early && strcmp(en->type->type, "abandonment") != 0)
		return;
	c->ending = early ? ENDING_EARLY : ENDING_ABANDONED;
	c->ended_ns = leaf->received_gps_ns;
	c->ending_seq = (int64_t)leaf->seq;
	(void)snprintf(c->ended_by, sizeof c->ended_by, "%s", en->by);
	qb_free(c->ended_why);
	c->ended_why = qb_strdup(en->why);
	if (c->state < C_SEALED)
		return;
	c->state = C_CLOSED;
	c->closing_seq = (int64_t)leaf->seq;
	c->stop = qb_realloc(c->stop, (size_t)c->n_stops + 1, sizeof *c->stop);
	c->stop[c->n_stops++] = (struct stop){(int64_t)leaf->seq, {STATES_ALL, leaf->received_gps_ns, STATES_NEVER}};
}

static void apply_opening(struct campaign *c, const struct wire_entry *en, const struct entry *leaf,
                          const uint8_t leaf_hash[static 32])
{
	const char *type = en->type->type;
	if (strcmp(type, "closing") == 0) {
		c->state = C_CLOSED;
		c->closing_seq = (int64_t)leaf->seq;
	} else if (strcmp(type, "hidden-summary") == 0) {
		c->hidden_count = wire_entry_int(en, "count");
		wire_entry_hex(en, "commitments_hash", c->hidden_hash, 64);
	} else if (strcmp(type, "opening-request") == 0) {
		struct opening op = {.scope = SCOPE_FULL,
		                     .seq = (int64_t)leaf->seq,
		                     .asked_ns = leaf->received_gps_ns,
		                     .deadline_ns = wire_entry_gps(en, "deadline_gps"),
		                     .reveal_ns = wire_entry_gps(en, "reveal_gps")};
		memcpy(op.id, leaf_hash, 16);
		memcpy(op.authority, leaf_hash, 32);
		memcpy(op.asker, leaf->author, 16);
		c->opening = qb_realloc(c->opening, (size_t)c->n_openings + 1, sizeof *c->opening);
		c->opening[c->n_openings++] = op;
	} else if (strcmp(type, "opened") == 0) {
		struct opening *op = opening_find(c, wire_entry_text(en, "opening"));
		if (op != NULL)
			op->opened = true;
		c->state = C_OPENED;
	}
}

static enum qb_status apply_campaign_entry(struct view *v, const struct wire_entry *en, const struct entry *leaf,
                                           const uint8_t leaf_hash[static 32], struct qb_error *e)
{
	char id[33];
	hex_encode(id, en->campaign, 16);
	struct campaign *c = view_campaign(v, id);
	if (c == NULL)
		return qb_fail(e, QB_FAULT, "ledger", "restore a backup", "leaf %llu is about an unknown campaign",
		               (unsigned long long)leaf->seq);
	const char *type = en->type->type;
	if (view_apply_keyholders(v, c, en, leaf, leaf_hash))
		return QB_OK;
	if (strcmp(type, "freeze") == 0 || strcmp(type, "play-report") == 0 || strcmp(type, "play-note") == 0) {
		apply_slot(c, en, leaf);
		return QB_OK;
	}
	apply_sealing(c, en, leaf);
	apply_control(c, en, leaf);
	apply_ending(c, en, leaf);
	apply_opening(c, en, leaf, leaf_hash);
	return QB_OK;
}

/* For a role that there is, and in nobody else's name. */
static bool enrolment_fits(const struct wire_entry *en, bool service)
{
	enum wire_role role;
	return wire_role_parse(wire_entry_text(en, "role"), &role) &&
	       (service || strcmp(en->by, wire_entry_text(en, "name")) == 0);
}

/*
 * The name in the text is the author's, and the author's role may author the type: whoever keeps the ledger could
 * otherwise sign as himself in other people's names. The leaf's signature was checked before.
 */
static enum qb_status check_author(const struct view *v, const struct wire_entry *en, const struct entry *leaf,
                                   struct qb_error *e)
{
	const struct view_party *p = view_party_acting(v, leaf->author);
	bool service = !v->started || memcmp(leaf->author, v->service_id, 16) == 0, good;
	char id[33];
	if (service && strcmp(en->type->type, "enrolment") == 0)
		/* the administrator, named when the service was created */
		good = strcmp(en->by, "service") == 0 && leaf->seq == 1 &&
		       strcmp(wire_entry_text(en, "role"), "administrator") == 0;
	else if (service)
		good = strcmp(en->by, "service") == 0 && (en->type->roles & ROLE_BIT(ROLE_SERVICE)) != 0;
	else if (p == NULL)
		good = strcmp(en->type->type, "enrolment") == 0 && strcmp(en->by, wire_entry_text(en, "name")) == 0 &&
		       strcmp(wire_entry_text(en, "role"), "administrator") != 0;
	else
		good = strcmp(en->by, p->name) == 0 && (en->type->roles & ROLE_BIT(p->role)) != 0;
	if (good && strcmp(en->type->type, "enrolment") == 0)
		good = enrolment_fits(en, service);
	if (good && p != NULL && en->has_campaign) {
		hex_encode(id, en->campaign, 16);
		const struct campaign *c = view_campaign(v, id);
		good = c == NULL || campaign_role(c, p) != ROLE_NONE;
		/* Once there is something sealed, the administrator alone can't bring a campaign down. */
		if (c != NULL && strcmp(en->type->type, "abandonment") == 0 && c->state >= C_SEALED)
			good = campaign_role(c, p) == ROLE_REVIEWER;
	}
	return good ? QB_OK
	            : qb_fail(e, QB_CRYPTO, "ledger", "do not trust this ledger",
	                      "leaf %llu says '%s' by '%.60s', which its signer may not say",
	                      (unsigned long long)leaf->seq, en->type->type, en->by);
}

enum qb_status view_apply(struct view *v, const struct entry *leaf, const uint8_t leaf_hash[static 32],
                          struct qb_error *e)
{
	struct wire_entry en;
	if (leaf->kind == ENTRY_HIDDEN)
		return QB_OK;
	enum qb_status st = wire_entry_parse((const char *)leaf->body, leaf->body_len, &en, e);
	if (st != QB_OK)
		return st;
	if ((st = check_author(v, &en, leaf, e)) != QB_OK) {
		wire_entry_free(&en);
		return st;
	}
	if (strcmp(en.type->type, "service-start") == 0)
		apply_start(v, &en);
	else if (view_apply_people(v, &en, leaf))
		view_renew_keyholders(v);
	else if (strcmp(en.type->type, "plan") == 0)
		st = apply_plan(v, &en, leaf, e);
	else if (en.has_campaign)
		st = apply_campaign_entry(v, &en, leaf, leaf_hash, e);
	wire_entry_free(&en);
	return st;
}
