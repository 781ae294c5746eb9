/* Notes and reports on their way to the service; see filing.h. */
#include "client/agent/filing.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

#include "client/agent/watch.h"
#include "server/base/alloc.h"
#include "server/base/check.h"
#include "server/base/text.h"

#define REPORT_NUMBER 15
#define BACKOFF_MAX_S 30

enum qb_status filing_seal(const struct driver *d, enum record_type type, int64_t slot, int number, const void *content,
                           size_t n, struct buf *out, uint8_t id[static RECORD_ID_BYTES], struct qb_error *e)
{
	const struct slots *sl = &d->campaign->plan->slots;
	struct record_header h = {.type = type,
	                          .epoch = (uint32_t)d->group.seal_epoch,
	                          .index = (uint64_t)slot * 256 + (uint64_t)d->station * 16 + (uint64_t)number,
	                          .start_gps_ns = slots_start(sl, slot),
	                          .duration_ns = (uint64_t)sl->slot_ns};
	struct record rec;
	size_t from = out->len;
	memcpy(h.campaign, d->group.campaign, sizeof h.campaign);
	memcpy(h.author, d->home.key_id, sizeof h.author);
	enum qb_status st = record_seal(&d->group, &h, content, n, out, e);
	if (st == QB_OK)
		st = record_check(&d->group, out->data + from, out->len - from, &rec, e);
	if (st == QB_OK)
		memcpy(id, rec.id, RECORD_ID_BYTES);
	return st;
}

static enum qb_status post(struct driver *d, bool report, int64_t slot, int number, const struct buf *content,
                           struct qb_error *e)
{
	struct buf record = {0};
	uint8_t id[RECORD_ID_BYTES];
	json_t *extra = json_object(), *body = NULL;
	char *path = text_printf("/v1/campaigns/%s/recipes/%lld/%s", d->campaign->name, (long long)slot,
	                         report ? "report" : "notes");
	enum qb_status st = filing_seal(d, report ? RECORD_PLAY_REPORT : RECORD_PLAY_NOTE, slot, number, content->data,
	                                content->len, &record, id, e);
	json_object_set_new(extra, "station", json_string(driver_station(d)->name));
	json_object_set_new(extra, "slot", json_integer(slot));
	json_object_set_new(extra, "record_id", json_hex_new(id, sizeof id));
	if (st == QB_OK)
		st = link_entry(&d->link, report ? "play-report" : "play-note", d->campaign->id, "", extra, &body, NULL,
		                e);
	else
		json_decref(extra);
	if (st == QB_OK) {
		char *text = base64_encode(record.data, record.len);
		json_object_set_new(body, "record", json_string(text));
		qb_free(text);
		st = link_post(&d->link, path, body, NULL, e);
	}
	if (st == QB_OK)
		watch_contact(d);
	json_decref(body);
	qb_free(path);
	buf_free(&record);
	return st;
}

/* An answer that got lost: the service may have what it now refuses. */
static bool there_already(struct driver *d, bool report, int64_t slot, int number)
{
	struct watch_slot w;
	struct qb_error ignored = {0};
	if (watch_slot(d, slot, &w, &ignored) != QB_OK)
		return false;
	return report ? w.reported : w.notes > number;
}

/* A spare host's that came before its turn: again later, unless the main host has taken the slot. */
static bool before_its_turn(struct filing *f, enum qb_status st)
{
	struct watch_slot w;
	struct qb_error ignored = {0};
	if (st != QB_CONFLICT || f->d->place != RECIPE_SPARE || watch_slot(f->d, f->slot, &w, &ignored) != QB_OK)
		return false;
	f->left = w.host == RECIPE_MAIN;
	return w.host != RECIPE_SPARE;
}

/* QB_OK: it is there, or was refused for good (and logged); QB_UNREACHABLE: try again. */
static enum qb_status file_one(struct filing *f, bool report, int number, const struct buf *content)
{
	struct driver *d = f->d;
	int64_t slot = f->slot;
	struct qb_error e = {0};
	char text[24], line[600];
	enum qb_status st = post(d, report, slot, number, content, &e);
	snprintf(text, sizeof text, "%lld", (long long)slot);
	if (st == QB_OK || there_already(d, report, slot, number)) {
		log_event(&d->log, LOG_INFO_, report ? "report-filed" : "note-filed", "slot", text, NULL);
		return QB_OK;
	}
	if (before_its_turn(f, st))
		return QB_UNREACHABLE;
	log_event(&d->log, LOG_WARN_, report ? "report-not-filed" : "note-not-filed", "slot", text, "why",
	          qb_error_line(&e, line, sizeof line), NULL);
	return st == QB_UNREACHABLE ? st : QB_OK;
}

static void back_off(struct filing *f)
{
	int64_t ns = (int64_t)200000000 << (f->tries < 8 ? f->tries : 8);
	if (ns > BACKOFF_MAX_S * NS_PER_S)
		ns = BACKOFF_MAX_S * NS_PER_S;
	f->tries++;
	f->next_ns = clock_now(&f->d->system) + ns;
}

void filing_begin(struct filing *f, struct driver *d, int64_t slot, int64_t notes)
{
	CHECK(notes >= 0 && notes <= PLAY_NOTES_MAX);
	*f = (struct filing){.d = d, .slot = slot, .n_notes = (int)notes, .n_sent = (int)notes};
}

void filing_take(struct filing *f, const struct play_note *note)
{
	if (f->n_notes < PLAY_NOTES_MAX && note->number == f->n_notes)
		f->note[f->n_notes++] = *note;
}

void filing_send(struct filing *f)
{
	while (f->n_sent < f->n_notes && clock_now(&f->d->system) >= f->next_ns) {
		struct buf content = {0};
		struct qb_error e = {0};
		CHECK(play_note_encode(&f->note[f->n_sent], &content, &e) == QB_OK);
		enum qb_status st = file_one(f, false, f->n_sent, &content);
		buf_wipe(&content);
		if (st != QB_OK) {
			back_off(f);
			return;
		}
		wipe(&f->note[f->n_sent++], sizeof f->note[0]);
		f->tries = 0;
	}
}

bool filing_finish(struct filing *f, const struct play_report *report)
{
	struct buf content = {0};
	struct qb_error e = {0};
	bool done = false;
	CHECK(play_report_encode(report, &content, &e) == QB_OK);
	for (;;) {
		filing_send(f);
		if (f->n_sent == f->n_notes && clock_now(&f->d->system) >= f->next_ns) {
			done = file_one(f, true, REPORT_NUMBER, &content) == QB_OK;
			if (!done)
				back_off(f);
		}
		if (done || f->left || watch_stopping(f->d))
			break;
		watch_pause(f->d, true);
	}
	buf_wipe(&content);
	return done;
}
