/* The noun `party`: invitations, enrolment, the list with fingerprints. */
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

static void code_hash(const char *code, uint8_t out[static 64])
{
	struct transcript t;
	transcript_begin(&t, "quietbell/1/party/code");
	transcript_text(&t, code);
	transcript_end(&t, out);
}

static enum qb_status run_invite(struct cli_call *c)
{
	uint8_t raw[15], hash[64];
	char hex[31], code[80];
	const char *role = cli_arg(c, 0), *name = cli_arg(c, 1);
	enum qb_status st = cli_connect(c);
	if (st != QB_OK)
		return st;
	/* The code carries role and name, so that enrolling needs nothing else; only its hash reaches the service. */
	random_bytes(raw, sizeof raw);
	hex_encode(hex, raw, sizeof raw);
	(void)snprintf(code, sizeof code, "%s.%s.%s", role, name, hex);
	code_hash(code, hash);
	json_t *extra = json_object();
	json_object_set_new(extra, "role", json_string(role));
	json_object_set_new(extra, "name", json_string(name));
	json_object_set_new(extra, "code_hash", json_hex_new(hash, 64));
	st = cli_post_entry(c, "/v1/parties", "invitation", NULL, cli_option(c, "reason"), extra, NULL, NULL);
	if (st == QB_OK && cli_wants_json(c)) {
		json_t *doc = json_object();
		json_object_set_new(doc, "code", json_string(code));
		cli_json(c, doc);
		json_decref(doc);
	} else if (st == QB_OK) {
		cli_print(c, "%s\n", code);
		cli_note(c, "Give this code to %s in person or by telephone; it works once.\n", name);
	}
	return st;
}

static enum qb_status run_enrol(struct cli_call *c)
{
	char role[64] = "", name[64] = "";
	const char *code = cli_arg(c, 0);
	if (sscanf(code, "%63[^.].%63[^.].", role, name) != 2)
		return qb_fail(&c->error, QB_USAGE, "code", "copy the whole code",
		               "'%.20s...' is not an invitation code", code);
	enum qb_status st = cli_connect(c);
	if (st == QB_OK && strcmp(c->home.name, name) != 0)
		st = qb_fail(&c->error, QB_USAGE, "code", "ask for an invitation in your own name",
		             "the invitation is for '%s', the key in this home is of '%s'", name, c->home.name);
	if (st != QB_OK)
		return st;
	json_t *extra = json_object(), *more = json_object();
	json_object_set_new(extra, "role", json_string(role));
	json_object_set_new(extra, "name", json_string(name));
	json_object_set_new(extra, "signing_key", json_hex_new(c->home.pub.sign, 32));
	json_object_set_new(extra, "exchange_key", json_hex_new(c->home.pub.exchange, 32));
	json_object_set_new(extra, "invitation", json_integer(-1));
	json_object_set_new(more, "code", json_string(code));
	st = cli_post_entry(c, "/v1/parties", "enrolment", NULL, "invited", extra, more, NULL);
	if (st == QB_OK)
		cli_note(c, "%s is enrolled as %s at %s.\n", name, role, c->link.url);
	return st;
}

static enum qb_status run_list(struct cli_call *c)
{
	enum qb_status st = cli_follow(c);
	if (st != QB_OK)
		return st;
	const struct view *v = &c->follow.view;
	json_t *list = json_array();
	if (!cli_wants_json(c))
		cli_print(c, "%-14s %-14s %s\n", "name", "role", "fingerprint");
	for (int i = 0; i < v->n_parties; i++) {
		struct party_public pub;
		char words[PARTY_FINGERPRINT_TEXT];
		memcpy(pub.sign, v->party[i]->signing_key, 32);
		memcpy(pub.exchange, v->party[i]->exchange_key, 32);
		party_fingerprint(&pub, words);
		json_t *j = json_object();
		json_object_set_new(j, "name", json_string(v->party[i]->name));
		json_object_set_new(j, "role", json_string(wire_role_word(v->party[i]->role)));
		json_object_set_new(j, "fingerprint", json_string(words));
		json_array_append_new(list, j);
		if (!cli_wants_json(c))
			cli_print(c, "%-14s %-14s %s\n", v->party[i]->name, wire_role_word(v->party[i]->role), words);
	}
	if (cli_wants_json(c))
		cli_json(c, list);
	json_decref(list);
	return QB_OK;
}

static const struct cli_option invite_options[] = {{"reason", "TEXT", false, "why, for the ledger"},
                                                   {NULL, NULL, false, NULL}};

const struct cli_verb cli_party_verbs[] = {
    {"party", "invite", "ROLE NAME", run_invite, invite_options, "prints an invitation code (administrator)",
     "quietbell party invite custodian ines"},
    {"party", "enrol", "CODE", run_enrol, NULL, "enrols this home's key with an invitation code",
     "quietbell party enrol custodian.ines.0123... --service http://127.0.0.1:8787"},
    {"party", "list", "", run_list, NULL, "lists the enrolled parties from the verified ledger",
     "quietbell party list"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
