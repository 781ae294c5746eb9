/*
 * The verb `drive`: starts quietbell-driver, the station's agent, in this process's place. It is a program of its own
 * because it runs for weeks with a sandbox of its own.
 */
#include <errno.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "client/cli/cli.h"
#include "server/base/alloc.h"

#define DRIVER   "quietbell-driver"
#define MAX_ARGV 32

static const char *const passed_on[] = {"station", "sink",    "state-file",     "contact",
                                        "home",    "service", "passphrase-file"};

/* quietbell-driver beside this program; NULL when it is not there. */
static char *beside(void)
{
	char own[4096];
	ssize_t n = readlink("/proc/self/exe", own, sizeof own - sizeof DRIVER - 1);
	char *slash;
	if (n <= 0)
		return NULL;
	own[n] = '\0';
	slash = strrchr(own, '/');
	if (slash == NULL)
		return NULL;
	memcpy(slash + 1, DRIVER, sizeof DRIVER);
	return access(own, X_OK) == 0 ? qb_strdup(own) : NULL;
}

static enum qb_status drive(struct cli_call *c)
{
	char *argv[MAX_ARGV], dashed[sizeof passed_on / sizeof passed_on[0]][24], *path = beside();
	int n = 0;
	argv[n++] = (char *)(uintptr_t)DRIVER;
	argv[n++] = (char *)(uintptr_t)cli_arg(c, 0);
	for (size_t i = 0; i < sizeof passed_on / sizeof passed_on[0]; i++) {
		const char *value = cli_option(c, passed_on[i]);
		if (value == NULL)
			continue;
		(void)snprintf(dashed[i], sizeof dashed[i], "--%s", passed_on[i]);
		argv[n++] = dashed[i];
		argv[n++] = (char *)(uintptr_t)value;
	}
	argv[n] = NULL;
	if (path != NULL)
		execv(path, argv);
	else
		execvp(DRIVER, argv);
	int error = errno;
	qb_free(path);
	return qb_fail(cli_error(c), QB_IO, DRIVER, "install it beside quietbell, or in the PATH",
	               "can't be started: %s", strerror(error));
}

static const struct cli_option options[] = {
    {"station", "STATION", true, "the station that this party drives"},
    {"sink", "SINK", true, "where the counts go: file:DIR writes DIR/slot-NNNNNN.npy"},
    {"state-file", "FILE", false, "first line 'observing' or 'not-observing', read again all the time"},
    {"contact", "SECONDS", false, "ramp down after so long without contact (default 30; not with a rehearsal clock)"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_drive_verbs[] = {
    {"drive", "", "CAMPAIGN", drive, options,
     "Drives one station through a campaign; ends after the last slot's report.",
     "quietbell drive fells-spring --station tarn --sink file:/var/lib/tarn/drive --home hosta"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
