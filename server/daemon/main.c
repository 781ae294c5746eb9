/* quietbelld: the verbs, and the start-up order of the service in one place. */
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>

#include "server/base/alloc.h"
#include "server/base/json.h"
#include "server/base/secret.h"
#include "server/base/text.h"
#include "server/daemon/config.h"
#include "server/daemon/guard.h"
#include "server/daemon/life.h"
#include "server/daemon/man.h"
#include "server/daemon/sealer_host.h"
#include "server/ops/ops.h"

#define KEY_FILE_BYTES   4096
#define PASSPHRASE_BYTES 1024

struct options {
	const char *config, *data, *admin, *clock, *listen, *folder, *passphrase;
	const char *file; /* of backup and restore, after the verb */
};

static enum qb_status run_service(const struct options *o, struct qb_error *e)
{
	struct config config = {0};
	enum qb_status st = guard_process(e);
	if (st == QB_OK)
		st = secret_setup(e);
	if (st == QB_OK)
		st = config_read(o->config, &config, e);
	if (st == QB_OK)
		st = guard_data_dir(config.data, e);
	if (st == QB_OK)
		st = life_run(&config, o->config, e);
	config_free(&config);
	return st;
}

/* The file that the administrator's client wrote beside his secret key. */
static enum qb_status read_public_key(const char *path, char name[static 64], uint8_t sign[static 32],
                                      uint8_t exchange[static 32], struct qb_error *e)
{
	static const char *const members[] = {"name", "signing_key", "exchange_key", NULL};
	struct buf b = {0};
	json_t *doc = NULL;
	const char *s;
	enum qb_status st = file_read(path, KEY_FILE_BYTES, &b, e);
	if (st == QB_OK)
		st = json_read((const char *)b.data, b.len, path, &doc, e);
	if (st == QB_OK)
		st = json_only(doc, members, path, e);
	if (st == QB_OK)
		st = json_str(doc, "name", path, &s, e);
	if (st == QB_OK && !text_is_name(s))
		st = qb_fail(e, QB_FORMAT, path, "make the key anew with a name of a-z, 0-9 and -",
		             "'%.70s' is not a name", s);
	if (st == QB_OK)
		(void)snprintf(name, 64, "%s", s);
	if (st == QB_OK)
		st = json_hex(doc, "signing_key", path, sign, 32, e);
	if (st == QB_OK)
		st = json_hex(doc, "exchange_key", path, exchange, 32, e);
	json_decref(doc);
	buf_free(&b);
	return st;
}

static enum qb_status run_init(const struct options *o, struct qb_error *e)
{
	char name[64];
	uint8_t sign[32], exchange[32];
	bool rehearsal = o->clock != NULL && strcmp(o->clock, "rehearsal") == 0;
	if (o->clock != NULL && !rehearsal && strcmp(o->clock, "system") != 0)
		return qb_fail(e, QB_USAGE, "--clock", "system or rehearsal", "'%.40s' is no clock", o->clock);
	enum qb_status st = guard_process(e);
	if (st == QB_OK)
		st = secret_setup(e);
	if (st == QB_OK)
		st = read_public_key(o->admin, name, sign, exchange, e);
	if (st == QB_OK)
		st = ops_init(o->data, name, sign, exchange, rehearsal, e);
	if (st == QB_OK)
		st = guard_data_dir(o->data, e);
	if (st == QB_OK)
		printf("%s is ready; administrator %s, clock %s\n", o->data, name, rehearsal ? "rehearsal" : "system");
	return st;
}

static enum qb_status run_check_config(const struct options *o, struct qb_error *e)
{
	struct config config = {0};
	struct buf b = {0};
	enum qb_status st = config_read(o->config, &config, e);
	if (st == QB_OK)
		st = guard_data_dir(config.data, e);
	if (st == QB_OK) {
		config_show(&config, &b);
		(void)fwrite(b.data, 1, b.len, stdout);
	}
	config_free(&config);
	buf_free(&b);
	return st;
}

