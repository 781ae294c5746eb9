/* How a campaign ends: closing it, closing it early, abandoning it, and what is missing before that. */
#include <inttypes.h>
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

#define NAMED_REPORTS 12

struct missing {
	json_t *reports;    /* [{slot, station}], of slots that are over */
	json_t *segments;   /* stations without stated observing segments */
	json_t *rehearsals; /* custodians who have not opened the newest canary */
	bool batches_overdue, running;
	int margin;
};

static void missing_reports(const struct campaign *k, int64_t now_ns, json_t *list)
{
	for (int64_t n = 0; n < k->n_slots && slots_start(&k->plan->slots, n + 1) <= now_ns; n++) {
		for (int i = 0; campaign_reached(k, n) && i < k->plan->network->n_stations; i++) {
			if ((k->slot[n].reported >> i & 1) != 0)
				continue;
			json_t *j = json_object();
			json_object_set_new(j, "slot", json_integer(n));
			json_object_set_new(j, "station", json_string(k->plan->network->stations[i].name));
			json_array_append_new(list, j);
		}
	}
}

/* Stations that stated observing segments, a bit each; and when the last hidden leaf came. */
static void from_ledger(const struct cli_call *c, const struct campaign *k, unsigned *stated, int64_t *last_batch_ns)
{
	*stated = 0;
	*last_batch_ns = 0;
	for (uint64_t i = (uint64_t)k->plan_seq; i < c->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		if (entry_decode(c->follow.frame[i].data, c->follow.frame[i].len, &leaf, NULL) != QB_OK)
			continue;
		if (leaf.kind == ENTRY_HIDDEN) {
			*last_batch_ns = leaf.received_gps_ns;
			continue;
		}
		if (follow_entry(&c->follow, i, &leaf, &en, NULL) != QB_OK)
			continue;
		if (strcmp(en.type->type, "segments") == 0 && memcmp(en.campaign, k->id, 16) == 0 &&
		    strcmp(wire_entry_text(&en, "kind"), "observing") == 0)
			*stated |= 1u << plan_station(k->plan, wire_entry_text(&en, "station"));
		if (strcmp(en.type->type, "sealed") == 0 && memcmp(en.campaign, k->id, 16) == 0)
			*last_batch_ns = leaf.received_gps_ns;
		wire_entry_free(&en);
	}
}

static void find_missing(const struct cli_call *c, const struct campaign *k, struct missing *m)
{
	int64_t now = c->link.now_gps_ns, last;
	unsigned stated;
	*m = (struct missing){json_array(),      json_array(), json_array(), false, now < k->plan->slots.end_gps_ns,
	                      campaign_margin(k)};
	from_ledger(c, k, &stated, &last);
	missing_reports(k, now, m->reports);
	for (int i = 0; i < k->plan->network->n_stations; i++) {
		if ((stated >> i & 1) == 0)
			json_array_append_new(m->segments, json_string(k->plan->network->stations[i].name));
	}
	for (int i = 0; i < k->n; i++) {
		if (k->custodian[i].rehearsal_seq == NO_SEQ)
			json_array_append_new(m->rehearsals, json_string(k->custodian[i].party->name));
	}
	/* How many entries wait is nobody's to know before the closing; that batches come on time shows in the ledger.
	 */
	m->batches_overdue = k->state == C_SEALED && now - last > 2 * k->plan->batch_ns;
}

static json_t *missing_json(struct missing *m, bool good)
{
	json_t *doc = json_object();
	json_object_set_new(doc, "ready", json_boolean(good));
	json_object_set_new(doc, "running", json_boolean(m->running));
	json_object_set(doc, "reports_missing", m->reports);
	json_object_set(doc, "stations_without_segments", m->segments);
	json_object_set(doc, "custodians_not_rehearsed", m->rehearsals);
	json_object_set_new(doc, "custody_margin", json_integer(m->margin));
	json_object_set_new(doc, "hidden_batches_overdue", json_boolean(m->batches_overdue));
	return doc;
}

