/* CSV tables of the report (RFC 4180): one table of tables, each a list of the document and its columns. */
#include "client/report/report.h"

#include <math.h>
#include <string.h>

#include "client/report/facts.h"

/* Writes a field; text that a spreadsheet could take for a formula gets a leading apostrophe. */
static void field(struct buf *out, const json_t *v, bool last)
{
	const char *s = json_string_value(v);
	if (json_is_integer(v))
		buf_printf(out, "%" JSON_INTEGER_FORMAT, json_integer_value(v));
	else if (json_is_real(v))
		/* GPS times to the microsecond, everything else to 15 digits. */
		buf_printf(out, fabs(json_real_value(v)) >= 1e8 ? "%.6f" : "%.15g", json_real_value(v));
	else if (json_is_boolean(v))
		buf_text(out, json_is_true(v) ? "true" : "false");
	if (s != NULL && *s != '\0') {
		buf_text(out, "\"");
		if (strchr("=+-@\t\r", *s) != NULL)
			buf_text(out, "'");
		for (; *s != '\0'; s++)
			buf_printf(out, *s == '"' ? "\"\"" : "%c", *s);
		buf_text(out, "\"");
	}
	buf_text(out, last ? "\r\n" : ",");
}

struct table {
	const char *name;
	const char *const *columns;         /* NULL-ended; dotted paths into a row */
	json_t *(*rows)(const json_t *doc); /* array, owned by the caller */
};

static json_t *copy_of(const json_t *doc, const char *path)
{
	json_t *v = json_deep_copy(facts_at(doc, path));
	return json_is_array(v) ? v : json_array();
}

static json_t *rows_unexplained(const json_t *doc)
{
	return copy_of(doc, "unexplained");
}

static json_t *rows_claims(const json_t *doc)
{
	return copy_of(doc, "claims");
}

static json_t *rows_missed(const json_t *doc)
{
	return copy_of(doc, "missed.by_all");
}

static json_t *rows_drills(const json_t *doc)
{
	json_t *list = copy_of(doc, "drills"), *d, *name;
	size_t i, k;
	json_array_foreach(list, i, d)
	{
		struct buf b = {0};
		json_array_foreach(json_object_get(d, "claimed_by"), k, name)
		    buf_printf(&b, "%s%s", k > 0 ? " " : "", json_string_value(name));
		json_object_set_new(d, "claimed_by", json_string(b.data != NULL ? (const char *)b.data : ""));
		buf_free(&b);
	}
	return list;
}

static void efficiency_row(json_t *list, const char *who, const json_t *eff, const json_t *itt)
{
	json_t *o = json_object();
	json_object_set_new(o, "who", json_string(who));
	json_object_set(o, "efficiency", (json_t *)(uintptr_t)(eff != NULL ? eff : json_null()));
	json_object_set(o, "intention_to_treat", (json_t *)(uintptr_t)(itt != NULL ? itt : json_null()));
	static const char *const pairs[] = {"clopper_pearson", "wilson"};
	for (size_t i = 0; i < 2; i++) {
		struct buf b = {0};
		for (size_t k = 0; k < 2; k++) {
			json_t *v = json_array_get(json_object_get(eff, pairs[i]), k);
			buf_clear(&b);
			buf_printf(&b, "%s_%s", pairs[i], k == 0 ? "lower" : "upper");
			json_object_set(o, (const char *)b.data, v != NULL ? v : json_null());
		}
		buf_free(&b);
	}
	json_t *c = json_array_get(json_object_get(eff, "corrected"), 0);
	json_object_set(o, "corrected", c != NULL ? c : json_null());
	json_array_append_new(list, o);
}

static json_t *rows_efficiency(const json_t *doc)
{
	json_t *list = json_array();
	const char *name;
	efficiency_row(list, "at least one", facts_at(doc, "comparison.union"),
	               facts_at(doc, "comparison.union_intention_to_treat"));
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		const json_t *p = facts_pipeline_block(doc, name);
		efficiency_row(list, name, json_object_get(p, "efficiency"), json_object_get(p, "intention_to_treat"));
	}
	return list;
}

