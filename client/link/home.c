/* The home directory and the passphrase. */
#include "client/link/home.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <termios.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/json.h"
#include "server/base/text.h"

static enum qb_status make_private(const char *dir, struct qb_error *e)
{
	if (mkdir(dir, 0700) == 0 || errno == EEXIST)
		return QB_OK;
	return qb_fail(e, QB_IO, dir, "create its parent directory first", "can't be created: %s", strerror(errno));
}

static enum qb_status check_private(const char *path, struct qb_error *e)
{
	struct stat s;
	if (stat(path, &s) != 0)
		return qb_fail(e, QB_IO, path, "run quietbell key new first", "is not there");
	if ((s.st_mode & 077) != 0)
		return qb_fail(e, QB_REFUSED, path, "take the rights of group and others away (chmod go-rwx)",
		               "can be read by others");
	return QB_OK;
}

char *home_path(const struct home *h, const char *name)
{
	return text_printf("%s/%s", h->dir, name);
}

enum qb_status home_campaign_path(const struct home *h, const uint8_t campaign[static 16], const char *name, char **out,
                                  struct qb_error *e)
{
	char hex[33];
	hex_encode(hex, campaign, 16);
	char *all = home_path(h, "campaigns"), *own = text_printf("%s/%s", all, hex);
	enum qb_status st = make_private(all, e);
	if (st == QB_OK)
		st = make_private(own, e);
	*out = st == QB_OK ? text_printf("%s/%s", own, name) : NULL;
	qb_free(all);
	qb_free(own);
	return st;
}

/* A small JSON document of the home, or QB_NOT_FOUND. */
static enum qb_status read_json(const struct home *h, const char *name, json_t **out, struct qb_error *e)
{
	char *path = home_path(h, name);
	struct buf b = {0};
	enum qb_status st = QB_NOT_FOUND;
	*out = NULL;
	if (access(path, F_OK) == 0) {
		st = file_read(path, 1 << 20, &b, e);
		if (st == QB_OK)
			st = json_read((const char *)b.data, b.len, path, out, e);
	}
	buf_free(&b);
	qb_free(path);
	return st;
}

static enum qb_status write_json(const struct home *h, const char *name, const json_t *doc, struct qb_error *e)
{
	char *path = home_path(h, name), *text = json_pretty(doc);
	enum qb_status st = file_write(path, 0600, text, strlen(text), e);
	qb_free(text);
	qb_free(path);
	return st;
}

static enum qb_status read_public(struct home *h, struct qb_error *e)
{
	json_t *doc;
	const char *name;
	enum qb_status st = read_json(h, "key.pub", &doc, e);
	if (st == QB_NOT_FOUND)
		return QB_OK;
	if (st == QB_OK)
		st = json_str(doc, "name", "key.pub", &name, e);
	if (st == QB_OK && !text_is_name(name))
		st = qb_fail(e, QB_FORMAT, "key.pub: name", NULL, "is not a name");
	if (st == QB_OK)
		st = json_hex(doc, "signing_key", "key.pub", h->pub.sign, 32, e);
	if (st == QB_OK)
		st = json_hex(doc, "exchange_key", "key.pub", h->pub.exchange, 32, e);
	if (st == QB_OK) {
		(void)snprintf(h->name, sizeof h->name, "%s", name);
		sign_key_id(h->pub.sign, h->key_id);
		h->has_key = true;
	}
	json_decref(doc);
	return st;
}

static enum qb_status read_service(struct home *h, struct qb_error *e)
{
	json_t *doc;
	const char *url;
	enum qb_status st = read_json(h, "service.json", &doc, e);
	if (st == QB_NOT_FOUND)
		return QB_OK;
	if (st == QB_OK)
		st = json_str(doc, "url", "service.json", &url, e);
	if (st == QB_OK)
		st = json_hex(doc, "service_key", "service.json", h->service_key, 32, e);
	if (st == QB_OK) {
		(void)snprintf(h->url, sizeof h->url, "%s", url);
		h->has_service = true;
	}
	json_decref(doc);
	return st;
}