/* Started by the service only; the job comes on descriptor 0, the sealed records leave on 1. */
static int run_sealer(struct qb_error *e)
{
	struct log log = {2, LOG_INFO_, clock_system()};
	enum qb_status st = guard_process(e);
	if (st == QB_OK)
		st = secret_setup(e);
	json_object_seed(0); /* reads a file once, which the filter would not forgive */
	if (st == QB_OK)
		st = guard_sealer(&log, e);
	return st == QB_OK ? ops_sealer_main(0, 1) : qb_exit_status(st);
}

/* The first line of a file that nobody else can read. The caller wipes and frees it. */
static enum qb_status read_passphrase(const char *path, char **out, struct qb_error *e)
{
	struct buf b = {0};
	struct stat s;
	if (path == NULL)
		return qb_fail(e, QB_USAGE, NULL, "give --passphrase-file",
		               "the service's keys are in a backup under a passphrase only");
	if (stat(path, &s) != 0 || (s.st_mode & 077) != 0)
		return qb_fail(e, QB_REFUSED, path, "chmod 600 it", "can be read by others, or is not there");
	enum qb_status st = file_read(path, PASSPHRASE_BYTES, &b, e);
	size_t n = st == QB_OK && b.len > 0 ? strcspn((const char *)b.data, "\r\n") : 0;
	if (st == QB_OK && n == 0)
		st = qb_fail(e, QB_FORMAT, path, "write the passphrase on its first line", "is empty");
	*out = st == QB_OK ? qb_memdup(b.data, n) : NULL;
	buf_wipe(&b);
	return st;
}

static enum qb_status run_copy(const struct options *o, bool back, struct qb_error *e)
{
	char *passphrase = NULL;
	uint64_t size = 0;
	if (o->file == NULL)
		return qb_fail(e, QB_USAGE, NULL, "see quietbelld --help", "name the file of the backup");
	enum qb_status st = guard_process(e);
	if (st == QB_OK)
		st = secret_setup(e);
	if (st == QB_OK)
		st = read_passphrase(o->passphrase, &passphrase, e);
	if (st == QB_OK)
		st = back ? ops_restore(o->file, o->data, passphrase, &size, e)
		          : ops_backup(o->data, o->file, passphrase, e);
	if (st == QB_OK && back)
		printf("%s is ready; its ledger has %llu leaves and verifies. Clients that have seen more will refuse "
		       "it.\n",
		       o->data, (unsigned long long)size);
	else if (st == QB_OK)
		printf("%s and %s.keys are written; keep them apart.\n", o->file, o->file);
	if (passphrase != NULL)
		wipe(passphrase, strlen(passphrase));
	qb_free(passphrase);
	return st;
}

static enum qb_status run_backup(const struct options *o, struct qb_error *e)
{
	return run_copy(o, false, e);
}

static enum qb_status run_restore(const struct options *o, struct qb_error *e)
{
	return run_copy(o, true, e);
}

static enum qb_status run_host_init(const struct options *o, struct qb_error *e)
{
	enum qb_status st = guard_process(e);
	if (st == QB_OK)
		st = secret_setup(e);
	return st == QB_OK ? sealer_host_init(o->data, e) : st;
}

static enum qb_status run_host(const struct options *o, struct qb_error *e)
{
	if ((o->listen != NULL) == (o->folder != NULL))
		return qb_fail(e, QB_USAGE, NULL, "see quietbelld --help", "give --listen or --folder");
	enum qb_status st = guard_process(e);
	if (st == QB_OK)
		st = secret_setup(e);
	return st == QB_OK ? sealer_host_run(o->data, o->listen, o->folder, e) : st;
}

static enum qb_status run_man(const struct options *o, struct qb_error *e)
{
	struct buf b = {0};
	(void)o;
	(void)e;
	man_page(&b);
	(void)fwrite(b.data, 1, b.len, stdout);
	buf_free(&b);
	return QB_OK;
}

static enum qb_status run_help(const struct options *o, struct qb_error *e)
{
	(void)o;
	(void)e;
	for (const struct man_verb *v = man_verbs(); v->name != NULL; v++)
		printf("quietbelld %s\n        %s\n", v->usage, v->help);
	return QB_OK;
}

