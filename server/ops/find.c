/* Look-ups in the projection. */
#include <stdio.h>
#include <string.h>

#include "server/base/text.h"
#include "server/ops/internal.h"

enum qb_status slot_number(const struct campaign *c, const char *text, int64_t *out, struct qb_error *e)
{
	if (!text_i64(text, out) || *out < 0 || *out >= c->n_slots)
		return qb_fail(e, QB_NOT_FOUND, "slot", "see quietbell slot list", "the campaign has no slot '%.20s'",
		               text);
	return QB_OK;
}

bool query_int(const char *query, const char *key, int64_t min, int64_t max, int64_t otherwise, int64_t *out)
{
	size_t n = strlen(key);
	*out = otherwise;
	for (const char *p = query; *p != '\0';) {
		size_t len = strcspn(p, "&");
		if (len > n + 1 && len < n + 22 && strncmp(p, key, n) == 0 && p[n] == '=') {
			char number[24];
			(void)snprintf(number, sizeof number, "%.*s", (int)(len - n - 1), p + n + 1);
			return text_i64(number, out) && *out >= min && *out <= max;
		}
		p += len + (p[len] == '&');
	}
	return true;
}

int64_t now_locked(struct ops *o)
{
	return o->rehearsal_clock ? o->rehearsal_now_ns : clock_now(&o->settings.system);
}