static enum qb_status write_public(const struct home *h, const char *file, const char *name,
                                   const struct party_key *key, struct qb_error *e)
{
	struct party_public pub;
	party_key_public(key, &pub);
	json_t *doc = json_object();
	json_object_set_new(doc, "name", json_string(name));
	json_object_set_new(doc, "signing_key", json_hex_new(pub.sign, 32));
	json_object_set_new(doc, "exchange_key", json_hex_new(pub.exchange, 32));
	enum qb_status st = write_json(h, file, doc, e);
	json_decref(doc);
	return st;
}

enum qb_status home_erase(const char *path, struct qb_error *e)
{
	struct stat info;
	uint8_t zeros[512] = {0};
	int fd = open(path, O_WRONLY | O_CLOEXEC | O_NOFOLLOW);
	if (fd < 0 && errno == ENOENT)
		return QB_OK;
	bool good = fd >= 0 && fstat(fd, &info) == 0 && S_ISREG(info.st_mode);
	for (off_t at = 0; good && at < info.st_size; at += (off_t)sizeof zeros) {
		size_t left = (size_t)(info.st_size - at), n = left < sizeof zeros ? left : sizeof zeros;
		good = pwrite(fd, zeros, n, at) == (ssize_t)n;
	}
	good = good && fsync(fd) == 0;
	if (fd >= 0)
		(void)close(fd);
	good = good && unlink(path) == 0;
	return good ? QB_OK
	            : qb_fail(e, QB_IO, path, "erase it by hand, and every copy", "can't be erased: %s",
	                      strerror(errno));
}

enum qb_status home_replace(const char *next, const char *now, struct qb_error *e)
{
	char *old = text_printf("%s.old", now);
	enum qb_status st = home_erase(old, e);
	if (st == QB_OK && link(now, old) != 0 && errno != ENOENT)
		st = qb_fail(e, QB_IO, now, NULL, "can't be replaced: %s", strerror(errno));
	if (st == QB_OK && rename(next, now) != 0)
		st = qb_fail(e, QB_IO, now, NULL, "can't be replaced: %s", strerror(errno));
	if (st == QB_OK)
		st = home_erase(old, e);
	qb_free(old);
	return st;
}

static enum qb_status move(const struct home *h, const char *from, const char *to, struct qb_error *e)
{
	char *a = home_path(h, from), *b = home_path(h, to);
	enum qb_status st = access(a, F_OK) == 0 ? home_replace(a, b, e) : QB_OK;
	qb_free(a);
	qb_free(b);
	return st;
}

/* A swap that was cut off between its two files is finished before anything reads them. */
static enum qb_status finish_swap(const struct home *h, struct qb_error *e)
{
	char *next = home_path(h, "key-next.qbk");
	bool pending = access(next, F_OK) == 0;
	qb_free(next);
	if (pending)
		return QB_OK;
	char *old = home_path(h, "key.qbk.old");
	enum qb_status st = home_erase(old, e);
	qb_free(old);
	return st == QB_OK ? move(h, "key-next.pub", "key.pub", e) : st;
}

enum qb_status home_open(const char *dir, bool create, struct home *out, struct qb_error *e)
{
	*out = (struct home){0};
	const char *home = getenv("HOME"), *given = dir != NULL ? dir : getenv("QUIETBELL_HOME");
	enum qb_status st = QB_OK;
	if (given != NULL) {
		out->dir = qb_strdup(given);
	} else if (home != NULL) {
		char *config = text_printf("%s/.config", home);
		if (create)
			(void)mkdir(config, 0755);
		out->dir = text_printf("%s/quietbell", config);
		qb_free(config);
	} else {
		return qb_fail(e, QB_USAGE, NULL, "give --home DIR", "there is no home directory");
	}
	if (create)
		st = make_private(out->dir, e);
	if (st == QB_OK)
		st = check_private(out->dir, e);
	if (st == QB_OK)
		st = finish_swap(out, e);
	if (st == QB_OK)
		st = read_public(out, e);
	if (st == QB_OK)
		st = read_service(out, e);
	if (st != QB_OK)
		home_close(out);
	return st;
}

