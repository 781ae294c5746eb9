/* Strict reading of claims. */
#include "client/cli/claim_file.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

#define CLAIM_FILE_MAX ((size_t)64 << 20)
#define CLAIMS_MAX     100000
/* What fits a sealed claim with room to spare. */
#define CLAIM_TEXT_MAX 16000

static const char *const keys[] = {"claim_id",
                                   "pipeline",
                                   "arrival_gps",
                                   "arrival_gps_sigma_s",
                                   "false_alarm_rate_per_year",
                                   "ranking",
                                   "network_snr",
                                   "family",
                                   "stations",
                                   "quantiles_05_25_50_75_95",
                                   "revision_of",
                                   NULL};

static enum qb_status refuse(const char *where, const char *key, const char *mend, const char *what, struct qb_error *e)
{
	char at[240];
	(void)snprintf(at, sizeof at, "%.160s: %s", where, key);
	return qb_fail(e, QB_FORMAT, at, mend, "%s", what);
}

static enum qb_status check_numbers(const json_t *c, const char *where, struct qb_error *e)
{
	static const struct {
		const char *key;
		bool needed;
		double least;
	} numbers[] = {{"arrival_gps_sigma_s", false, 0},
	               {"false_alarm_rate_per_year", true, 0},
	               {"ranking", false, -HUGE_VAL},
	               {"network_snr", false, 0}};
	for (size_t i = 0; i < sizeof numbers / sizeof numbers[0]; i++) {
		const json_t *v = json_object_get(c, numbers[i].key);
		if (v == NULL && !numbers[i].needed)
			continue;
		if (v == NULL)
			return refuse(where, numbers[i].key, "add it", "is missing", e);
		if (!json_is_number(v) || !isfinite(json_number_value(v)) || json_number_value(v) < numbers[i].least)
			return refuse(where, numbers[i].key, "write a number in the unit of the key",
			              "is not an accepted number", e);
	}
	return QB_OK;
}

static enum qb_status check_quantiles(const json_t *c, const char *where, struct qb_error *e)
{
	const json_t *all = json_object_get(c, "quantiles_05_25_50_75_95");
	const char *key;
	json_t *five;
	if (all == NULL)
		return QB_OK;
	if (!json_is_object(all))
		return refuse(where, "quantiles_05_25_50_75_95", NULL, "is not an object", e);
	json_object_foreach((json_t *)all, key, five)
	{
		double last = -HUGE_VAL;
		if (!json_is_array(five) || json_array_size(five) != 5)
			return refuse(where, key, "give the 5, 25, 50, 75 and 95 % quantiles",
			              "is not a list of five numbers", e);
		for (size_t i = 0; i < 5; i++) {
			const json_t *q = json_array_get(five, i);
			double v = 0;
			if (json_is_number(q))
				v = json_number_value(q);
			else if (!json_is_string(q) || !text_double(json_string_value(q), &v))
				return refuse(where, key, NULL, "holds something that is no number", e);
			if (!isfinite(v) || v < last)
				return refuse(where, key, "sort them", "the five quantiles do not increase", e);
			last = v;
		}
	}
	return QB_OK;
}

static enum qb_status check_stations(const json_t *c, const char *where, struct qb_error *e)
{
	const json_t *list = json_object_get(c, "stations");
	size_t i;
	json_t *s;
	if (list == NULL)
		return QB_OK;
	if (!json_is_array(list))
		return refuse(where, "stations", NULL, "is not a list of names", e);
	json_array_foreach(list, i, s)
	{
		if (!json_is_string(s) || !text_is_name(json_string_value(s)))
			return refuse(where, "stations", NULL, "is not a list of names", e);
	}
	return QB_OK;
}

enum qb_status claim_check(const json_t *c, const char *where, struct qb_error *e)
{
	const char *text;
	int64_t gps;
	enum qb_status st = json_only(c, keys, where, e);
	if (st == QB_OK && (st = json_str(c, "claim_id", where, &text, e)) == QB_OK && !text_is_line(text, 100))
		st = refuse(where, "claim_id", NULL, "is empty or too long", e);
	if (st == QB_OK && (st = json_str(c, "pipeline", where, &text, e)) == QB_OK && !text_is_name(text))
		st = refuse(where, "pipeline", NULL, "is not a name", e);
	if (st == QB_OK)
		st = json_gps(c, "arrival_gps", where, &gps, e);
	if (st == QB_OK && json_object_get(c, "family") != NULL)
		st = json_str(c, "family", where, &text, e);
	if (st == QB_OK && json_object_get(c, "revision_of") != NULL)
		st = json_str(c, "revision_of", where, &text, e);
	if (st == QB_OK)
		st = check_numbers(c, where, e);
	if (st == QB_OK)
		st = check_stations(c, where, e);
	if (st == QB_OK)
		st = check_quantiles(c, where, e);
	if (st == QB_OK) {
		char *whole = json_text(c);
		if (strlen(whole) > CLAIM_TEXT_MAX)
			st = qb_fail(e, QB_RANGE, where, "leave out what is not needed",
			             "the claim is longer than %d bytes", CLAIM_TEXT_MAX);
		qb_free(whole);
	}
	return st;
}

static enum qb_status read_lines(const char *path, const char *text, json_t *list, struct qb_error *e)
{
	int line = 1;
	enum qb_status st = QB_OK;
	for (const char *p = text; st == QB_OK && *p != '\0'; line++) {
		size_t n = strcspn(p, "\n");
		char where[220];
		(void)snprintf(where, sizeof where, "%.200s:%d", path, line);
		if (strspn(p, " \t\r") < n) {
			json_t *doc;
			st = json_read(p, n, where, &doc, e);
			if (st == QB_OK)
				st = claim_check(doc, where, e);
			if (st == QB_OK && json_array_size(list) >= CLAIMS_MAX)
				st = qb_fail(e, QB_RANGE, where, "split the file", "more than %d claims", CLAIMS_MAX);
			if (st == QB_OK)
				json_array_append(list, doc);
			json_decref(doc);
		}
		p += n + (p[n] == '\n');
	}
	return st;
}

enum qb_status claim_file_read(const char *path, json_t **out, struct qb_error *e)
{
	struct buf b = {0};
	json_t *list = json_array(), *doc = NULL;
	enum qb_status st = file_read(path, CLAIM_FILE_MAX, &b, e);
	if (st == QB_OK && (b.len == 0 || strlen((const char *)b.data) != b.len))
		st = qb_fail(e, QB_FORMAT, path, "write one JSON document or JSON lines", "is empty or not text");
	/* One document over several lines, or one a line. */
	if (st == QB_OK && json_read((const char *)b.data, b.len, path, &doc, NULL) == QB_OK) {
		st = claim_check(doc, path, e);
		json_array_append(list, doc);
	} else if (st == QB_OK) {
		st = read_lines(path, (const char *)b.data, list, e);
	}
	json_decref(doc);
	buf_free(&b);
	if (st != QB_OK) {
		json_decref(list);
		list = NULL;
	}
	*out = list;
	return st;
}
