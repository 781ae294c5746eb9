/* The noun `party`: invitations, enrolment, the list with fingerprints. */
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/words.h"

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
		cli_note(c,
		         "%s is enrolled as %s at %s.\nIf the name was enrolled before, the new keys count once %d "
		         "colleagues have compared the fingerprint and run quietbell party vouch.\n",
		         name, role, c->link.url, VIEW_VOUCHES);
	return st;
}

static enum qb_status post_person(struct cli_call *c, const char *name, const char *person)
{
	json_t *extra = json_object();
	json_object_set_new(extra, "name", json_string(name));
	json_object_set_new(extra, "person", json_string(person));
	return cli_post_entry(c, "/v1/parties", "same-person", NULL, cli_option(c, "reason"), extra, NULL, NULL);
}

static enum qb_status run_person(struct cli_call *c)
{
	enum qb_status st = cli_connect(c);
	if (st == QB_OK)
		st = post_person(c, cli_arg(c, 0), cli_arg(c, 1));
	if (st == QB_OK)
		cli_note(c, "%s counts as %s from now on: one person, one side in a campaign.\n", cli_arg(c, 0),
		         cli_arg(c, 1));
	return st;
}

static enum qb_status run_retire(struct cli_call *c)
{
	enum qb_status st = cli_connect(c);
	if (st != QB_OK)
		return st;
	json_t *extra = json_object();
	json_object_set_new(extra, "name", json_string(cli_arg(c, 0)));
	st = cli_post_entry(c, "/v1/parties", "retirement", NULL, cli_option(c, "reason"), extra, NULL, NULL);
	if (st == QB_OK)
		cli_note(c, "The keys of %s count for nothing from now on; what they signed before stays valid.\n",
		         cli_arg(c, 0));
	return st;
}

/* The fingerprint is typed as it was heard, in digits or words, and must be that of the keys that wait. */
static enum qb_status run_vouch(struct cli_call *c)
{
	char own[PARTY_FINGERPRINT_TEXT];
	uint8_t bytes[PARTY_FINGERPRINT_BYTES], typed[PARTY_FINGERPRINT_BYTES];
	struct qb_error ignored = {0};
	struct party_public pub;
	const char *name = cli_arg(c, 0), *heard = cli_option(c, "fingerprint");
	enum qb_status st = cli_follow(c);
	if (st != QB_OK)
		return st;
	const struct view_party *p = view_party_named(&c->follow.view, name);
	if (p == NULL || !p->has_pending)
		return qb_fail(&c->error, QB_CONFLICT, name, "see quietbell party list",
		               "has no new keys that wait for vouches");
	memcpy(pub.sign, p->pending.signing_key, 32);
	memcpy(pub.exchange, p->pending.exchange_key, 32);
	party_fingerprint(&pub, own);
	party_fingerprint_bytes(&pub, bytes);
	bool spoken = words_parse(heard, strlen(heard), typed, sizeof typed, &ignored) == QB_OK &&
	              memcmp(typed, bytes, sizeof typed) == 0;
	if (strcmp(own, heard) != 0 && !spoken)
		return qb_fail(
		    &c->error, QB_NO, "--fingerprint",
		    "if the person on the telephone insists on theirs, somebody else enrolled: tell everybody",
		    "the keys that wait have the fingerprint %s", own);
	json_t *extra = json_object();
	json_object_set_new(extra, "name", json_string(name));
	json_object_set_new(extra, "signing_key", json_hex_new(pub.sign, 32));
	json_object_set_new(extra, "exchange_key", json_hex_new(pub.exchange, 32));
	st = cli_post_entry(c, "/v1/parties", "vouch", NULL, cli_option(c, "reason"), extra, NULL, NULL);
	if (st == QB_OK)
		st = cli_follow(c);
	if (st == QB_OK) {
		p = view_party_named(&c->follow.view, name);
		if (p->has_pending)
			cli_note(c, "%d of %d vouches for the new keys of %s.\n", p->n_vouchers, VIEW_VOUCHES, name);
		else
			cli_note(c, "The new keys of %s count from now on.\n", name);
	}
	return st;
}

