/* The manual page, written from the tables of verbs: `quietbell --man`. A system test holds docs/man/quietbell.1 to it.
 */
#include "client/cli/man.h"

#include <ctype.h>
#include <stdio.h>

#include "client/cli/internal.h"

static void escaped(const char *s)
{
	for (; *s != '\0'; s++) {
		if (*s == '-')
			(void)fputs("\\-", stdout);
		else if (*s == '\\')
			(void)fputs("\\e", stdout);
		else
			(void)putchar(*s);
	}
}

static void options(const struct cli_option *o)
{
	for (; o != NULL && o->name != NULL; o++) {
		printf(".TP\n.B \\-\\-");
		escaped(o->name);
		if (o->value != NULL)
			printf(" %s", o->value);
		printf("\n%s%s\n", o->help, o->required ? " (required)" : "");
	}
}

static void verb(const struct cli_verb *v)
{
	printf(".SS %s", v->noun);
	if (*v->verb != '\0') {
		(void)putchar(' ');
		escaped(v->verb);
	}
	if (*v->args != '\0')
		printf(" %s", v->args);
	printf("\n%c%s.\n", toupper((unsigned char)v->help[0]), v->help + 1);
	options(v->options);
	printf(".PP\nExample:\n.PP\n.RS\n.nf\n");
	escaped(v->example);
	printf("\n.fi\n.RE\n");
}

void cli_man(void)
{
	printf(
	    ".\\\" Written by quietbell --man from the program's own tables of verbs.\n"
	    ".TH QUIETBELL 1 \"\" \"quietbell 1.0\" \"User Commands\"\n.SH NAME\n"
	    "quietbell \\- blind test signals: custody, control, claims, openings, audit\n.SH SYNOPSIS\n"
	    ".B quietbell\n.I NOUN VERB\n[arguments] [options]\n.SH DESCRIPTION\n"
	    "The client of the Quietbell service, and local calculators that need no service. Results go to standard "
	    "output, messages to standard error; an error is one line that says what, where and the mend.\n"
	    ".SH COMMANDS\n");
	for (int t = 0; cli_tables[t] != NULL; t++) {
		for (const struct cli_verb *v = cli_tables[t]; v->noun != NULL; v++)
			verb(v);
	}
	printf(".SH OPTIONS OF EVERY COMMAND\n");
	options(cli_common_options);
	printf(".SH EXIT STATUS\n0 done; 1 the answer is no; 2 wrong usage; 3 a file or its content is wrong; 4 the "
	       "service refused; 5 the service can't be reached; 70 our own fault.\n.SH SEE ALSO\n"
	       ".BR quietbelld (8),\n.BR quietbell\\-driver (1)\n");
}
