/* Codecs of the driver's play notes and reports: short JSON documents with their keys in a fixed order. */
#include "server/drill/report.h"

#include <inttypes.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/json.h"
#include "server/base/text.h"

#define NAME_MAX_BYTES 63
#define LATEST_GPS_NS  INT64_C(8589934592000000000)

static const char *const state_words[PLAY_STATES] = {"waiting", "playing", "played", "held",
                                                     "stopped", "skipped", "failed"};

const char *play_state_word(enum play_state s)
{
	CHECK(s < PLAY_STATES);
	return state_words[s];
}

/* What notes and reports have in common. */
struct common {
	int64_t slot;
	const char *station;
	enum play_state state;
	int64_t from_ns, to_ns, samples;
	double peak;
};

static enum qb_status check_common(const struct common *c, const char *what, struct qb_error *e)
{
	if (!text_is_name(c->station))
		return qb_fail(e, QB_RANGE, what, NULL, "has no valid station name");
	if (c->slot < 0 || c->samples < 0 || !isfinite(c->peak) || c->peak < 0)
		return qb_fail(e, QB_RANGE, what, NULL, "has a negative slot, sample count or peak");
	if (c->from_ns < 0 || c->to_ns < c->from_ns || c->to_ns >= LATEST_GPS_NS)
		return qb_fail(e, QB_RANGE, what, NULL, "has a played interval that ends before it begins");
	if (c->state == PLAY_PLAYED && (c->samples == 0 || c->to_ns == c->from_ns))
		return qb_fail(e, QB_RANGE, what, NULL, "says 'played' but has no samples");
	return QB_OK;
}

static json_t *put_common(const struct common *c)
{
	json_t *j = json_object();
	json_object_set_new(j, "slot", json_integer(c->slot));
	json_object_set_new(j, "station", json_string(c->station));
	json_object_set_new(j, "state", json_string(state_words[c->state]));
	json_object_set_new(j, "played_from_gps", json_gps_new(c->from_ns));
	json_object_set_new(j, "played_to_gps", json_gps_new(c->to_ns));
	json_object_set_new(j, "samples", json_integer(c->samples));
	json_object_set_new(j, "peak_counts", json_real(c->peak));
	return j;
}

static enum qb_status finish(json_t *j, size_t limit, const char *what, struct buf *out, struct qb_error *e)
{
	char *text = json_text(j);
	size_t n = strlen(text);
	enum qb_status st = QB_OK;
	if (n > limit)
		st = qb_fail(e, QB_RANGE, what, NULL, "takes %zu bytes, at most %zu are allowed", n, limit);
	else
		buf_put(out, text, n);
	qb_free(text);
	json_decref(j);
	return st;
}

static bool is_line_or_empty(const char *s, size_t size)
{
	return *s == '\0' || text_is_line(s, size - 1);
}

static enum qb_status get_name(const json_t *j, const char *key, const char *what, bool may_be_empty, char *out,
                               size_t size, struct qb_error *e)
{
	const char *s;
	enum qb_status st = json_str(j, key, what, &s, e);
	if (st != QB_OK)
		return st;
	if (!is_line_or_empty(s, size) || (*s == '\0' && !may_be_empty))
		return qb_fail(e, QB_FORMAT, what, NULL, "has a '%s' that is empty, too long or not one line", key);
	(void)snprintf(out, size, "%s", s);
	return QB_OK;
}

static enum qb_status get_common(const json_t *j, const char *what, struct common *c, char *station, struct qb_error *e)
{
	const char *word = NULL;
	enum qb_status st = json_int(j, "slot", what, 0, INT64_C(1000000), &c->slot, e);
	if (st == QB_OK)
		st = get_name(j, "station", what, false, station, NAME_MAX_BYTES + 1, e);
	if (st == QB_OK)
		st = json_str(j, "state", what, &word, e);
	if (st != QB_OK)
		return st;
	int s = 0;
	while (s < PLAY_STATES && strcmp(word, state_words[s]) != 0)
		s++;
	if (s == PLAY_STATES)
		return qb_fail(e, QB_FORMAT, what, NULL, "has the unknown state '%.40s'", word);
	c->state = (enum play_state)s;
	c->station = station;
	st = json_gps(j, "played_from_gps", what, &c->from_ns, e);
	if (st == QB_OK)
		st = json_gps(j, "played_to_gps", what, &c->to_ns, e);
	if (st == QB_OK)
		st = json_int(j, "samples", what, 0, INT64_MAX, &c->samples, e);
	if (st == QB_OK)
		st = json_num(j, "peak_counts", what, &c->peak, e);
	return st == QB_OK ? check_common(c, what, e) : st;
}