/* "retired", "2 keys", "new keys wait: 1 of 2 vouches"; "" when there is nothing to say. */
static void remark(const struct view_party *p, char *out, size_t size)
{
	size_t n = 0;
	out[0] = '\0';
	if (strcmp(p->person, p->name) != 0)
		n += (size_t)snprintf(out + n, size - n, " is %s;", p->person);
	if (p->retired)
		n += (size_t)snprintf(out + n, size - n, " retired;");
	if (p->n_past > 0)
		n += (size_t)snprintf(out + n, size - n, " key %d;", p->n_past + 1);
	if (p->has_pending)
		n += (size_t)snprintf(out + n, size - n, " new keys wait: %d of %d vouches;", p->n_vouchers,
		                      VIEW_VOUCHES);
	if (n > 0)
		out[n - 1] = '\0';
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
		char note[200];
		remark(v->party[i], note, sizeof note);
		struct buf spoken = {0};
		uint8_t bytes[PARTY_FINGERPRINT_BYTES];
		party_fingerprint_bytes(&pub, bytes);
		words_put(bytes, sizeof bytes, &spoken);
		json_object_set_new(j, "fingerprint", json_string(words));
		json_object_set_new(j, "fingerprint_words", json_string((const char *)spoken.data));
		json_object_set_new(j, "person", json_string(v->party[i]->person));
		json_object_set_new(j, "retired", json_boolean(v->party[i]->retired));
		json_object_set_new(j, "key", json_integer(v->party[i]->n_past + 1));
		json_object_set_new(j, "waiting_vouches",
		                    v->party[i]->has_pending ? json_integer(v->party[i]->n_vouchers) : json_null());
		json_array_append_new(list, j);
		if (!cli_wants_json(c))
			cli_print(c, "%-14s %-14s %s%s\n", v->party[i]->name, wire_role_word(v->party[i]->role), words,
			          note);
		if (!cli_wants_json(c) && cli_option(c, "words") != NULL)
			cli_print(c, "    %s\n", (const char *)spoken.data);
		buf_free(&spoken);
	}
	if (cli_wants_json(c))
		cli_json(c, list);
	json_decref(list);
	return QB_OK;
}

static const struct cli_option invite_options[] = {{"reason", "TEXT", false, "why, for the ledger"},
                                                   {NULL, NULL, false, NULL}};
static const struct cli_option why_options[] = {{"reason", "TEXT", true, "why, for the ledger"},
                                                {NULL, NULL, false, NULL}};
static const struct cli_option list_options[] = {
    {"words", NULL, false, "fingerprints in words, too, for the telephone"}, {NULL, NULL, false, NULL}};
static const struct cli_option vouch_options[] = {
    {"fingerprint", "TEXT", true, "of the new keys, as the person read it out"},
    {"reason", "TEXT", true, "how it was compared, for the ledger"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_party_verbs[] = {
    {"party", "invite", "ROLE NAME", run_invite, invite_options, "prints an invitation code (administrator)",
     "quietbell party invite custodian ines"},
    {"party", "enrol", "CODE", run_enrol, NULL, "enrols this home's key with an invitation code",
     "quietbell party enrol custodian.ines.0123... --service http://127.0.0.1:8787"},
    {"party", "list", "", run_list, list_options, "lists the enrolled parties from the verified ledger",
     "quietbell party list"},
    {"party", "person", "NAME PERSON", run_person, why_options,
     "says that a party is a person known under another name",
     "quietbell party person noor-night noor --reason 'the same Noor'"},
    {"party", "vouch", "NAME", run_vouch, vouch_options,
     "vouches for keys that replace lost ones, after comparing their fingerprint",
     "quietbell party vouch okoro --fingerprint 0123-4567-... --reason 'heard by telephone'"},
    {"party", "retire", "NAME", run_retire, why_options, "ends what a party's keys may do (administrator, or oneself)",
     "quietbell party retire okoro --reason 'laptop stolen'"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
