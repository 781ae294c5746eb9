/*
 * Inside the command line: the call object, and the one way in which verbs reach home, service and ledger.
 */
#ifndef QB_CLIENT_CLI_INTERNAL_H
#define QB_CLIENT_CLI_INTERNAL_H

#include "client/cli/cli.h"
#include "client/link/follow.h"
#include "client/link/home.h"
#include "client/link/transport.h"

#define CLI_MAX_ARGS    64
#define CLI_MAX_OPTIONS 64

struct cli_given {
	const char *name, *value;
};

struct cli_call {
	const struct cli_verb *verb;
	const char *args[CLI_MAX_ARGS];
	int n_args;
	struct cli_given options[CLI_MAX_OPTIONS];
	int n_options;
	struct qb_error error;
	/* opened on demand, closed by cli_disconnect */
	struct home home;
	struct link link;
	struct follow follow;
	bool has_home, has_link, has_follow;
};

extern const struct cli_option cli_common_options[];
extern const struct cli_verb *const cli_tables[]; /* NULL-ended; tables.c */

/* The home; create: make the directory. */
enum qb_status cli_home(struct cli_call *c, bool create) QB_MUST_USE;
/* Home unlocked and service contacted: requests are signed from here on. */
enum qb_status cli_connect(struct cli_call *c) QB_MUST_USE;
/* Also the ledger, verified up to its newest head. */
enum qb_status cli_follow(struct cli_call *c) QB_MUST_USE;
/* cli_follow, and the campaign by name or id from the verified ledger. */
enum qb_status cli_campaign(struct cli_call *c, const char *name, struct campaign **out) QB_MUST_USE;
void cli_disconnect(struct cli_call *c);

/*
 * Makes an entry and posts it: the whole of most verbs.
 *
 * Given:    path      of the route
 *           extra     members of the entry, taken over; more: further members of the request, taken over, may be NULL
 * Returned: *out      the answer, owned by the caller; may be NULL
 */
enum qb_status cli_post_entry(struct cli_call *c, const char *path, const char *type, const uint8_t *campaign,
                              const char *why, json_t *extra, json_t *more, json_t **out) QB_MUST_USE;

/* Verbs of the noun `campaign` and `opening` in files of their own. */
enum qb_status cli_witness(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_reshare(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_repair(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_exclude(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_close(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_abandon(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_rehearse(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_key_backup(struct cli_call *c) QB_MUST_USE;
enum qb_status cli_key_restore(struct cli_call *c) QB_MUST_USE;
/* Appends the names of a comma-separated option; nothing when it is absent. QB_USAGE */
enum qb_status cli_option_names(struct cli_call *c, const char *option, json_t *out) QB_MUST_USE;
/* What the custodians and whoever watches over them must see, for `campaign show`. keyholder_show.c */
void cli_show_custody(struct cli_call *c, const struct campaign *k);
/* Replaces the party's keys, here and in the ledger; the call goes on with the new ones. key_verbs.c */
enum qb_status cli_rotate(struct cli_call *c, const char *why) QB_MUST_USE;
/* The verb `slot guess`. */
enum qb_status cli_guess(struct cli_call *c) QB_MUST_USE;

#endif
