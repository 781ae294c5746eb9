/* The manual page quietbelld(8). The file in docs/man is this output; a test holds it to that. */
#include "server/daemon/man.h"

#include "server/daemon/config.h"

static const struct man_verb verbs[] = {
    {"serve", "--config FILE", "Runs the service until SIGTERM. FILE is YAML; its keys are below."},
    {"init", "init --data DIR --admin PUBLIC-KEY-FILE [--clock system|rehearsal]",
     "Makes the data directory: store, service keys, and the ledger's first entries. PUBLIC-KEY-FILE is the key.pub "
     "that "
     "the administrator's quietbell key new wrote. The clock is fixed for ever; system unless said."},
    {"check-config", "check-config --config FILE",
     "Checks FILE and the data directory and prints every value in force."},
    {"backup", "backup FILE --data DIR --passphrase-file P",
     "Copies the store to FILE while the service works, and its two keys to FILE.keys under the passphrase. Neither is "
     "ever overwritten. Keep them apart: whoever has both and the passphrase can be the service."},
    {"restore", "restore FILE --data DIR --passphrase-file P",
     "Makes the data directory DIR anew from FILE and FILE.keys, and verifies the whole ledger. What came after the "
     "backup "
     "is not in it, and clients that saw it refuse the restored service."},
    {"sealer-host-init", "sealer-host-init --data DIR",
     "Makes the signing key of a machine of its own for sealers, and prints the line sealer_host for the plan."},
    {"sealer-host", "sealer-host --data DIR (--listen ADDRESS:PORT | --folder FOLDER)",
     "Runs one sealer on this machine and ends: its messages pass over one connection, or as files in FOLDER, from and "
     "to "
     "quietbell campaign seal --on. Nothing in them is secret."},
    {"man", "--man", "Prints this manual page as roff."},
    {"help", "--help", "Prints the usage."},
    {"version", "--version", "Prints the version."},
    {NULL, NULL, NULL},
};

static const char head[] = ".TH QUIETBELLD 8 \"\" \"Quietbell " MAN_VERSION "\" \"System administration\"\n"
                           ".SH NAME\n"
                           "quietbelld \\- the service of Quietbell: blind drills for gravitational-wave networks\n"
                           ".SH SYNOPSIS\n";

static const char tail[] =
    ".SH SIGNALS\n"
    ".TP\n.B SIGTERM, SIGINT\n"
    "Take no new connection, end event streams, let requests at work end (limits.drain), then exit with status 0.\n"
    ".TP\n.B SIGHUP\n"
    "Read the configuration again; only log.level changes without a new start.\n"
    ".SH LOG\n"
    "One structured line an event on standard error. When the service answers, the line has event=ready and\n"
    "listen=ADDRESS:PORT; the port also stands in the file port of the data directory. Each request makes one line "
    "with\n"
    "method, route, status, duration and party; bodies, queries and anything sealed never reach the log.\n"
    ".SH FILES\n"
    ".TP\n.B DIR/store.sqlite\n"
    "The ledger, sealed records and everything else the service keeps.\n"
    ".TP\n.B DIR/service.key, DIR/storage.key\n"
    "The service's signing key and the key that slot keys are stored under; mode 0600. Without them the store is of no "
    "use.\n"
    ".SH EXIT STATUS\n"
    "0 done; 1 the answer is no; 2 wrong usage; 3 a file or its content is wrong; 4 refused; 70 our own fault.\n"
    ".SH SECURITY\n"
    "The process can't gain privileges, leaves no core dump and can't be traced by its own user. Sealing happens in a "
    "process\n"
    "of its own (quietbelld \\-\\-sealer, started by the service alone) with two pipes, an empty environment and a "
    "filter that\n"
    "kills it at any system call it has no need of. Locked memory needs a limit of at least 1 GiB "
    "(LimitMEMLOCK=infinity);\n"
    "with less, a warning is logged and secrets alone are locked.\n"
    ".SH EXAMPLES\n"
    ".nf\n"
    "quietbelld init \\-\\-data /var/lib/quietbell \\-\\-admin key.pub\n"
    "quietbelld check-config \\-\\-config /etc/quietbell/quietbelld.yaml\n"
    "quietbelld \\-\\-config /etc/quietbell/quietbelld.yaml\n"
    ".fi\n"
    ".SH SEE ALSO\n"
    ".BR quietbell (1)\n";

const struct man_verb *man_verbs(void)
{
	return verbs;
}

/* Options begin with a minus, which roff would set as a hyphen. */
static void put_usage(struct buf *out, const char *s)
{
	for (; *s != '\0'; s++) {
		if (*s == '-')
			buf_text(out, "\\");
		buf_put(out, s, 1);
	}
}

void man_page(struct buf *out)
{
	buf_text(out, head);
	for (const struct man_verb *v = verbs; v->name != NULL; v++) {
		buf_text(out, v == verbs ? ".B quietbelld\n" : ".br\n.B quietbelld\n");
		put_usage(out, v->usage);
		buf_text(out, "\n");
	}
	buf_text(out, ".SH VERBS\n");
	for (const struct man_verb *v = verbs; v->name != NULL; v++) {
		buf_text(out, ".TP\n.B ");
		put_usage(out, v->usage);
		buf_printf(out, "\n%s\n", v->help);
	}
	buf_text(out, ".SH CONFIGURATION\nAn unknown key, a wrong type or a value out of range is refused with file, "
	              "line and key.\n");
	config_roff(out);
	buf_text(out, tail);
}
