/* The noun `segments`: when a station observed, was vetoed, or gave usable noise. Frozen by closing. */
#include <stdio.h>
#include <string.h>

#include "client/cli/internal.h"
#include "server/base/alloc.h"
#include "server/base/clock.h"
#include "server/base/text.h"

#define FILE_MAX ((size_t)8 << 20)

/* One line "from to" or "from,to" in GPS seconds; blank lines and comments are skipped. */
static enum qb_status read_line(const char *line, size_t n, const char *where, int64_t *last, json_t *out,
                                struct qb_error *e)
{
	char copy[120], from_text[40], to_text[40], rest[2];
	int64_t from, to;
	if (n >= sizeof copy)
		return qb_fail(e, QB_FORMAT, where, NULL, "the line is too long");
	memcpy(copy, line, n);
	copy[n] = '\0';
	copy[strcspn(copy, "#")] = '\0';
	if (copy[strspn(copy, " \t\r")] == '\0' || strncmp(copy, "start", 5) == 0)
		return QB_OK;
	if (sscanf(copy, " %39[0-9.]%*[ \t,]%39[0-9.] %1s", from_text, to_text, rest) != 2 ||
	    !clock_gps_parse(from_text, &from) || !clock_gps_parse(to_text, &to))
		return qb_fail(e, QB_FORMAT, where, "write start and end in GPS seconds", "is not two GPS times");
	if (to <= from)
		return qb_fail(e, QB_RANGE, where, NULL, "the segment's end is not after its start");
	if (from < *last)
		return qb_fail(e, QB_RANGE, where, "sort the segments and merge what overlaps",
		               "the segment begins before the one above it ends");
	*last = to;
	json_t *pair = json_array();
	json_array_append_new(pair, json_gps_new(from));
	json_array_append_new(pair, json_gps_new(to));
	json_array_append_new(out, pair);
	return QB_OK;
}

static enum qb_status read_file(const char *path, json_t *out, struct qb_error *e)
{
	struct buf b = {0};
	int64_t last = 0;
	int number = 1;
	enum qb_status st = file_read(path, FILE_MAX, &b, e);
	for (const char *p = b.data != NULL ? (const char *)b.data : ""; st == QB_OK && *p != '\0'; number++) {
		size_t n = strcspn(p, "\n");
		char where[240];
		(void)snprintf(where, sizeof where, "%.200s:%d", path, number);
		st = read_line(p, n, where, &last, out, e);
		p += n + (p[n] == '\n');
	}
	if (st == QB_OK && json_array_size(out) == 0)
		st = qb_fail(e, QB_FORMAT, path, NULL, "holds no segments");
	buf_free(&b);
	return st;
}

static enum qb_status run_send(struct cli_call *c)
{
	struct campaign *k;
	json_t *list = json_array();
	enum qb_status st = read_file(cli_arg(c, 1), list, &c->error);
	if (st == QB_OK)
		st = cli_campaign(c, cli_arg(c, 0), &k);
	size_t n = json_array_size(list);
	if (st == QB_OK) {
		json_t *extra = json_object();
		char *path = text_printf("/v1/campaigns/%s/segments", k->name);
		json_object_set_new(extra, "station", json_string(cli_option(c, "station")));
		json_object_set_new(extra, "kind", json_string(cli_option(c, "kind")));
		json_object_set(extra, "segments", list);
		st = cli_post_entry(c, path, "segments", k->id, cli_option(c, "reason"), extra, NULL, NULL);
		qb_free(path);
	}
	if (st == QB_OK)
		cli_print(c, "%zu segments of %s are in the ledger\n", n, cli_option(c, "station"));
	json_decref(list);
	return st;
}

static enum qb_status run_list(struct cli_call *c)
{
	struct campaign *k;
	json_t *all = json_array();
	enum qb_status st = cli_campaign(c, cli_arg(c, 0), &k);
	for (uint64_t i = 0; st == QB_OK && i < c->follow.n; i++) {
		struct entry leaf;
		struct wire_entry en;
		if (follow_entry(&c->follow, i, &leaf, &en, NULL) != QB_OK)
			continue;
		if (en.has_campaign && memcmp(en.campaign, k->id, 16) == 0 && strcmp(en.type->type, "segments") == 0) {
			const json_t *s = wire_entry_json(&en, "segments");
			bool late = k->closing_seq != NO_SEQ && (int64_t)i > k->closing_seq;
			json_array_append(all, en.doc);
			if (!cli_wants_json(c))
				cli_print(c, "%6llu  %-10s %-9s %zu segments by %s%s\n", (unsigned long long)i,
				          wire_entry_text(&en, "station"), wire_entry_text(&en, "kind"),
				          json_array_size(s), en.by, late ? ", after closing: shown apart" : "");
		}
		wire_entry_free(&en);
	}
	if (st == QB_OK && cli_wants_json(c))
		cli_json(c, all);
	json_decref(all);
	return st;
}

static const struct cli_option send_options[] = {{"station", "S", true, "the station"},
                                                 {"kind", "KIND", true, "observing, veto or noise"},
                                                 {"reason", "TEXT", false, "why, for the ledger"},
                                                 {NULL, NULL, false, NULL}};

const struct cli_verb cli_segments_verbs[] = {
    {"segments", "send", "CAMPAIGN FILE", run_send, send_options, "states segments of a station (operator, driver)",
     "quietbell segments send fells-spring tarn.txt --station tarn --kind observing"},
    {"segments", "list", "CAMPAIGN", run_list, NULL, "lists what was stated, from the verified ledger",
     "quietbell segments list fells-spring"},
    {NULL, NULL, NULL, NULL, NULL, NULL, NULL}};
