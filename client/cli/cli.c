/* The framework of the command line: tables in, dispatch, usage, errors and exit status out. */
#include "client/cli/cli.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/internal.h"
#include "client/cli/man.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define VERSION "1.0"

const struct cli_option cli_common_options[] = {
    {"json", NULL, false, "print one JSON document and nothing else on standard output"},
    {"home", "DIR", false, "the party's home directory (default $QUIETBELL_HOME, else ~/.config/quietbell)"},
    {"service", "URL", false, "the service (default: the one pinned in the home)"},
    {"passphrase-file", "FILE", false,
     "read the passphrase from FILE (default $QUIETBELL_PASSPHRASE_FILE, else asked)"},
    {"help", NULL, false, "show this help"},
    {NULL, NULL, false, NULL}};

const char *cli_arg(const struct cli_call *c, int i)
{
	return i < c->n_args ? c->args[i] : NULL;
}

int cli_arg_count(const struct cli_call *c)
{
	return c->n_args;
}

const char *cli_option(const struct cli_call *c, const char *name)
{
	const char *found = NULL;
	for (int i = 0; i < c->n_options; i++) {
		if (strcmp(c->options[i].name, name) == 0)
			found = c->options[i].value;
	}
	return found;
}

enum qb_status cli_option_double(struct cli_call *c, const char *name, double otherwise, double *out)
{
	const char *v = cli_option(c, name);
	*out = otherwise;
	if (v == NULL || text_double(v, out))
		return QB_OK;
	return qb_fail(&c->error, QB_USAGE, NULL, "give a number", "--%s is '%.60s'", name, v);
}

enum qb_status cli_option_int(struct cli_call *c, const char *name, int64_t min, int64_t max, int64_t otherwise,
                              int64_t *out)
{
	const char *v = cli_option(c, name);
	*out = otherwise;
	if (v == NULL || (text_i64(v, out) && *out >= min && *out <= max))
		return QB_OK;
	return qb_fail(&c->error, QB_USAGE, NULL, NULL, "--%s is '%.60s'; accepted: %lld to %lld", name, v,
	               (long long)min, (long long)max);
}

enum qb_status cli_option_gps(struct cli_call *c, const char *name, int64_t otherwise, int64_t *out_gps_ns)
{
	const char *v = cli_option(c, name);
	*out_gps_ns = otherwise;
	if (v == NULL || clock_gps_parse(v, out_gps_ns) || clock_utc_parse(v, out_gps_ns))
		return QB_OK;
	return qb_fail(&c->error, QB_USAGE, NULL, "give GPS seconds, or UTC such as 2027-03-01T00:00:00Z",
	               "--%s is '%.60s'", name, v);
}

struct qb_error *cli_error(struct cli_call *c)
{
	return &c->error;
}

bool cli_wants_json(const struct cli_call *c)
{
	return cli_option(c, "json") != NULL;
}

void cli_json(struct cli_call *c, const json_t *doc)
{
	char *text = json_pretty(doc);
	(void)c;
	fputs(text, stdout);
	qb_free(text);
}

void cli_print(struct cli_call *c, const char *fmt, ...)
{
	va_list ap;
	(void)c;
	va_start(ap, fmt);
	(void)vfprintf(stdout, fmt, ap);
	va_end(ap);
}

void cli_note(struct cli_call *c, const char *fmt, ...)
{
	va_list ap;
	(void)c;
	va_start(ap, fmt);
	(void)vfprintf(stderr, fmt, ap);
	va_end(ap);
}

void cli_progress(struct cli_call *c, const char *what, uint64_t done, uint64_t total)
{
	(void)c;
	if (!isatty(STDERR_FILENO))
		return;
	fprintf(stderr, "\r%s: %llu of %llu%s", what, (unsigned long long)done, (unsigned long long)total,
	        done >= total ? "\n" : "   ");
	fflush(stderr);
}

/* ---- help ---- */

