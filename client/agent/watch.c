/* The clock, the slot and the station as the driver sees them; see watch.h. */
#include "client/agent/watch.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

#include "server/base/alloc.h"
#include "server/base/text.h"

enum qb_status watch_now(struct driver *d, int64_t *now_gps_ns, struct qb_error *e)
{
	if (!d->link.rehearsal) {
		*now_gps_ns = clock_now(&d->system);
		return QB_OK;
	}
	enum qb_status st = link_refresh(&d->link, e);
	if (st == QB_OK) {
		watch_contact(d);
		*now_gps_ns = d->link.now_gps_ns;
	}
	return st;
}

static enum qb_status read_flag(const json_t *obj, const char *key, bool *out, struct qb_error *e)
{
	const json_t *v = json_object_get(obj, key);
	if (!json_is_boolean(v))
		return qb_fail(e, QB_FORMAT, "slot", NULL, "the service's answer has no true or false '%s'", key);
	*out = json_is_true(v);
	return QB_OK;
}

static enum qb_status read_going(const json_t *obj, enum watch_going *out, struct qb_error *e)
{
	const json_t *v = json_object_get(obj, "going");
	if (json_is_null(v))
		*out = GOING_UNKNOWN;
	else if (json_is_boolean(v))
		*out = json_is_true(v) ? GOING_YES : GOING_NO;
	else
		return qb_fail(e, QB_FORMAT, "slot", NULL, "the service's answer has no 'going'");
	return QB_OK;
}

static enum qb_status read_host(const json_t *obj, int *out, struct qb_error *e)
{
	const json_t *v = json_object_get(obj, "host");
	const char *word = json_string_value(v);
	*out = word == NULL ? -1 : strcmp(word, "spare") == 0 ? RECIPE_SPARE : RECIPE_MAIN;
	if (!json_is_null(v) && (word == NULL || (*out == RECIPE_MAIN && strcmp(word, "main") != 0)))
		return qb_fail(e, QB_FORMAT, "slot", NULL, "the service's answer has no 'host'");
	return QB_OK;
}

enum qb_status watch_slot_parse(const json_t *doc, int64_t slot, const char *station, struct watch_slot *out,
                                struct qb_error *e)
{
	const json_t *mine = json_object_get(json_object_get(doc, "stations"), station);
	int64_t number = 0;
	*out = (struct watch_slot){0};
	enum qb_status st = json_int(doc, "slot", "slot", 0, INT64_C(1) << 40, &number, e);
	if (st == QB_OK && (number != slot || mine == NULL))
		st = qb_fail(e, QB_FORMAT, "slot", NULL, "the service answers about another slot or station");
	if (st == QB_OK)
		st = read_flag(doc, "ended", &out->ended, e);
	if (st == QB_OK)
		st = read_flag(mine, "held", &out->held, e);
	if (st == QB_OK)
		st = read_flag(mine, "stopped", &out->stopped, e);
	if (st == QB_OK)
		st = read_flag(mine, "reported", &out->reported, e);
	if (st == QB_OK)
		st = read_going(mine, &out->going, e);
	if (st == QB_OK)
		st = read_host(mine, &out->host, e);
	if (st == QB_OK)
		st = json_int(mine, "notes", "slot", 0, PLAY_NOTES_MAX, &out->notes, e);
	if (st == QB_OK && out->stopped)
		st = json_gps(mine, "stopped_gps", "slot", &out->stopped_gps_ns, e);
	return st;
}

enum qb_status watch_slot(struct driver *d, int64_t slot, struct watch_slot *out, struct qb_error *e)
{
	json_t *doc = NULL;
	char *path = text_printf("/v1/campaigns/%s/slots/%lld", d->campaign->name, (long long)slot);
	enum qb_status st = link_get(&d->link, path, &doc, e);
	if (st == QB_OK) {
		watch_contact(d);
		st = watch_slot_parse(doc, slot, driver_station(d)->name, out, e);
	}
	json_decref(doc);
	qb_free(path);
	return st;
}

bool watch_ended(const struct watch_slot *seen)
{
	return seen->ended && seen->going == GOING_UNKNOWN;
}

bool watch_observing(const char *path)
{
	char line[64];
	if (path == NULL)
		return true;
	FILE *f = fopen(path, "re");
	if (f == NULL)
		return false;
	bool got = fgets(line, sizeof line, f) != NULL;
	fclose(f);
	if (!got)
		return false;
	line[strcspn(line, "\r\n")] = '\0';
	return strcmp(line, "observing") == 0;
}

void watch_contact(struct driver *d)
{
	d->contact_ns = clock_now(&d->system);
}

bool watch_contact_lost(const struct driver *d)
{
	return !d->link.rehearsal && (double)(clock_now(&d->system) - d->contact_ns) > d->opt.contact_s * 1e9;
}

void watch_pause(const struct driver *d, bool playing)
{
	long ms = d->link.rehearsal ? 10 : playing ? 20 : 200;
	struct timespec t = {.tv_nsec = ms * 1000000};
	nanosleep(&t, NULL);
}

bool watch_stopping(const struct driver *d)
{
	return d->stopping != NULL && *d->stopping;
}
