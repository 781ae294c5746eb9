/* How verbs reach the home, the service and the verified ledger. */
#include "client/cli/internal.h"

#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

enum qb_status cli_home(struct cli_call *c, bool create)
{
	if (c->has_home)
		return QB_OK;
	enum qb_status st = home_open(cli_option(c, "home"), create, &c->home, &c->error);
	c->has_home = st == QB_OK;
	return st;
}

enum qb_status cli_connect(struct cli_call *c)
{
	if (c->has_link)
		return QB_OK;
	enum qb_status st = cli_home(c, false);
	if (st == QB_OK)
		st = link_open(&c->link, &c->home, cli_option(c, "service"), &c->error);
	if (st != QB_OK)
		return st;
	c->has_link = true;
	/* A key file of the quick level is for rehearsals: the service's kind of clock decides. */
	return home_unlock(&c->home, cli_option(c, "passphrase-file"), c->link.rehearsal, &c->error);
}

enum qb_status cli_follow(struct cli_call *c)
{
	enum qb_status st = cli_connect(c);
	if (st == QB_OK && !c->has_follow) {
		st = follow_open(&c->follow, &c->home, &c->error);
		c->has_follow = st == QB_OK;
	}
	if (st == QB_OK)
		st = follow_update(&c->follow, &c->link, &c->error);
	return st;
}

enum qb_status cli_campaign(struct cli_call *c, const char *name, struct campaign **out)
{
	enum qb_status st = cli_follow(c);
	if (st != QB_OK)
		return st;
	*out = view_campaign(&c->follow.view, name);
	return *out != NULL ? QB_OK
	                    : qb_fail(&c->error, QB_NOT_FOUND, "campaign", "see quietbell campaign list",
	                              "the ledger has no campaign '%.60s'", name);
}

void cli_disconnect(struct cli_call *c)
{
	if (c->has_follow)
		follow_close(&c->follow);
	if (c->has_link)
		link_close(&c->link);
	if (c->has_home)
		home_close(&c->home);
	c->has_follow = c->has_link = c->has_home = false;
}

enum qb_status cli_post_entry(struct cli_call *c, const char *path, const char *type, const uint8_t *campaign,
                              const char *why, json_t *extra, json_t *more, json_t **out)
{
	json_t *body = NULL;
	enum qb_status st = link_entry(&c->link, type, campaign, why, extra, &body, NULL, &c->error);
	if (out != NULL)
		*out = NULL;
	if (st == QB_OK && more != NULL)
		json_object_update(body, more);
	if (st == QB_OK)
		st = link_post(&c->link, path, body, out, &c->error);
	json_decref(more);
	json_decref(body);
	return st;
}

enum qb_status cli_option_names(struct cli_call *c, const char *option, json_t *out)
{
	const char *list = cli_option(c, option);
	for (const char *p = list != NULL ? list : ""; *p != '\0';) {
		size_t n = strcspn(p, ",");
		char *name = qb_memdup(p, n);
		bool good = text_is_name(name);
		if (good)
			json_array_append_new(out, json_string(name));
		qb_free(name);
		if (!good)
			return qb_fail(&c->error, QB_USAGE, option, "give names with commas between them",
			               "'%.60s' is no list of names", list);
		p += n + (p[n] == ',');
	}
	return QB_OK;
}
