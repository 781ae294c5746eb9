/* Who holds shares, over time: asking for a resharing, for the repair of a lost share, for a rehearsal; leaving out. */
#include <string.h>

#include "client/cli/internal.h"
#include "client/cli/keygen.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

static enum qb_status post(struct cli_call *c, const struct campaign *k, const char *type, json_t *extra)
{
	char *path = text_printf("/v1/campaigns/%s/keygen/%s", k->name, type);
	enum qb_status st = cli_post_entry(c, path, type, k->id, cli_option(c, "reason"), extra, NULL, NULL);
	qb_free(path);
	return st;
}

/* The names of an option, or else the first k custodians in office but one. */
static enum qb_status names_or_first(struct cli_call *c, const struct campaign *k, const char *option,
                                     const char *except, json_t *out)
{
	enum qb_status st = cli_option_names(c, option, out);
	if (st != QB_OK || cli_option(c, option) != NULL)
		return st;
	for (int i = 0; i < k->n && (int)json_array_size(out) < k->k; i++) {
		const char *name = k->custodian[i].party->name;
		if (!campaign_blamed(k, name) && (except == NULL || strcmp(name, except) != 0))
			json_array_append_new(out, json_string(name));
	}
	return QB_OK;
}

/* `--end`: what is under way is given up; the entry stands in its author's name. */
static enum qb_status end(struct cli_call *c, const struct campaign *k, bool under_way, uint64_t attempt,
                          const char *type)
{
	if (!under_way)
		return qb_fail(&c->error, QB_REFUSED, "--end", "see quietbell campaign show", "nothing is under way");
	json_t *extra = json_object();
	json_object_set_new(extra, "attempt", json_integer((json_int_t)attempt));
	enum qb_status st = post(c, k, type, extra);
	if (st == QB_OK)
		cli_note(c, "Attempt %llu is over; nothing has changed.\n", (unsigned long long)attempt);
	return st;
}

static enum qb_status ask_reshare(struct cli_call *c, const struct campaign *k)
{
	int64_t needed;
	json_t *names = json_array(), *dealers = json_array(), *extra = json_object();
	enum qb_status st = cli_option_int(c, "needed", 2, CUSTODY_MAX, k->k, &needed);
	if (st == QB_OK)
		st = cli_option_names(c, "to", names);
	if (st == QB_OK && json_array_size(names) == 0)
		st = qb_fail(&c->error, QB_USAGE, "--to", "name the whole new set", "is needed");
	if (st == QB_OK)
		st = names_or_first(c, k, "dealers", NULL, dealers);
	json_object_set_new(extra, "names", names);
	json_object_set_new(extra, "dealers", dealers);
	if (st != QB_OK) {
		json_decref(extra);
		return st;
	}
	json_object_set_new(extra, "needed", json_integer(needed));
	st = post(c, k, "reshare-request", extra);
	if (st == QB_OK)
		cli_note(c,
		         "Attempt %llu: the dealers and everybody of the new set now run quietbell campaign keygen %s "
		         "--wait. "
		         "The present custodians stay in office until all of the new set have opened a canary.\n",
		         (unsigned long long)k->reshare_attempt, k->name);
	return st;
}

enum qb_status cli_reshare(struct cli_call *c)
{
	struct campaign *k;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	return cli_option(c, "end") != NULL ? end(c, k, k->reshare.under_way, k->reshare_attempt, "reshare-failed")
	                                    : ask_reshare(c, k);
}

static enum qb_status ask_repair(struct cli_call *c, const struct campaign *k)
{
	json_t *helpers = json_array(), *extra = json_object();
	enum qb_status st = names_or_first(c, k, "helpers", c->home.name, helpers);
	json_object_set_new(extra, "helpers", helpers);
	if (st == QB_OK)
		st = post(c, k, "repair-request", extra);
	else
		json_decref(extra);
	if (st == QB_OK)
		cli_note(c, "The helpers now run quietbell campaign keygen %s; this command waits for them.\n",
		         k->name);
	return st == QB_OK ? cli_keygen_part(c, cli_arg(c, 0), true, -1) : st;
}

enum qb_status cli_repair(struct cli_call *c)
{
	struct campaign *k;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	return cli_option(c, "end") != NULL ? end(c, k, k->repair.under_way, k->repair_attempt, "repair-failed")
	                                    : ask_repair(c, k);
}

enum qb_status cli_exclude(struct cli_call *c)
{
	struct campaign *k;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st != QB_OK)
		return st;
	json_t *extra = json_object();
	json_object_set_new(extra, "name", json_string(cli_arg(c, 1)));
	st = post(c, k, "exclusion", extra);
	if (st == QB_OK)
		cli_note(c, "%s is left out; the next attempt begins.\n", cli_arg(c, 1));
	return st;
}

enum qb_status cli_rehearse(struct cli_call *c)
{
	struct campaign *k;
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	int i = st == QB_OK ? custodian_index(k, c->home.name) : -1;
	if (st == QB_OK && i < 0)
		st = qb_fail(&c->error, QB_REFUSED, "campaign", NULL, "%s is no custodian of '%s'", c->home.name,
		             k->name);
	/* The canary that waits for this custodian is opened first; a fresh one is asked for when there is none. */
	if (st == QB_OK && k->custodian[i].rehearsal_seq != NO_SEQ)
		st = post(c, k, "rehearsal-request", NULL);
	if (st == QB_OK)
		st = cli_keygen_part(c, cli_arg(c, 0), false, -1);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		cli_print(c, "%d of %d custodians opened the newest canary, %d are needed\n", campaign_margin(k) + k->k,
		          k->n, k->k);
	return st;
}