static void residual_rows(json_t *list, const json_t *doc, const char *name, const char *parameter)
{
	size_t i;
	json_t *r;
	const json_t *of = json_object_get(json_object_get(doc, "residuals"), name);
	json_array_foreach((json_t *)(uintptr_t)json_object_get(json_object_get(of, parameter), "list"), i, r)
	{
		json_t *o = json_copy(r);
		json_object_set_new(o, "pipeline", json_string(name));
		json_object_set_new(o, "parameter", json_string(parameter));
		json_array_append_new(list, o);
	}
}

static json_t *rows_residuals(const json_t *doc)
{
	json_t *list = json_array();
	const char *name;
	for (size_t i = 0; (name = facts_pipeline(doc, i)) != NULL; i++) {
		residual_rows(list, doc, name, "arrival_gps");
		residual_rows(list, doc, name, "chirp_mass_msun");
	}
	return list;
}

static const char *const unexplained_columns[] = {
    "pipeline",    "claim_id",           "arrival_gps",    "window_s", "false_alarm_rate_per_year",
    "network_snr", "pipelines_in_group", "near_null_slot", NULL};
static const char *const claims_columns[] = {"pipeline", "claim_id", "status", "slot_id", "flag", NULL};
static const char *const missed_columns[] = {"slot_id",         "arrival_gps",  "network_snr", "delivered_network_snr",
                                             "chirp_mass_msun", "distance_mpc", NULL};
static const char *const drills_columns[] = {"slot_id",      "state",   "arrival_gps", "network_snr", "chirp_mass_msun",
                                             "distance_mpc", "crowded", "claimed_by",  NULL};
static const char *const efficiency_columns[] = {"who",
                                                 "efficiency.found",
                                                 "efficiency.live",
                                                 "efficiency.estimate",
                                                 "clopper_pearson_lower",
                                                 "clopper_pearson_upper",
                                                 "wilson_lower",
                                                 "wilson_upper",
                                                 "corrected",
                                                 "intention_to_treat.played",
                                                 "intention_to_treat.estimate",
                                                 NULL};
static const char *const residuals_columns[] = {"pipeline", "claim_id", "slot_id", "parameter",
                                                "stated",   "truth",    "z",       NULL};

static const struct table tables[] = {
    {"efficiency.csv", efficiency_columns, rows_efficiency},
    {"unexplained.csv", unexplained_columns, rows_unexplained},
    {"missed.csv", missed_columns, rows_missed},
    {"drills.csv", drills_columns, rows_drills},
    {"residuals.csv", residuals_columns, rows_residuals},
    {"claims.csv", claims_columns, rows_claims},
};

size_t report_csv_count(void)
{
	return sizeof tables / sizeof tables[0];
}

const char *report_csv_name(size_t i)
{
	return i < report_csv_count() ? tables[i].name : NULL;
}

enum qb_status report_csv(const json_t *doc, size_t i, struct buf *out, struct qb_error *e)
{
	if (i >= report_csv_count() || strcmp(facts_text(doc, "document"), "audit") != 0)
		return qb_fail(e, QB_FORMAT, "report", "give the file that `audit run` wrote",
		               "is not an audit document");
	const struct table *t = &tables[i];
	for (size_t k = 0; t->columns[k] != NULL; k++) {
		for (const char *p = t->columns[k]; *p != '\0'; p++)
			buf_printf(out, "%c", *p == '.' ? '_' : *p);
		buf_text(out, t->columns[k + 1] != NULL ? "," : "\r\n");
	}
	json_t *rows = t->rows(doc), *row;
	size_t r;
	json_array_foreach(rows, r, row) for (size_t k = 0; t->columns[k] != NULL; k++)
	    field(out, facts_at(row, t->columns[k]), t->columns[k + 1] == NULL);
	json_decref(rows);
	return QB_OK;
}