void home_close(struct home *h)
{
	if (h->passphrase != NULL)
		wipe(h->passphrase, strlen(h->passphrase));
	qb_free(h->passphrase);
	if (h->unlocked)
		party_key_free(&h->key);
	qb_free(h->dir);
	*h = (struct home){0};
}

static enum qb_status ask(const char *prompt, char **out, struct qb_error *e)
{
	FILE *tty = fopen("/dev/tty", "r+");
	struct termios old, quiet;
	char line[KEYFILE_PASSPHRASE_MAX + 2];
	if (tty == NULL)
		return qb_fail(e, QB_USAGE, "passphrase",
		               "give --passphrase-file FILE or set QUIETBELL_PASSPHRASE_FILE",
		               "there is no terminal to ask on");
	bool terminal = tcgetattr(fileno(tty), &old) == 0;
	quiet = old;
	quiet.c_lflag &= ~(tcflag_t)ECHO;
	if (terminal)
		(void)tcsetattr(fileno(tty), TCSAFLUSH, &quiet);
	fprintf(tty, "%s: ", prompt);
	fflush(tty);
	bool got = fgets(line, sizeof line, tty) != NULL;
	if (terminal)
		(void)tcsetattr(fileno(tty), TCSAFLUSH, &old);
	fprintf(tty, "\n");
	fclose(tty);
	line[got ? strcspn(line, "\r\n") : 0] = '\0';
	enum qb_status st = QB_OK;
	if (line[0] == '\0')
		st = qb_fail(e, QB_USAGE, "passphrase", NULL, "is empty");
	else
		*out = qb_strdup(line);
	wipe(line, sizeof line);
	return st;
}

static enum qb_status from_file(struct home *h, const char *file, struct qb_error *e)
{
	struct buf b = {0};
	enum qb_status st = check_private(file, e);
	if (st == QB_OK)
		st = file_read(file, KEYFILE_PASSPHRASE_MAX, &b, e);
	if (st == QB_OK) {
		size_t n = b.len > 0 ? strcspn((const char *)b.data, "\r\n") : 0;
		if (n == 0)
			st = qb_fail(e, QB_FORMAT, file, "write the passphrase on its first line", "is empty");
		else
			h->passphrase = qb_memdup(b.data, n);
	}
	buf_wipe(&b);
	return st;
}

enum qb_status home_passphrase(struct home *h, const char *file, bool confirm, struct qb_error *e)
{
	char *again = NULL;
	if (h->passphrase != NULL)
		return QB_OK;
	if (file == NULL)
		file = getenv("QUIETBELL_PASSPHRASE_FILE");
	if (file != NULL)
		return from_file(h, file, e);
	enum qb_status st = ask("passphrase", &h->passphrase, e);
	if (st == QB_OK && confirm)
		st = ask("once more", &again, e);
	if (st == QB_OK && confirm && strcmp(again, h->passphrase) != 0)
		st = qb_fail(e, QB_USAGE, "passphrase", NULL, "the two are not the same");
	if (again != NULL)
		wipe(again, strlen(again));
	qb_free(again);
	return st;
}

