/*
 * quietbell-driver: plays one station's part of a campaign. Only the options and the order of the start are here:
 * guard, home and service, cautions, run.
 */
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/agent/cautions.h"
#include "client/agent/guard.h"
#include "client/agent/loop.h"
#include "server/base/text.h"

static volatile sig_atomic_t stopping;

static void on_signal(int number)
{
	(void)number;
	stopping = 1;
}

static const struct {
	const char *name, *value, *help;
} options[] = {
    {"station", "STATION", "the station that this party drives (required)"},
    {"sink", "SINK", "where the counts go (required)"},
    {"state-file", "FILE", "first line 'observing' or 'not-observing', read again all the time"},
    {"contact", "SECONDS", "ramp down after so long without contact (default 30; not with a rehearsal clock)"},
    {"home", "DIR", "home directory (default $QUIETBELL_HOME, else ~/.config/quietbell)"},
    {"service", "URL", "the service (default: the one pinned in the home)"},
    {"passphrase-file", "FILE", "passphrase (default $QUIETBELL_PASSPHRASE_FILE, else asked)"},
    {"once-done", NULL, "end after the last slot's report (it always does)"},
    {"help", NULL, "show this help"},
};
#define N_OPTIONS ((int)(sizeof options / sizeof options[0]))

static void usage(FILE *f)
{
	fprintf(f, "usage: quietbell-driver CAMPAIGN --station STATION --sink SINK [options]\n\n"
	           "Plays one station's part of a campaign, slot by slot, and reports each slot.\n\noptions:\n");
	for (int i = 0; i < N_OPTIONS; i++) {
		char left[60];
		(void)snprintf(left, sizeof left, "--%s %s", options[i].name,
		               options[i].value != NULL ? options[i].value : "");
		fprintf(f, "  %-24s %s\n", left, options[i].help);
	}
	fprintf(f, "\nsinks:\n");
	for (int i = 0; sink_help(i) != NULL; i++)
		fprintf(f, "  %s\n", sink_help(i));
	fprintf(f, "\nexample:\n  quietbell-driver fells-spring --station tarn --sink file:/var/lib/tarn/drive "
	           "--home hosta\n");
}

static enum qb_status take(struct driver_options *o, const char *name, const char *value, struct qb_error *e)
{
	const struct {
		const char *name;
		const char **into;
	} texts[] = {{"station", &o->station}, {"sink", &o->sink},       {"state-file", &o->state_file},
	             {"home", &o->home},       {"service", &o->service}, {"passphrase-file", &o->passphrase_file}};
	for (size_t i = 0; i < sizeof texts / sizeof texts[0]; i++) {
		if (strcmp(name, texts[i].name) == 0)
			*texts[i].into = value;
	}
	if (strcmp(name, "contact") == 0 && (!text_double(value, &o->contact_s) || o->contact_s <= 0))
		return qb_fail(e, QB_USAGE, NULL, "give seconds", "--contact is '%.60s'", value);
	return QB_OK;
}

/* Index of the option whose name argument begins with, up to its end or '='; or -1. */
static int option_of(const char *arg, const char **value)
{
	size_t n = strcspn(arg, "=");
	*value = arg[n] == '=' ? arg + n + 1 : NULL;
	for (int i = 0; i < N_OPTIONS; i++) {
		if (strlen(options[i].name) == n && memcmp(options[i].name, arg, n) == 0)
			return i;
	}
	return -1;
}

static enum qb_status parse(int argc, char **argv, struct driver_options *o, bool *help, struct qb_error *e)
{
	enum qb_status st = QB_OK;
	for (int i = 1; st == QB_OK && i < argc; i++) {
		const char *value;
		if (strncmp(argv[i], "--", 2) != 0) {
			if (o->campaign != NULL)
				return qb_fail(e, QB_USAGE, NULL, "see --help", "more than one campaign");
			o->campaign = argv[i];
			continue;
		}
		int k = option_of(argv[i] + 2, &value);
		if (k < 0)
			return qb_fail(e, QB_USAGE, NULL, "see --help", "unknown option %.60s", argv[i]);
		if (options[k].value == NULL && value != NULL)
			return qb_fail(e, QB_USAGE, NULL, NULL, "--%s takes no value", options[k].name);
		if (options[k].value != NULL && value == NULL && ++i < argc)
			value = argv[i];
		if (options[k].value != NULL && value == NULL)
			return qb_fail(e, QB_USAGE, NULL, NULL, "--%s needs %s", options[k].name, options[k].value);
		if (strcmp(options[k].name, "help") == 0)
			*help = true;
		else if (value != NULL)
			st = take(o, options[k].name, value, e);
	}
	if (st == QB_OK && !*help && (o->campaign == NULL || o->station == NULL || o->sink == NULL))
		st = qb_fail(e, QB_USAGE, NULL, "see --help", "a campaign, --station and --sink are needed");
	return st;
}

static void watch_signals(void)
{
	struct sigaction a = {.sa_handler = on_signal};
	sigemptyset(&a.sa_mask);
	sigaction(SIGTERM, &a, NULL);
	sigaction(SIGINT, &a, NULL);
	signal(SIGPIPE, SIG_IGN);
}

static enum qb_status run(const struct driver_options *o, struct qb_error *e)
{
	struct log log = {.fd = STDERR_FILENO, .least = LOG_INFO_, .clock = clock_system()};
	struct driver d = {0};
	struct buf text = {0};
	bool locked = false;
	enum qb_status st = guard_set(&locked, e);
	if (st == QB_OK)
		st = secret_setup(e);
	if (st != QB_OK)
		return st;
	watch_signals();
	st = loop_open(&d, o, &log, &stopping, e);
	if (st == QB_OK) {
		cautions_text(d.campaign->plan, d.station, &text);
		fwrite(text.data, 1, text.len, stderr);
		log_event(&log, LOG_INFO_, "driver-started", "campaign", d.campaign->name, "station", o->station,
		          "clock", d.link.rehearsal ? "rehearsal" : "system", "memory-locked", locked ? "yes" : "no",
		          NULL);
		st = loop_run(&d, e);
	}
	buf_free(&text);
	loop_close(&d);
	return st;
}

int main(int argc, char **argv)
{
	struct driver_options o = {.contact_s = 30};
	struct qb_error e = {0};
	char line[1000];
	bool help = false;
	enum qb_status st = parse(argc, argv, &o, &help, &e);
	if (help)
		usage(stdout);
	else if (st == QB_OK)
		st = run(&o, &e);
	if (st != QB_OK && !help)
		fprintf(stderr, "quietbell-driver: %s\n", qb_error_line(&e, line, sizeof line));
	return help ? 0 : qb_exit_status(st);
}
