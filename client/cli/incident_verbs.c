/* The noun `incident`: reporting a break of the blind, sealed until the opening. */
#include <inttypes.h>
#include <stdio.h>
#include <string.h>

#include "client/cli/submit.h"
#include "server/base/alloc.h"
#include "server/base/text.h"

#define RANGES_MAX 64
#define TEXT_MAX   3000 /* bytes; with the slots it fits into the fixed size */

static bool number(const char **p, int64_t *out)
{
	char digits[20];
	size_t n = strspn(*p, "0123456789");
	if (n == 0 || n >= sizeof digits)
		return false;
	memcpy(digits, *p, n);
	digits[n] = '\0';
	*p += n;
	return text_i64(digits, out);
}

/* "3,7-9" as [[3,3],[7,9]]; "" is no slot in particular. */
static enum qb_status read_slots(struct cli_call *c, const char *text, json_t *out)
{
	const char *p = text;
	while (*p != '\0') {
		int64_t from, to;
		bool good = number(&p, &from);
		to = from;
		if (good && *p == '-') {
			p++;
			good = number(&p, &to);
		}
		if (!good || to < from || json_array_size(out) == RANGES_MAX ||
		    (*p != '\0' && (*p != ',' || p[1] == '\0')))
			return qb_fail(&c->error, QB_USAGE, "--slots", "like 3,7-9; at most 64 ranges", "is '%.60s'",
			               text);
		p += *p == ',';
		json_t *pair = json_array();
		json_array_append_new(pair, json_integer(from));
		json_array_append_new(pair, json_integer(to));
		json_array_append_new(out, pair);
	}
	return QB_OK;
}

static enum qb_status incident_content(struct cli_call *c, char **out)
{
	const char *kind = cli_option(c, "kind"), *text = cli_option(c, "text");
	json_t *doc = json_object(), *slots = json_array();
	enum qb_status st = QB_OK;
	json_object_set_new(doc, "kind", json_string(kind));
	json_object_set_new(doc, "slots", slots);
	json_object_set_new(doc, "text", json_string(text));
	if (strcmp(kind, "planned") != 0 && strcmp(kind, "accidental") != 0 && strcmp(kind, "rumour") != 0)
		st = qb_fail(&c->error, QB_USAGE, "--kind", "planned, accidental or rumour", "is '%.30s'", kind);
	if (st == QB_OK && !text_is_line(text, TEXT_MAX))
		st = qb_fail(&c->error, QB_USAGE, "--text", NULL, "must be one line of at most %d bytes", TEXT_MAX);
	if (st == QB_OK && cli_option(c, "slots") != NULL)
		st = read_slots(c, cli_option(c, "slots"), slots);
	if (st == QB_OK)
		*out = json_text(doc);
	json_decref(doc);
	return st;
}

static enum qb_status run_file(struct cli_call *c)
{
	struct campaign *k;
	struct custody_group *g = QB_NEW(struct custody_group);
	struct submission s = {.record = RECORD_INCIDENT, .type = "incident", .label = "incident"};
	char *content = NULL;
	enum qb_status st = incident_content(c, &content);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	if (st == QB_OK)
		st = campaign_certified_group(k, g, &c->error);
	if (st == QB_OK)
		st = submit_next_sequence(c, k, &s.sequence);
	if (st == QB_OK) {
		char *path = text_printf("/v1/campaigns/%s/incidents", k->name);
		s.path = path;
		s.content = content;
		st = submit_sealed(c, k, g, &s, json_object());
		qb_free(path);
	}
	qb_free(content);
	qb_free(g);
	return st;
}

static const struct cli_option file_options[] = {
    {"kind", "KIND", true, "planned, accidental or rumour"},
    {"slots", "LIST", false, "the slots concerned, like 3,7-9; left out: none in particular"},
    {"text", "TEXT", true, "who learned what, how, and what it may have changed; one line"},
    {NULL, NULL, false, NULL}};

const struct cli_verb cli_incident_verbs[] = {
    {"incident", "file", "CAMPAIGN", run_file, file_options,
     "reports a break of the blind, sealed until the opening (everybody with a part)",
     "quietbell incident file fells-spring --kind accidental --slots 3,7-9 --text 'the drive was on a monitor'"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