enum qb_status home_unlock(struct home *h, const char *passphrase_file, bool rehearsal, struct qb_error *e)
{
	struct party_public pub;
	if (h->unlocked)
		return QB_OK;
	if (!h->has_key)
		return qb_fail(e, QB_IO, h->dir, "run quietbell key new --name NAME", "holds no key");
	enum qb_status st = home_passphrase(h, passphrase_file, false, e);
	char *path = home_path(h, "key.qbk");
	if (st == QB_OK)
		st = keyfile_read_party(path, h->passphrase, rehearsal, &h->key, e);
	if (st == QB_OK) {
		h->unlocked = true;
		party_key_public(&h->key, &pub);
		if (memcmp(&pub, &h->pub, sizeof pub) != 0)
			st = qb_fail(e, QB_FORMAT, h->dir, "restore both files from one backup",
			             "key.pub does not belong to key.qbk");
	}
	qb_free(path);
	return st;
}

enum qb_status home_key_new(struct home *h, const char *name, const struct party_key *key, enum keyfile_level level,
                            struct qb_error *e)
{
	char *path = home_path(h, "key.qbk");
	enum qb_status st = QB_OK;
	if (access(path, F_OK) == 0 || h->has_key)
		st = qb_fail(e, QB_REFUSED, path, "choose another --home",
		             "there is a key already, and it is never overwritten");
	if (st == QB_OK)
		st = keyfile_write_party(path, level, h->passphrase, key, e);
	if (st == QB_OK)
		st = write_public(h, "key.pub", name, key, e);
	if (st == QB_OK)
		st = read_public(h, e);
	qb_free(path);
	return st;
}

enum qb_status home_keys_stage(struct home *h, const struct party_key *key, struct qb_error *e)
{
	char *old = home_path(h, "key.qbk"), *next = home_path(h, "key-next.qbk");
	struct keyfile_info info = {0};
	struct buf b = {0};
	enum qb_status st = file_read(old, 1 << 16, &b, e);
	if (st == QB_OK)
		st = keyfile_inspect(b.data, b.len, &info, e);
	if (st == QB_OK)
		st = keyfile_write_party(next, info.level, h->passphrase, key, e);
	if (st == QB_OK)
		st = write_public(h, "key-next.pub", h->name, key, e);
	buf_free(&b);
	qb_free(old);
	qb_free(next);
	return st;
}

enum qb_status home_keys_staged(struct home *h, bool rehearsal, struct party_key *out, struct qb_error *e)
{
	char *next = home_path(h, "key-next.qbk");
	*out = (struct party_key){0};
	enum qb_status st =
	    access(next, F_OK) == 0 ? keyfile_read_party(next, h->passphrase, rehearsal, out, e) : QB_OK;
	qb_free(next);
	return st;
}

enum qb_status home_keys_swap(struct home *h, struct qb_error *e)
{
	enum qb_status st = move(h, "key-next.qbk", "key.qbk", e);
	return st == QB_OK ? move(h, "key-next.pub", "key.pub", e) : st;
}

void home_keys_use(struct home *h, struct party_key *fresh)
{
	party_key_free(&h->key);
	h->key = *fresh;
	*fresh = (struct party_key){0};
	party_key_public(&h->key, &h->pub);
	sign_key_id(h->pub.sign, h->key_id);
}

enum qb_status home_pin(struct home *h, const char *url, const uint8_t key[static SIGN_PUBLIC], struct qb_error *e)
{
	if (h->has_service && memcmp(h->service_key, key, 32) != 0)
		return qb_fail(e, QB_CRYPTO, url,
		               "ask the administrator by telephone; if the service was made anew, use a new --home",
		               "the service shows another key than the one pinned at first contact");
	if (h->has_service && strcmp(h->url, url) == 0)
		return QB_OK;
	json_t *doc = json_object();
	json_object_set_new(doc, "url", json_string(url));
	json_object_set_new(doc, "service_key", json_hex_new(key, 32));
	enum qb_status st = write_json(h, "service.json", doc, e);
	json_decref(doc);
	if (st == QB_OK) {
		(void)snprintf(h->url, sizeof h->url, "%s", url);
		memcpy(h->service_key, key, 32);
		h->has_service = true;
	}
	return st;
}