static void print_names(struct cli_call *c, const char *lead, const json_t *names)
{
	cli_print(c, "%s", lead);
	for (size_t i = 0; i < json_array_size(names); i++)
		cli_print(c, " %s", json_string_value(json_array_get(names, i)));
	cli_print(c, "%s\n", json_array_size(names) == 0 ? " none" : "");
}

static void print_missing(struct cli_call *c, const struct campaign *k, const struct missing *m)
{
	size_t n = json_array_size(m->reports);
	cli_print(c, "end of the stretch               %s\n", m->running ? "not reached: needs --early" : "reached");
	cli_print(c, "play reports missing             %zu\n", n);
	for (size_t i = 0; i < n && i < NAMED_REPORTS; i++) {
		const json_t *j = json_array_get(m->reports, i);
		cli_print(c, "                                 slot %" JSON_INTEGER_FORMAT " %s\n",
		          json_integer_value(json_object_get(j, "slot")),
		          json_string_value(json_object_get(j, "station")));
	}
	if (n > NAMED_REPORTS)
		cli_print(c, "                                 and %zu more\n", n - NAMED_REPORTS);
	print_names(c, "stations without segments       ", m->segments);
	print_names(c, "custodians yet to open a canary ", m->rehearsals);
	cli_print(c, "custody margin                   %d beyond the %d needed\n", m->margin, k->k);
	cli_print(c, "hidden batches                   %s\n",
	          m->batches_overdue ? "overdue: the service has entered none for long" : "on time");
}

static enum qb_status run_check(struct cli_call *c, const struct campaign *k)
{
	struct missing m;
	enum qb_status st = QB_OK;
	if (k->state != C_SEALED)
		return qb_fail(&c->error, QB_CONFLICT, "close", NULL, "the campaign is %s", campaign_word(k));
	find_missing(c, k, &m);
	bool good = !m.running && json_array_size(m.reports) == 0 && json_array_size(m.segments) == 0 &&
	            m.margin >= 0 && !m.batches_overdue;
	json_t *doc = missing_json(&m, good);
	if (cli_wants_json(c))
		cli_json(c, doc);
	else
		print_missing(c, k, &m);
	if (!good)
		st = qb_fail(&c->error, QB_NO, "close", NULL, "something is missing; nothing was changed");
	json_decref(doc);
	json_decref(m.reports);
	json_decref(m.segments);
	json_decref(m.rehearsals);
	return st;
}

static enum qb_status post(struct cli_call *c, const struct campaign *k, const char *tail, const char *type)
{
	char *path = text_printf("/v1/campaigns/%s/%s", k->name, tail);
	enum qb_status st = cli_post_entry(c, path, type, k->id, cli_option(c, "reason"), NULL, NULL, NULL);
	qb_free(path);
	return st;
}

enum qb_status cli_close(struct cli_call *c)
{
	struct campaign *k;
	bool early = cli_option(c, "early") != NULL, check = cli_option(c, "check") != NULL;
	enum qb_status st = QB_OK;
	if (early && check)
		st = qb_fail(&c->error, QB_USAGE, NULL, NULL, "--check changes nothing; leave out --early");
	else if (early && cli_option(c, "reason") == NULL)
		st = qb_fail(&c->error, QB_USAGE, "--early", "give --reason", "an end before the time needs a reason");
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK || check)
		return st != QB_OK ? st : run_check(c, k);
	st = post(c, k, "close", early ? "early-closing" : "closing");
	if (st == QB_OK)
		cli_print(c, "campaign %s is closed%s: no claim is taken any more\n", k->name,
		          early ? " early, the keys of what was not played are erased" : "");
	return st;
}

enum qb_status cli_abandon(struct cli_call *c)
{
	struct campaign *k;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		st = post(c, k, "abandon", "abandonment");
	if (st == QB_OK && k->state < C_SEALED)
		cli_print(c, "campaign %s is abandoned: nothing was sealed\n", k->name);
	else if (st == QB_OK)
		cli_print(c,
		          "campaign %s is abandoned: the keys of what was not played are erased; open it for the "
		          "partial audit\n",
		          k->name);
	return st;
}