static void print_options(const struct cli_option *o)
{
	for (; o != NULL && o->name != NULL; o++) {
		char left[60];
		(void)snprintf(left, sizeof left, "--%s%s%s", o->name, o->value != NULL ? " " : "",
		               o->value != NULL ? o->value : "");
		printf("  %-26s %s%s\n", left, o->help, o->required ? " (required)" : "");
	}
}

static void help_verb(const struct cli_verb *v)
{
	printf("usage: quietbell %s%s%s%s%s [options]\n\n%s\n\noptions:\n", v->noun, *v->verb != '\0' ? " " : "",
	       v->verb, *v->args != '\0' ? " " : "", v->args, v->help);
	print_options(v->options);
	print_options(cli_common_options);
	printf("\nexample:\n  %s\n", v->example);
}

static void help_noun(const char *noun)
{
	printf("usage: quietbell %s VERB ...\n\n", noun);
	for (int t = 0; cli_tables[t] != NULL; t++) {
		for (const struct cli_verb *v = cli_tables[t]; v->noun != NULL; v++) {
			if (strcmp(v->noun, noun) == 0)
				printf("  %-12s %s\n", v->verb, v->help);
		}
	}
	printf("\nquietbell %s VERB --help says more.\n", noun);
}

static void help_all(void)
{
	const char *last = "";
	printf("usage: quietbell NOUN VERB [arguments] [options]\n\n");
	for (int t = 0; cli_tables[t] != NULL; t++) {
		for (const struct cli_verb *v = cli_tables[t]; v->noun != NULL; v++) {
			char left[60];
			if (strcmp(v->noun, last) != 0)
				printf("\n");
			last = v->noun;
			(void)snprintf(left, sizeof left, "%s %s", v->noun, v->verb);
			printf("  %-22s %s\n", left, v->help);
		}
	}
	printf("\nquietbell NOUN VERB --help says more. Exit status: 0 done, 1 no, 2 usage, 3 file, 4 refused by the "
	       "service,\n"
	       "5 service out of reach, 70 our own fault.\n");
}

/* ---- dispatch ---- */

static const struct cli_verb *find(const char *noun, const char *verb, bool *noun_known)
{
	*noun_known = false;
	for (int t = 0; cli_tables[t] != NULL; t++) {
		for (const struct cli_verb *v = cli_tables[t]; v->noun != NULL; v++) {
			if (strcmp(v->noun, noun) != 0)
				continue;
			*noun_known = true;
			if (*v->verb == '\0' || (verb != NULL && strcmp(v->verb, verb) == 0))
				return v;
		}
	}
	return NULL;
}

static const struct cli_option *option_of(const struct cli_verb *v, const char *name)
{
	const struct cli_option *lists[] = {v->options, cli_common_options};
	for (int i = 0; i < 2; i++) {
		for (const struct cli_option *o = lists[i]; o != NULL && o->name != NULL; o++) {
			if (strcmp(o->name, name) == 0)
				return o;
		}
	}
	return NULL;
}

static enum qb_status take_option(struct cli_call *c, char **argv, int argc, int *i)
{
	char *name = argv[*i] + 2, *equals = strchr(name, '='), *value = NULL;
	if (equals != NULL) {
		*equals = '\0';
		value = equals + 1;
	}
	const struct cli_option *o = option_of(c->verb, name);
	if (o == NULL)
		return qb_fail(&c->error, QB_USAGE, NULL, "see --help", "unknown option --%.60s", name);
	if (o->value == NULL && value != NULL)
		return qb_fail(&c->error, QB_USAGE, NULL, NULL, "--%s takes no value", name);
	if (o->value != NULL && value == NULL) {
		if (*i + 1 >= argc)
			return qb_fail(&c->error, QB_USAGE, NULL, NULL, "--%s needs %s", name, o->value);
		value = argv[++*i];
	}
	if (c->n_options == CLI_MAX_OPTIONS)
		return qb_fail(&c->error, QB_USAGE, NULL, NULL, "too many options");
	c->options[c->n_options++] = (struct cli_given){o->name, value != NULL ? value : ""};
	return QB_OK;
}

