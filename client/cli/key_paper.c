/*
 * Copies of key files for paper, and back: what a custodian locks away, or leaves with somebody. The text holds the key
 * file as it is, encrypted under its passphrase, which is kept apart from it. No service is needed for either way.
 */
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/internal.h"
#include "client/cli/keygen_part.h"
#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/paper.h"

/* The campaign's id from this home's own copy of the ledger. */
static enum qb_status campaign_id(struct cli_call *c, const char *name, uint8_t id[static 16])
{
	struct follow f;
	enum qb_status st = follow_open(&f, &c->home, &c->error);
	if (st != QB_OK)
		return st;
	const struct campaign *k = view_campaign(&f.view, name);
	if (k != NULL)
		memcpy(id, k->id, 16);
	else
		st = qb_fail(&c->error, QB_NOT_FOUND, "campaign", "run quietbell campaign list once",
		             "this home's copy of the ledger has no campaign '%.60s'", name);
	follow_close(&f);
	return st;
}

enum qb_status cli_key_backup(struct cli_call *c)
{
	const char *campaign = cli_arg(c, 0);
	char *path = NULL, *title = NULL;
	uint8_t id[16];
	struct keyfile_info info;
	struct buf b = {0}, text = {0};
	enum qb_status st = cli_home(c, false);
	if (st == QB_OK && campaign != NULL) {
		if ((st = campaign_id(c, campaign, id)) == QB_OK)
			st = home_campaign_path(&c->home, id, SHARE_FILE, &path, &c->error);
		title = text_printf("Quietbell: share of %s in campaign %.60s. Useless without its passphrase.",
		                    c->home.name, campaign);
	} else if (st == QB_OK) {
		path = home_path(&c->home, "key.qbk");
		title = text_printf("Quietbell: keys of %s. Useless without their passphrase.", c->home.name);
	}
	if (st == QB_OK)
		st = file_read(path, PAPER_BYTES_MAX, &b, &c->error);
	if (st == QB_OK)
		st = keyfile_inspect(b.data, b.len, &info, &c->error);
	if (st == QB_OK) {
		paper_encode(b.data, b.len, title, &text);
		st = file_write(cli_option(c, "out"), 0600, text.data, text.len, &c->error);
	}
	if (st == QB_OK)
		cli_note(c, "Print %s, lock it away, and keep the passphrase somewhere else. Try the restore once.\n",
		         cli_option(c, "out"));
	buf_free(&b);
	buf_free(&text);
	qb_free(path);
	qb_free(title);
	return st;
}

static enum qb_status restore_share(struct cli_call *c, const struct buf *file)
{
	struct secret *payload = NULL;
	char *path = NULL;
	uint8_t id[16];
	enum qb_status st = home_passphrase(&c->home, cli_option(c, "passphrase-file"), false, &c->error);
	/* The payload begins with the campaign's id (keyfile.h); decrypting it also proves the copy and the passphrase.
	 */
	if (st == QB_OK)
		st = keyfile_decrypt(file->data, file->len, KEYFILE_SHARE, c->home.passphrase, true, &payload,
		                     &c->error);
	if (st != QB_OK)
		return st;
	memcpy(id, secret_view(payload), sizeof id);
	secret_free(&payload);
	st = home_campaign_path(&c->home, id, SHARE_FILE, &path, &c->error);
	if (st == QB_OK && access(path, F_OK) == 0)
		st = qb_fail(&c->error, QB_REFUSED, path, "move it away first", "a share is here already");
	if (st == QB_OK)
		st = file_write(path, 0600, file->data, file->len, &c->error);
	if (st == QB_OK)
		cli_note(c, "The share is in %s. Try it: quietbell opening rehearse CAMPAIGN.\n", path);
	qb_free(path);
	return st;
}

static enum qb_status restore_keys(struct cli_call *c, const struct buf *file)
{
	const char *name = cli_option(c, "name");
	struct secret *payload = NULL;
	struct party_key key = {0};
	struct keyfile_info info;
	if (name == NULL || !text_is_name(name))
		return qb_fail(&c->error, QB_USAGE, "--name", "give the name they were enrolled under",
		               "these are a party's keys");
	enum qb_status st = home_passphrase(&c->home, cli_option(c, "passphrase-file"), false, &c->error);
	if (st == QB_OK)
		st = keyfile_inspect(file->data, file->len, &info, &c->error);
	if (st == QB_OK)
		st = keyfile_decrypt(file->data, file->len, KEYFILE_PARTY, c->home.passphrase, true, &payload,
		                     &c->error);
	if (st == QB_OK)
		st = party_key_from(secret_view(payload), secret_view(payload) + 32, &key, &c->error);
	if (st == QB_OK)
		st = home_key_new(&c->home, name, &key, info.level, &c->error);
	if (st == QB_OK)
		cli_note(c, "The keys of %s are in %s.\n", name, c->home.dir);
	if (key.seed != NULL)
		party_key_free(&key);
	secret_free(&payload);
	return st;
}

enum qb_status cli_key_restore(struct cli_call *c)
{
	struct keyfile_info info;
	struct buf text = {0}, b = {0};
	enum qb_status st = cli_home(c, true);
	if (st == QB_OK)
		st = file_read(cli_arg(c, 0), PAPER_TEXT_MAX, &text, &c->error);
	if (st == QB_OK)
		st = paper_decode((const char *)text.data, text.len, &b, &c->error);
	if (st == QB_OK)
		st = keyfile_inspect(b.data, b.len, &info, &c->error);
	if (st == QB_OK)
		st = info.type == KEYFILE_SHARE ? restore_share(c, &b)
		     : info.type == KEYFILE_PARTY
		         ? restore_keys(c, &b)
		         : qb_fail(&c->error, QB_FORMAT, cli_arg(c, 0), NULL, "is neither a share nor a party's keys");
	buf_wipe(&text);
	buf_free(&b);
	return st;
}