enum qb_status play_note_encode(const struct play_note *n, struct buf *out, struct qb_error *e)
{
	struct common c = {n->slot,         n->station, n->state,      n->played_from_ns,
	                   n->played_to_ns, n->samples, n->peak_counts};
	enum qb_status st = check_common(&c, "play note", e);
	if (st != QB_OK)
		return st;
	if (n->number < 0 || n->number >= PLAY_NOTES_MAX)
		return qb_fail(e, QB_RANGE, "play note", NULL, "has the number %d, at most %d are kept a slot",
		               n->number, PLAY_NOTES_MAX);
	json_t *j = put_common(&c);
	json_object_set_new(j, "number", json_integer(n->number));
	json_object_set_new(j, "at_gps", json_gps_new(n->at_gps_ns));
	return finish(j, PLAY_NOTE_BYTES, "play note", out, e);
}

enum qb_status play_note_decode(const void *p, size_t n, struct play_note *out, struct qb_error *e)
{
	static const char *const keys[] = {"slot",    "station",     "state",  "played_from_gps", "played_to_gps",
	                                   "samples", "peak_counts", "number", "at_gps",          NULL};
	const char *what = "play note";
	struct common c = {0};
	int64_t number = 0;
	json_t *j = NULL;
	*out = (struct play_note){0};
	enum qb_status st = n > PLAY_NOTE_BYTES ? qb_fail(e, QB_FORMAT, what, NULL, "is too long") : QB_OK;
	if (st == QB_OK)
		st = json_read(p, n, what, &j, e);
	if (st == QB_OK)
		st = json_only(j, keys, what, e);
	if (st == QB_OK)
		st = get_common(j, what, &c, out->station, e);
	if (st == QB_OK)
		st = json_int(j, "number", what, 0, PLAY_NOTES_MAX - 1, &number, e);
	if (st == QB_OK)
		st = json_gps(j, "at_gps", what, &out->at_gps_ns, e);
	out->slot = c.slot;
	out->number = (int)number;
	out->state = c.state;
	out->played_from_ns = c.from_ns;
	out->played_to_ns = c.to_ns;
	out->samples = c.samples;
	out->peak_counts = c.peak;
	json_decref(j);
	return st;
}

enum qb_status play_report_encode(const struct play_report *r, struct buf *out, struct qb_error *e)
{
	struct common c = {r->slot,         r->station, r->state,      r->played_from_ns,
	                   r->played_to_ns, r->samples, r->peak_counts};
	enum qb_status st = check_common(&c, "play report", e);
	if (st != QB_OK)
		return st;
	if (!isfinite(r->margin) || r->margin < 0)
		return qb_fail(e, QB_RANGE, "play report", NULL, "has a margin that is negative or not finite");
	if (!is_line_or_empty(r->calibration_id, sizeof r->calibration_id) ||
	    !is_line_or_empty(r->reason, sizeof r->reason))
		return qb_fail(e, QB_RANGE, "play report", NULL,
		               "has a calibration or reason that is not one line of text");
	json_t *j = put_common(&c);
	json_object_set_new(j, "margin", json_real(r->margin));
	json_object_set_new(j, "samples_hash", json_hex_new(r->samples_hash, sizeof r->samples_hash));
	json_object_set_new(j, "calibration_id", json_string(r->calibration_id));
	json_object_set_new(j, "reason", json_string(r->reason));
	return finish(j, PLAY_REPORT_BYTES, "play report", out, e);
}

enum qb_status play_report_decode(const void *p, size_t n, struct play_report *out, struct qb_error *e)
{
	static const char *const keys[] = {"slot",          "station",        "state",       "played_from_gps",
	                                   "played_to_gps", "samples",        "peak_counts", "margin",
	                                   "samples_hash",  "calibration_id", "reason",      NULL};
	const char *what = "play report";
	struct common c = {0};
	json_t *j = NULL;
	*out = (struct play_report){0};
	enum qb_status st = n > PLAY_REPORT_BYTES ? qb_fail(e, QB_FORMAT, what, NULL, "is too long") : QB_OK;
	if (st == QB_OK)
		st = json_read(p, n, what, &j, e);
	if (st == QB_OK)
		st = json_only(j, keys, what, e);
	if (st == QB_OK)
		st = get_common(j, what, &c, out->station, e);
	if (st == QB_OK)
		st = json_num(j, "margin", what, &out->margin, e);
	if (st == QB_OK && out->margin < 0)
		st = qb_fail(e, QB_RANGE, what, NULL, "has a negative margin");
	if (st == QB_OK)
		st = json_hex(j, "samples_hash", what, out->samples_hash, sizeof out->samples_hash, e);
	if (st == QB_OK)
		st = get_name(j, "calibration_id", what, true, out->calibration_id, sizeof out->calibration_id, e);
	if (st == QB_OK)
		st = get_name(j, "reason", what, true, out->reason, sizeof out->reason, e);
	out->slot = c.slot;
	out->state = c.state;
	out->played_from_ns = c.from_ns;
	out->played_to_ns = c.to_ns;
	out->samples = c.samples;
	out->peak_counts = c.peak;
	json_decref(j);
	return st;
}
