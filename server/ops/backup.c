/*
 * Backup and restore. Two files: a copy of the store, in which nothing is readable that was not in the service's own
 * store, and FILE.keys with the service's two keys under a passphrase. They can be kept in two places.
 */
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "server/base/alloc.h"
#include "server/base/text.h"
#include "server/custody/keyfile.h"
#include "server/ops/internal.h"

static enum qb_status write_keys(const char *path, const char *passphrase, const struct secret *seed,
                                 const struct secret *storage, struct qb_error *e)
{
	struct secret *both = secret_new(2 * 32);
	memcpy(secret_bytes(both), secret_view(seed), 32);
	memcpy(secret_bytes(both) + 32, secret_view(storage), 32);
	enum qb_status st = keyfile_write(path, KEYFILE_OTHER, KEYFILE_MODERATE, passphrase, both, e);
	secret_free(&both);
	return st;
}

enum qb_status ops_backup(const char *data_dir, const char *file, const char *passphrase, struct qb_error *e)
{
	struct secret *seed = NULL, *storage = NULL;
	char *store = text_printf("%s/store.sqlite", data_dir), *keys = text_printf("%s.keys", file);
	enum qb_status st = access(keys, F_OK) == 0
	                        ? qb_fail(e, QB_CONFLICT, keys, "choose another name", "is there already")
	                        : ops_key_read(data_dir, "service.key", &seed, e);
	if (st == QB_OK)
		st = ops_key_read(data_dir, "storage.key", &storage, e);
	if (st == QB_OK)
		st = store_copy(store, file, e);
	if (st == QB_OK) {
		st = write_keys(keys, passphrase, seed, storage, e);
		if (st != QB_OK)
			(void)unlink(file);
	}
	secret_free(&seed);
	secret_free(&storage);
	qb_free(store);
	qb_free(keys);
	return st;
}

static enum qb_status put_keys(const char *data_dir, const struct secret *both, struct qb_error *e)
{
	struct secret *seed = secret_from(secret_view(both), 32), *storage = secret_from(secret_view(both) + 32, 32);
	enum qb_status st = ops_key_new(data_dir, "service.key", seed, e);
	if (st == QB_OK)
		st = ops_key_new(data_dir, "storage.key", storage, e);
	secret_free(&seed);
	secret_free(&storage);
	return st;
}

/* Byte for byte: a backup may lie on something that can't be written. */
static enum qb_status copy_file(const char *from, const char *to, struct qb_error *e)
{
	static const size_t step = (size_t)1 << 20;
	uint8_t *b = qb_alloc(step, 1);
	int in = open(from, O_RDONLY | O_CLOEXEC | O_NOFOLLOW),
	    out = in < 0 ? -1 : open(to, O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0600);
	ssize_t n = in < 0 || out < 0 ? -1 : 1;
	while (n > 0 && (n = read(in, b, step)) > 0) {
		if (!fd_write_all(out, b, (size_t)n))
			n = -1;
	}
	bool good = n == 0 && fsync(out) == 0;
	enum qb_status st =
	    good ? QB_OK
	         : qb_fail(e, QB_IO, in < 0 ? from : to, in < 0 ? "check the path" : "choose an empty directory", "%s",
	                   strerror(errno));
	if (in >= 0)
		(void)close(in);
	if (out >= 0)
		(void)close(out);
	qb_free(b);
	return st;
}

/* The whole ledger again, against the head that the restored service has to stand by. */
static enum qb_status check_restored(const char *data_dir, uint64_t *size, struct qb_error *e)
{
	struct ops_settings settings = {.data_dir = data_dir, .rehearsal_seed = -1, .system = clock_system()};
	struct ops *o = NULL;
	struct qb_error other_clock = {0};
	/* which clock the service was created with, the store says, and refuses the other one */
	enum qb_status st = ops_open(&settings, &o, &other_clock);
	settings.rehearsal_clock = true;
	if (st != QB_OK)
		st = ops_open(&settings, &o, e);
	if (st == QB_OK) {
		*size = o->size;
		ops_close(&o);
	}
	return st;
}

/* Neither a store nor keys of a service may be there: nothing is ever overwritten. */
static enum qb_status check_empty(const char *data_dir, struct qb_error *e)
{
	static const char *const names[] = {"store.sqlite", "service.key", "storage.key"};
	enum qb_status st = QB_OK;
	for (size_t i = 0; st == QB_OK && i < sizeof names / sizeof names[0]; i++) {
		char *path = text_printf("%s/%s", data_dir, names[i]);
		if (access(path, F_OK) == 0)
			st = qb_fail(e, QB_CONFLICT, path, "choose an empty directory", "is there already");
		qb_free(path);
	}
	return st;
}

/* A restore that failed leaves nothing that could be taken for a service. */
static void remove_all(const char *data_dir)
{
	static const char *const names[] = {"store.sqlite", "store.sqlite-wal", "store.sqlite-shm", "service.key",
	                                    "storage.key"};
	for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
		char *path = text_printf("%s/%s", data_dir, names[i]);
		(void)unlink(path);
		qb_free(path);
	}
}

enum qb_status ops_restore(const char *file, const char *data_dir, const char *passphrase, uint64_t *size,
                           struct qb_error *e)
{
	struct secret *both = NULL;
	struct keyfile_info info;
	char *store = text_printf("%s/store.sqlite", data_dir), *keys = text_printf("%s.keys", file);
	enum qb_status st = keyfile_read(keys, KEYFILE_OTHER, passphrase, true, &both, &info, e);
	if (st == QB_OK && secret_size(both) != 64)
		st = qb_fail(e, QB_FORMAT, keys, "give the file that the backup wrote", "holds no keys of a service");
	if (st == QB_OK && mkdir(data_dir, 0700) != 0 && errno != EEXIST)
		st = qb_fail(e, QB_IO, data_dir, NULL, "can't be created: %s", strerror(errno));
	if (st == QB_OK)
		st = check_empty(data_dir, e);
	if (st == QB_OK) {
		st = copy_file(file, store, e);
		if (st == QB_OK)
			st = put_keys(data_dir, both, e);
		if (st == QB_OK)
			st = check_restored(data_dir, size, e);
		if (st != QB_OK)
			remove_all(data_dir);
	}
	secret_free(&both);
	qb_free(store);
	qb_free(keys);
	return st;
}
