/*
 * The client's home directory: one party's keys, the service it talks to with the key pinned at first contact, and
 * what it remembers (its copy of the ledger, shares, receipts). Mode 0700; secrets are in key files under a passphrase.
 *
 *   key.qbk  key.pub  service.json  ledger.bin  campaigns/<id>/{share.qbk, contribution.qbk, ...}
 */
#ifndef QB_CLIENT_HOME_H
#define QB_CLIENT_HOME_H

#include <stdbool.h>

#include "server/custody/keyfile.h"
#include "server/custody/party.h"

struct home {
	char *dir;        /* owned */
	char *passphrase; /* owned, wiped; NULL until unlocked */
	char name[64];    /* the party's, "" without a key */
	bool has_key;     /* key.pub was read */
	struct party_public pub;
	uint8_t key_id[KEY_ID_BYTES];
	struct party_key key; /* empty until unlocked */
	bool unlocked;
	char url[256]; /* of the service, "" unknown */
	bool has_service;
	uint8_t service_key[SIGN_PUBLIC]; /* pinned */
};

/*
 * Given:    dir         NULL: $QUIETBELL_HOME, else ~/.config/quietbell
 *           create      make it when it is missing
 * Errors:   QB_REFUSED  others can read it; QB_IO, QB_FORMAT
 */
enum qb_status home_open(const char *dir, bool create, struct home *out, struct qb_error *e) QB_MUST_USE;
void home_close(struct home *h); /* wipes */

/* dir/name; the caller frees. home_campaign_path makes campaigns/<id hex>/ as needed. */
char *home_path(const struct home *h, const char *name);
enum qb_status home_campaign_path(const struct home *h, const uint8_t campaign[static 16], const char *name, char **out,
                                  struct qb_error *e) QB_MUST_USE;

/*
 * The passphrase: from the file (mode 0600 or 0400; its first line), else $QUIETBELL_PASSPHRASE_FILE, else asked on the
 * terminal without echo (twice when confirm). Kept in h->passphrase.
 *
 * Errors:   QB_USAGE    there is neither file nor terminal; QB_REFUSED others can read the file
 */
enum qb_status home_passphrase(struct home *h, const char *file, bool confirm, struct qb_error *e) QB_MUST_USE;
/* Reads key.qbk. rehearsal: key files of the interactive level are accepted. QB_CRYPTO: wrong passphrase. */
enum qb_status home_unlock(struct home *h, const char *passphrase_file, bool rehearsal, struct qb_error *e) QB_MUST_USE;
/* Writes key.qbk and key.pub (never over existing ones) with the passphrase set before. */
enum qb_status home_key_new(struct home *h, const char *name, const struct party_key *key, enum keyfile_level level,
                            struct qb_error *e) QB_MUST_USE;
/*
 * Replacing the party's keys, so that a crash at any point leaves the old or the new ones whole: the new ones are
 * staged (key-next.qbk, key-next.pub), announced to the service by the caller, and then take the place of the old ones,
 * which are gone after that.
 *
 * home_keys_staged: *out is empty when none are. home_keys_swap renames.
 */
enum qb_status home_keys_stage(struct home *h, const struct party_key *key, struct qb_error *e) QB_MUST_USE;
enum qb_status home_keys_staged(struct home *h, bool rehearsal, struct party_key *out, struct qb_error *e) QB_MUST_USE;
enum qb_status home_keys_swap(struct home *h, struct qb_error *e) QB_MUST_USE;
/* From here on the unlocked home has these keys; the caller's are taken over. */
void home_keys_use(struct home *h, struct party_key *fresh);
/*
 * A key file is erased: overwritten where it lies, then removed. What the disk or a backup keeps of it elsewhere is out
 * of reach. No file is no error.
 */
enum qb_status home_erase(const char *path, struct qb_error *e) QB_MUST_USE;
/* `next` takes the place of `now`, which is erased; a crash at any point leaves one of them whole under `now`. */
enum qb_status home_replace(const char *next, const char *now, struct qb_error *e) QB_MUST_USE;
/* Pins a service: url and key. QB_CRYPTO when another key is pinned already. */
enum qb_status home_pin(struct home *h, const char *url, const uint8_t key[static SIGN_PUBLIC],
                        struct qb_error *e) QB_MUST_USE;

#endif