/* Number of words in "PLAN [X] Y...": how many arguments are needed and allowed. */
static void arity(const char *args, int *least, int *most)
{
	*least = *most = 0;
	for (const char *p = args; *p != '\0';) {
		size_t n = strcspn(p, " ");
		*least += p[0] != '[';
		*most = n > 3 && strncmp(p + n - 3, "...", 3) == 0 ? CLI_MAX_ARGS : *most + 1;
		p += n + strspn(p + n, " ");
	}
}

static enum qb_status parse(struct cli_call *c, int argc, char **argv, int from)
{
	int least, most;
	bool only_args = false;
	for (int i = from; i < argc; i++) {
		if (!only_args && strcmp(argv[i], "--") == 0) {
			only_args = true;
		} else if (!only_args && strncmp(argv[i], "--", 2) == 0) {
			enum qb_status st = take_option(c, argv, argc, &i);
			if (st != QB_OK)
				return st;
		} else if (c->n_args < CLI_MAX_ARGS) {
			c->args[c->n_args++] = argv[i];
		} else {
			return qb_fail(&c->error, QB_USAGE, NULL, NULL, "too many arguments");
		}
	}
	if (cli_option(c, "help") != NULL)
		return QB_OK;
	arity(c->verb->args, &least, &most);
	if (c->n_args < least || c->n_args > most)
		return qb_fail(&c->error, QB_USAGE, NULL, "see --help", "usage: quietbell %s %s %s", c->verb->noun,
		               c->verb->verb, c->verb->args);
	for (const struct cli_option *o = c->verb->options; o != NULL && o->name != NULL; o++) {
		if (o->required && cli_option(c, o->name) == NULL)
			return qb_fail(&c->error, QB_USAGE, NULL, "see --help", "--%s %s is needed", o->name,
			               o->value != NULL ? o->value : "");
	}
	return QB_OK;
}

static int finish(struct cli_call *c, enum qb_status st)
{
	char line[1000];
	if (fflush(stdout) != 0 && st == QB_OK)
		st = qb_fail(&c->error, QB_IO, "standard output", NULL, "can't be written");
	if (st != QB_OK && c->error.status != QB_OK)
		fprintf(stderr, "quietbell: %s\n", qb_error_line(&c->error, line, sizeof line));
	else if (st != QB_OK && st != QB_NO)
		fprintf(stderr, "quietbell: %s\n", qb_status_word(st));
	return qb_exit_status(st);
}

int cli_main(int argc, char **argv)
{
	struct cli_call *c = QB_NEW(struct cli_call);
	bool known;
	int status = 0;
	enum qb_status st = QB_OK;
	if (argc < 2 || strcmp(argv[1], "--help") == 0 || strcmp(argv[1], "help") == 0) {
		help_all();
		status = argc < 2 ? 2 : 0;
	} else if (strcmp(argv[1], "--version") == 0) {
		printf("quietbell %s\n", VERSION);
	} else if (strcmp(argv[1], "--man") == 0) {
		cli_man();
	} else if ((c->verb = find(argv[1], argc > 2 ? argv[2] : NULL, &known)) == NULL) {
		if (known && argc > 2 && strcmp(argv[2], "--help") == 0) {
			help_noun(argv[1]);
		} else if (known) {
			st = qb_fail(&c->error, QB_USAGE, NULL, "see its --help", "'%s' has no verb '%.60s'", argv[1],
			             argc > 2 ? argv[2] : "");
		} else {
			st = qb_fail(&c->error, QB_USAGE, NULL, "see quietbell --help", "there is no '%.60s'", argv[1]);
		}
		status = finish(c, st);
	} else {
		st = parse(c, argc, argv, *c->verb->verb != '\0' ? 3 : 2);
		if (st == QB_OK && cli_option(c, "help") != NULL)
			help_verb(c->verb);
		else if (st == QB_OK)
			st = secret_setup(&c->error);
		if (st == QB_OK && cli_option(c, "help") == NULL)
			st = c->verb->run(c);
		cli_disconnect(c);
		status = finish(c, st);
	}
	qb_free(c);
	return status;
}