static enum qb_status run_version(const struct options *o, struct qb_error *e)
{
	(void)o;
	(void)e;
	printf("quietbelld %s\n", MAN_VERSION);
	return QB_OK;
}

/* Which verb runs what, and which options it can't do without. */
static const struct {
	const char *verb;
	enum qb_status (*run)(const struct options *o, struct qb_error *e);
	bool config, data, admin;
} verbs[] = {
    {"", run_service, true, false, false},
    {"init", run_init, false, true, true},
    {"check-config", run_check_config, true, false, false},
    {"backup", run_backup, false, true, false},
    {"restore", run_restore, false, true, false},
    {"sealer-host-init", run_host_init, false, true, false},
    {"sealer-host", run_host, false, true, false},
    {"--help", run_help, false, false, false},
    {"--version", run_version, false, false, false},
    {"--man", run_man, false, false, false},
};

static enum qb_status parse_options(int argc, char **argv, int first, struct options *o, struct qb_error *e)
{
	const struct {
		const char *name;
		const char **value;
	} known[] = {{"--config", &o->config},
	             {"--data", &o->data},
	             {"--admin", &o->admin},
	             {"--clock", &o->clock},
	             {"--listen", &o->listen},
	             {"--folder", &o->folder},
	             {"--passphrase-file", &o->passphrase}};
	for (int i = first; i < argc; i += 2) {
		bool found = false;
		for (size_t k = 0; k < sizeof known / sizeof known[0]; k++) {
			if (strcmp(argv[i], known[k].name) != 0 || i + 1 >= argc || *known[k].value != NULL)
				continue;
			*known[k].value = argv[i + 1];
			found = true;
		}
		if (!found)
			return qb_fail(e, QB_USAGE, NULL, "see quietbelld --help",
			               "'%.60s' is unknown, twice there or without a value", argv[i]);
	}
	return QB_OK;
}

static enum qb_status run(int argc, char **argv, struct qb_error *e)
{
	struct options o = {0};
	bool named = argc > 1 && (argv[1][0] != '-' || argc == 2);
	const char *verb = named ? argv[1] : "";
	int first = named ? 2 : 1;
	if ((strcmp(verb, "backup") == 0 || strcmp(verb, "restore") == 0) && argc > 2 && argv[2][0] != '-')
		o.file = argv[first++];
	enum qb_status st = parse_options(argc, argv, first, &o, e);
	for (size_t i = 0; st == QB_OK && i < sizeof verbs / sizeof verbs[0]; i++) {
		if (strcmp(verbs[i].verb, verb) != 0)
			continue;
		if ((o.config != NULL) != verbs[i].config || (o.data != NULL) != verbs[i].data ||
		    (o.admin != NULL) != verbs[i].admin || (o.clock != NULL && !verbs[i].admin) ||
		    ((o.listen != NULL || o.folder != NULL) && verbs[i].run != run_host) ||
		    (o.passphrase != NULL && verbs[i].run != run_backup && verbs[i].run != run_restore))
			return qb_fail(e, QB_USAGE, NULL, "see quietbelld --help", "the options do not fit the verb");
		return verbs[i].run(&o, e);
	}
	return st != QB_OK ? st : qb_fail(e, QB_USAGE, NULL, "see quietbelld --help", "'%.60s' is not a verb", verb);
}

int main(int argc, char **argv)
{
	struct qb_error e = {0};
	char line[900];
	if (argc == 2 && strcmp(argv[1], "--sealer") == 0) {
		int status = run_sealer(&e);
		if (e.status != QB_OK)
			fprintf(stderr, "quietbelld: sealer: %s\n", qb_error_line(&e, line, sizeof line));
		return status;
	}
	enum qb_status st = run(argc, argv, &e);
	if (st != QB_OK)
		fprintf(stderr, "quietbelld: %s\n", qb_error_line(&e, line, sizeof line));
	return qb_exit_status(st);
}
