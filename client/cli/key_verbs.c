/* The noun `key`: making, showing and re-encrypting a party's own keys. */
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/words.h"

/* Reproducible keys for rehearsals that documentation shows; marked so by the quick key file level. */
static enum qb_status key_from_seed(int64_t seed, const char *name, struct party_key *out, struct qb_error *e)
{
	struct transcript t;
	uint8_t h[64], wide[64], scalar[SCALAR_BYTES];
	transcript_begin(&t, "quietbell/1/rehearsal/key");
	transcript_u64(&t, (uint64_t)seed);
	transcript_text(&t, name);
	transcript_end(&t, h);
	transcript_begin(&t, "quietbell/1/rehearsal/exchange-key");
	transcript_u64(&t, (uint64_t)seed);
	transcript_text(&t, name);
	transcript_end(&t, wide);
	group_scalar_wide(scalar, wide);
	enum qb_status st = party_key_from(h, scalar, out, e);
	wipe(h, sizeof h);
	wipe(scalar, sizeof scalar);
	return st;
}

static void show(struct cli_call *c)
{
	char words[PARTY_FINGERPRINT_TEXT], id[33];
	uint8_t bytes[PARTY_FINGERPRINT_BYTES];
	struct buf spoken = {0};
	hex_encode(id, c->home.key_id, 16);
	party_fingerprint(&c->home.pub, words);
	party_fingerprint_bytes(&c->home.pub, bytes);
	words_put(bytes, sizeof bytes, &spoken);
	if (cli_wants_json(c)) {
		json_t *doc = json_object();
		json_object_set_new(doc, "name", json_string(c->home.name));
		json_object_set_new(doc, "key_id", json_string(id));
		json_object_set_new(doc, "signing_key", json_hex_new(c->home.pub.sign, 32));
		json_object_set_new(doc, "exchange_key", json_hex_new(c->home.pub.exchange, 32));
		json_object_set_new(doc, "fingerprint", json_string(words));
		json_object_set_new(doc, "fingerprint_words", json_string((const char *)spoken.data));
		cli_json(c, doc);
		json_decref(doc);
		buf_free(&spoken);
		return;
	}
	cli_print(c, "name         %s\nkey id       %s\nfingerprint  %s\nin words     %s\n", c->home.name, id, words,
	          (const char *)spoken.data);
	cli_print(c, "Compare the fingerprint by telephone before anybody relies on it.\n");
	buf_free(&spoken);
}

static enum qb_status run_new(struct cli_call *c)
{
	const char *name = cli_option(c, "name");
	int64_t seed;
	struct party_key key = {0};
	bool rehearsal = cli_option(c, "rehearsal") != NULL || cli_option(c, "rehearsal-seed") != NULL;
	enum qb_status st = cli_option_int(c, "rehearsal-seed", 0, INT64_MAX, -1, &seed);
	if (st == QB_OK && !text_is_name(name))
		st = qb_fail(&c->error, QB_USAGE, "--name", "use a-z, 0-9 and -, a letter first",
		             "'%.60s' is not a name", name);
	if (st == QB_OK)
		st = cli_home(c, true);
	if (st == QB_OK)
		st = home_passphrase(&c->home, cli_option(c, "passphrase-file"), true, &c->error);
	if (st != QB_OK)
		return st;
	if (seed >= 0)
		st = key_from_seed(seed, name, &key, &c->error);
	else
		party_key_new(&key);
	if (st == QB_OK)
		st = home_key_new(&c->home, name, &key, rehearsal ? KEYFILE_INTERACTIVE : KEYFILE_MODERATE, &c->error);
	if (st == QB_OK)
		show(c);
	if (key.seed != NULL)
		party_key_free(&key);
	return st;
}

static enum qb_status run_show(struct cli_call *c)
{
	enum qb_status st = cli_home(c, false);
	if (st == QB_OK && !c->home.has_key)
		st = qb_fail(&c->error, QB_IO, c->home.dir, "run quietbell key new --name NAME", "holds no key");
	if (st == QB_OK)
		show(c);
	return st;
}

static enum qb_status run_change(struct cli_call *c)
{
	enum qb_status st = cli_home(c, false);
	if (st == QB_OK)
		st = home_unlock(&c->home, cli_option(c, "passphrase-file"), true, &c->error);
	if (st != QB_OK)
		return st;
	struct home fresh = {.dir = c->home.dir};
	struct keyfile_info info;
	struct buf b = {0};
	char *path = home_path(&c->home, "key.qbk");
	st = file_read(path, 1 << 16, &b, &c->error);
	if (st == QB_OK)
		st = keyfile_inspect(b.data, b.len, &info, &c->error);
	if (st == QB_OK)
		st = home_passphrase(&fresh, cli_option(c, "new-passphrase-file"), true, &c->error);
	if (st == QB_OK)
		st = keyfile_write_party(path, info.level, fresh.passphrase, &c->home.key, &c->error);
	if (st == QB_OK)
		cli_print(c, "The passphrase of %s is changed.\n", path);
	if (fresh.passphrase != NULL)
		wipe(fresh.passphrase, strlen(fresh.passphrase));
	qb_free(fresh.passphrase);
	buf_free(&b);
	qb_free(path);
	return st;
}

