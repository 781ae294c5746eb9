/* The table from our status codes to HTTP and to the words and titles of problem documents. */
#include "server/api/problem.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "server/base/json.h"

static const struct {
	enum qb_status status;
	int http_status;
	const char *word;
} by_status[] = {
    {QB_NO, 422, "refused"},          {QB_FORMAT, 400, "format"},   {QB_RANGE, 400, "range"},
    {QB_CRYPTO, 400, "not-verified"}, {QB_REFUSED, 403, "refused"}, {QB_CONFLICT, 409, "conflict"},
    {QB_NOT_FOUND, 404, "not-found"},
};

static const struct {
	const char *word, *title;
} titles[] = {
    {"format", "The request is not well formed"},
    {"range", "A value is out of range"},
    {"not-verified", "A signature or proof does not verify"},
    {"refused", "The service refuses this"},
    {"conflict", "Not in this state or at this time"},
    {"not-found", "There is nothing here"},
    {"too-large", "The request is too large"},
    {"unauthorised", "The request is not signed by an enrolled key"},
    {"busy", "The service is busy; try again soon"},
    {"fault", "The service failed"},
};

void problem_set(struct problem *p, int http_status, const char *word, const char *fmt, ...)
{
	if (p->http_status != 0)
		return;
	va_list ap;
	va_start(ap, fmt);
	(void)vsnprintf(p->detail, sizeof p->detail, fmt, ap);
	va_end(ap);
	p->http_status = http_status;
	p->word = word;
}

void problem_from_error(struct problem *p, const struct qb_error *e, int64_t until_gps_ns)
{
	char line[sizeof p->detail];
	for (size_t i = 0; i < sizeof by_status / sizeof by_status[0]; i++) {
		if (by_status[i].status != e->status)
			continue;
		problem_set(p, by_status[i].http_status, by_status[i].word, "%s", qb_error_line(e, line, sizeof line));
		p->has_until = e->status == QB_CONFLICT && until_gps_ns != 0;
		p->until_gps_ns = until_gps_ns;
		return;
	}
	problem_set(p, 500, "fault", "the cause is in the service's log");
}

static const char *title_of(const char *word)
{
	for (size_t i = 0; i < sizeof titles / sizeof titles[0]; i++) {
		if (strcmp(titles[i].word, word) == 0)
			return titles[i].title;
	}
	return "The service failed";
}

char *problem_text(const struct problem *p, const char *instance)
{
	char type[80];
	(void)snprintf(type, sizeof type, "urn:quietbell:problem:%s", p->word);
	json_t *doc = json_object();
	json_object_set_new(doc, "type", json_string(type));
	json_object_set_new(doc, "title", json_string(title_of(p->word)));
	json_object_set_new(doc, "status", json_integer(p->http_status));
	if (p->detail[0] != '\0') {
		/* A detail cut in the middle of a character would not be UTF-8; then the title must do. */
		json_t *detail = json_string(p->detail);
		if (detail != NULL)
			json_object_set_new(doc, "detail", detail);
	}
	json_object_set_new(doc, "instance", json_string(instance));
	if (p->has_until)
		json_object_set_new(doc, "until_gps", json_gps_new(p->until_gps_ns));
	char *text = json_text(doc);
	json_decref(doc);
	return text;
}
