/* One structured line an event, written with a single write so that lines of several threads never mix. */
#include "server/base/log.h"

#include <stdarg.h>
#include <string.h>
#include <unistd.h>

#include "server/base/buf.h"

static void put_value(struct buf *b, const char *v)
{
	bool plain = *v != '\0' && strpbrk(v, " \"=\\") == NULL;
	for (const char *p = v; plain && *p != '\0'; p++)
		plain = (unsigned char)*p > 0x20 && *p != 0x7f;
	if (plain) {
		buf_text(b, v);
		return;
	}
	buf_text(b, "\"");
	for (const char *p = v; *p != '\0'; p++) {
		if (*p == '"' || *p == '\\')
			buf_printf(b, "\\%c", *p);
		else if ((unsigned char)*p < 0x20 || *p == 0x7f)
			buf_text(b, "?");
		else
			buf_put(b, p, 1);
	}
	buf_text(b, "\"");
}

void log_event(const struct log *l, enum log_level level, const char *event, ...)
{
	static const char *const words[] = {"debug", "info", "warning", "error"};
	if (l == NULL || l->fd < 0 || level < l->least)
		return;
	struct buf b = {0};
	char t[40];
	buf_printf(&b, "time=%s level=%s event=%s", clock_utc_text(clock_now(&l->clock), t, sizeof t), words[level],
	           event);
	va_list ap;
	va_start(ap, event);
	for (const char *key; (key = va_arg(ap, const char *)) != NULL;) {
		const char *value = va_arg(ap, const char *);
		buf_printf(&b, " %s=", key);
		put_value(&b, value != NULL ? value : "");
	}
	va_end(ap);
	buf_text(&b, "\n");
	ssize_t n = write(l->fd, b.data, b.len);
	(void)n; /* a log that can't be written must not stop the service */
	buf_free(&b);
}