/* Announces the staged keys; whether that was done before a crash, the ledger says. */
static enum qb_status announce(struct cli_call *c, const struct party_key *fresh, const char *why)
{
	struct party_public pub;
	uint8_t statement[64], proof[SIGN_BYTES], id[KEY_ID_BYTES];
	party_key_public(fresh, &pub);
	sign_key_id(pub.sign, id);
	const struct view_party *p = view_party_named(&c->follow.view, c->home.name);
	if (p != NULL && memcmp(p->key_id, id, sizeof id) == 0)
		return QB_OK;
	view_rotation_statement(c->home.key_id, &pub, statement);
	sign_bytes(fresh->seed, statement, sizeof statement, proof);
	json_t *extra = json_object();
	json_object_set_new(extra, "signing_key", json_hex_new(pub.sign, 32));
	json_object_set_new(extra, "exchange_key", json_hex_new(pub.exchange, 32));
	json_object_set_new(extra, "proof", json_hex_new(proof, SIGN_BYTES));
	return cli_post_entry(c, "/v1/parties", "key-rotation", NULL, why, extra, NULL, NULL);
}

enum qb_status cli_rotate(struct cli_call *c, const char *why)
{
	struct party_key fresh = {0};
	enum qb_status st = cli_follow(c);
	if (st == QB_OK)
		st = home_keys_staged(&c->home, c->link.rehearsal, &fresh, &c->error);
	if (st != QB_OK)
		return st;
	if (fresh.seed == NULL)
		party_key_new(&fresh);
	st = home_keys_stage(&c->home, &fresh, &c->error);
	if (st == QB_OK)
		st = announce(c, &fresh, why);
	if (st == QB_OK)
		st = home_keys_swap(&c->home, &c->error);
	if (st == QB_OK)
		home_keys_use(&c->home, &fresh);
	else
		party_key_free(&fresh);
	return st == QB_OK ? cli_follow(c) : st;
}

static enum qb_status run_rotate(struct cli_call *c)
{
	enum qb_status st = cli_rotate(c, cli_option(c, "reason"));
	if (st == QB_OK) {
		show(c);
		cli_note(c, "The old keys are gone from this home; shares and receipts stay.\n");
	}
	return st;
}

static const struct cli_option backup_options[] = {{"out", "FILE", true, "the text, to print and lock away"},
                                                   {NULL, NULL, false, NULL}};
static const struct cli_option restore_options[] = {
    {"name", "NAME", false, "with a party's keys: the name they were enrolled under"}, {NULL, NULL, false, NULL}};
static const struct cli_option rotate_options[] = {{"reason", "TEXT", true, "why, for the ledger"},
                                                   {NULL, NULL, false, NULL}};
static const struct cli_option new_options[] = {
    {"name", "NAME", true, "the party's name, as it will stand in the plan"},
    {"rehearsal", NULL, false, "a quick key file, accepted under a rehearsal clock only"},
    {"rehearsal-seed", "N", false, "keys from a fixed number, for reproducible rehearsals; implies --rehearsal"},
    {NULL, NULL, false, NULL}};
static const struct cli_option change_options[] = {
    {"new-passphrase-file", "FILE", false, "read the new passphrase from FILE (else asked)"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_key_verbs[] = {
    {"key", "new", "", run_new, new_options, "makes this party's signing and exchange keys",
     "quietbell key new --name ines"},
    {"key", "show", "", run_show, NULL, "shows name, key id and fingerprint", "quietbell key show"},
    {"key", "change-passphrase", "", run_change, change_options, "encrypts the key file under a new passphrase",
     "quietbell key change-passphrase"},
    {"key", "backup", "[CAMPAIGN]", cli_key_backup, backup_options,
     "writes the share of a campaign, or this party's keys, as text for paper, still under the passphrase",
     "quietbell key backup fells-spring --out share.txt"},
    {"key", "restore", "FILE", cli_key_restore, restore_options,
     "reads such a text back into this home; a wrong line is named",
     "quietbell key restore share.txt --home /media/new/home"},
    {"key", "rotate", "", run_rotate, rotate_options, "replaces this party's keys; the old ones sign it",
     "quietbell key rotate --reason 'yearly'"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
