/* The error record: filled once, printed as one line, turned into an exit status. */
#include "server/base/err.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

static void clean(char *s)
{
	for (; *s != '\0'; s++) {
		if ((unsigned char)*s < 0x20 || *s == 0x7f)
			*s = '?';
	}
}

enum qb_status qb_fail(struct qb_error *e, enum qb_status status, const char *where, const char *mend, const char *fmt,
                       ...)
{
	if (e == NULL || e->status != QB_OK)
		return status;
	va_list ap;
	va_start(ap, fmt);
	(void)vsnprintf(e->what, sizeof e->what, fmt, ap);
	va_end(ap);
	(void)snprintf(e->where, sizeof e->where, "%s", where != NULL ? where : "");
	(void)snprintf(e->mend, sizeof e->mend, "%s", mend != NULL ? mend : "");
	clean(e->what);
	clean(e->where);
	clean(e->mend);
	e->status = status;
	return status;
}

const char *qb_error_line(const struct qb_error *e, char *out, size_t size)
{
	(void)snprintf(out, size, "%s%s%s%s%s", e->where, e->where[0] != '\0' ? ": " : "", e->what,
	               e->mend[0] != '\0' ? "; " : "", e->mend);
	return out;
}

static const struct {
	enum qb_status status;
	int exit_status;
	const char *word;
} statuses[] = {
    {QB_OK, 0, "ok"},
    {QB_NO, 1, "no"},
    {QB_USAGE, 2, "usage"},
    {QB_FORMAT, 3, "format"},
    {QB_RANGE, 3, "range"},
    {QB_IO, 3, "input-output"},
    {QB_CRYPTO, 1, "not-verified"},
    {QB_REFUSED, 4, "refused"},
    {QB_CONFLICT, 4, "conflict"},
    {QB_NOT_FOUND, 4, "not-found"},
    {QB_UNREACHABLE, 5, "unreachable"},
    {QB_FAULT, 70, "fault"},
};

int qb_exit_status(enum qb_status status)
{
	for (size_t i = 0; i < sizeof statuses / sizeof statuses[0]; i++) {
		if (statuses[i].status == status)
			return statuses[i].exit_status;
	}
	return 70;
}

const char *qb_status_word(enum qb_status status)
{
	for (size_t i = 0; i < sizeof statuses / sizeof statuses[0]; i++) {
		if (statuses[i].status == status)
			return statuses[i].word;
	}
	return "fault";
}
