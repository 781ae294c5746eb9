/* Look-ups and number formats of the report. */
#include "client/report/facts.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/clock.h"

const json_t *facts_at(const json_t *doc, const char *path)
{
	while (doc != NULL && *path != '\0') {
		char key[80];
		const size_t n = strcspn(path, ".");
		if (n >= sizeof key)
			return NULL;
		memcpy(key, path, n);
		key[n] = '\0';
		doc = json_object_get(doc, key);
		path += path[n] == '.' ? n + 1 : n;
	}
	return doc;
}

double facts_number(const json_t *doc, const char *path)
{
	const json_t *v = facts_at(doc, path);
	return json_is_number(v) ? json_number_value(v) : NAN;
}

const char *facts_text(const json_t *doc, const char *path)
{
	const char *s = json_string_value(facts_at(doc, path));
	return s != NULL ? s : "";
}

double facts_element(const json_t *doc, const char *path, size_t i)
{
	const json_t *v = json_array_get(facts_at(doc, path), i);
	return json_is_number(v) ? json_number_value(v) : NAN;
}

const char *facts_pipeline(const json_t *doc, size_t i)
{
	return json_string_value(json_array_get(facts_at(doc, "comparison.pipelines"), i));
}

const json_t *facts_pipeline_block(const json_t *doc, const char *name)
{
	return json_object_get(json_object_get(doc, "pipelines"), name);
}

struct loud {
	double snr;
	size_t place;
};

static int loudest_first(const void *a, const void *b)
{
	const struct loud *x = a, *y = b;
	if (x->snr > y->snr || x->snr < y->snr)
		return x->snr > y->snr ? -1 : 1;
	return (x->place > y->place) - (x->place < y->place);
}

json_t *facts_missed(const json_t *doc)
{
	const json_t *list = facts_at(doc, "missed.by_all");
	const size_t n = json_array_size(list);
	struct loud *order = QB_NEW_ARRAY(struct loud, n);
	json_t *out = json_array();
	for (size_t i = 0; i < n; i++) {
		const double snr = facts_number(json_array_get(list, i), "network_snr");
		order[i] = (struct loud){isfinite(snr) ? snr : -1, i};
	}
	qsort(order, n, sizeof *order, loudest_first);
	for (size_t i = 0; i < n; i++)
		json_array_append(out, json_array_get(list, order[i].place));
	qb_free(order);
	return out;
}

static char *unknown(char out[static FACT])
{
	(void)snprintf(out, FACT, "\xe2\x80\x93");
	return out;
}

char *facts_percent(char out[static FACT], double fraction)
{
	if (!isfinite(fraction))
		return unknown(out);
	const double percent = 100 * fraction;
	(void)snprintf(out, FACT, percent > 0 && percent < 0.1 ? "%.2g %%" : "%.1f %%", percent);
	return out;
}

char *facts_range(char out[static FACT], const json_t *pair)
{
	const json_t *lo = json_array_get(pair, 0), *hi = json_array_get(pair, 1);
	if (!json_is_number(lo) || !json_is_number(hi))
		return unknown(out);
	(void)snprintf(out, FACT, "%.1f to %.1f %%", 100 * json_number_value(lo), 100 * json_number_value(hi));
	return out;
}

char *facts_significant(char out[static FACT], double x, int digits)
{
	if (!isfinite(x))
		return unknown(out);
	if (x >= 1e6 || (fabs(x) < 1e-5 && (x < 0 || x > 0))) {
		(void)snprintf(out, FACT, "%.*e", digits - 1, x);
		return out;
	}
	int decimals = digits - 1 - (fabs(x) > 0 ? (int)floor(log10(fabs(x))) : 0);
	(void)snprintf(out, FACT, "%.*f", decimals > 0 ? decimals : 0, x);
	return out;
}

char *facts_p_value(char out[static FACT], double p)
{
	if (!isfinite(p))
		return unknown(out);
	if (p < 0.0001)
		(void)snprintf(out, FACT, "< 0.0001");
	else
		(void)snprintf(out, FACT, p < 0.001 ? "%.4f" : p < 0.1 ? "%.3f" : "%.2f", p);
	return out;
}

char *facts_count(char out[static FACT], double n)
{
	if (!isfinite(n))
		return unknown(out);
	(void)snprintf(out, FACT, "%.0f", n);
	return out;
}

char *facts_plain(char out[static FACT], double x)
{
	if (!isfinite(x))
		return unknown(out);
	(void)snprintf(out, FACT, "%.6g", x);
	return out;
}

char *facts_utc(char out[static FACT], double gps)
{
	if (!(gps >= 0 && gps < 8e9))
		return unknown(out);
	(void)clock_utc_text((int64_t)(gps + 0.5) * NS_PER_S, out, FACT);
	char *t = strchr(out, 'T'), *z = strchr(out, 'Z');
	if (t != NULL && z != NULL) {
		*t = ' ';
		(void)snprintf(z, FACT - (size_t)(z - out), " UTC");
	}
	return out;
}

char *facts_duration(char out[static FACT], double seconds)
{
	if (!isfinite(seconds))
		return unknown(out);
	if (seconds >= 2 * 86400)
		(void)snprintf(out, FACT, "%.1f days", seconds / 86400);
	else if (seconds >= 7200)
		(void)snprintf(out, FACT, "%.1f hours", seconds / 3600);
	else
		(void)snprintf(out, FACT, "%.0f s", seconds);
	return out;
}
