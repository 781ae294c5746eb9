/* One slot from its freeze to its report; see slot.h. */
#include "client/agent/slot.h"

#include <stdio.h>
#include <string.h>

#include "client/agent/fetch.h"
#include "client/agent/filing.h"
#include "client/agent/play.h"
#include "client/agent/watch.h"
#include "server/base/alloc.h"
#include "server/base/check.h"

#define LOOK_NS (NS_PER_S / 4) /* of the system's time between two looks at the slot while nothing moves */

struct slot_run {
	struct driver *d;
	int64_t n, start_ns, end_ns, freeze_ns;
	int64_t now_ns;    /* the clock that counts, at the last look */
	int64_t looked_ns; /* the system's clock, at the last look at the slot */
	bool seen_once, halt_said;
	bool left; /* to the station's other host */
	struct watch_slot seen;
	struct play play;
	struct drive drive;
	bool settled; /* it is known whether there is a drive */
	bool sinking; /* the sink takes the slot's samples */
	int next_note;
	struct filing filing;
	double *sent; /* what went out of the window; owned, wiped */
	int64_t sent_n, sent_cap;
	double *block; /* owned */
	char reason[400];
};

static void say(const struct slot_run *r, const char *event)
{
	char text[24];
	snprintf(text, sizeof text, "%lld", (long long)r->n);
	log_event(&r->d->log, LOG_INFO_, event, "slot", text, NULL);
}

/* The reason is for the sealed report; a log that gave it could tell one slot from another. */
static void halt(struct slot_run *r, enum play_state why, int64_t at_ns, const char *reason)
{
	bool before = play_halted(&r->play);
	play_halt(&r->play, why, at_ns);
	if (before || !play_halted(&r->play))
		return;
	/* Plain characters only: a path cut in the middle of a character would be no text any more. */
	snprintf(r->reason, sizeof r->reason, "%s", reason);
	for (char *p = r->reason; *p != '\0'; p++)
		*p = *p < 0x20 || *p > 0x7e ? '?' : *p;
}

static bool missed(const struct slot_run *r)
{
	int64_t grace = r->d->campaign->plan->slots.guard_ns / 2;
	return r->now_ns >= (r->d->link.rehearsal ? r->end_ns : r->start_ns + grace);
}

static void begin(struct slot_run *r, struct driver *d, int64_t n)
{
	const struct slots *sl = &d->campaign->plan->slots;
	*r = (struct slot_run){.d = d,
	                       .n = n,
	                       .start_ns = slots_start(sl, n),
	                       .end_ns = slots_start(sl, n + 1),
	                       .freeze_ns = slots_freeze(sl, n)};
	play_begin(&r->play, r->start_ns, sl->slot_ns, driver_station(d)->actuator.rate_hz);
	r->block = QB_NEW_ARRAY(double, play_block_samples(&r->play));
}

static void end(struct slot_run *r)
{
	drive_free(&r->drive);
	if (r->sent != NULL)
		wipe(r->sent, (size_t)r->sent_cap * sizeof *r->sent);
	qb_free(r->sent);
	wipe(r->block, play_block_samples(&r->play) * sizeof *r->block);
	qb_free(r->block);
	wipe(r, sizeof *r);
}

/* ---- looking ---- */

/* The time first, then the slot: what stood in the way before this time is then seen before anything is played. */
static enum qb_status look(struct slot_run *r, struct qb_error *e)
{
	int64_t now;
	enum qb_status st = watch_now(r->d, &now, e);
	if (st != QB_OK)
		return st;
	bool moved = now != r->now_ns || !r->seen_once;
	bool quick = r->d->link.rehearsal && moved;
	if (!r->d->link.rehearsal)
		r->now_ns = now;
	if (now >= r->freeze_ns && (quick || !r->settled || clock_now(&r->d->system) - r->looked_ns >= LOOK_NS)) {
		st = watch_slot(r->d, r->n, &r->seen, e);
		if (st != QB_OK)
			return st;
		r->looked_ns = clock_now(&r->d->system);
		r->seen_once = true;
	}
	r->now_ns = now;
	return QB_OK;
}

/*
 * What stands in the way once the slot has begun. A hold is taken to bear on everything that is not out yet. The line
 * in the log depends on the cause alone: whether there was anything left to halt is the slot's secret.
 */
static void obey(struct slot_run *r)
{
	const struct driver *d = r->d;
	const struct {
		bool stands;
		enum play_state why;
		int64_t at_ns;
		const char *reason;
	} causes[] = {{r->seen.stopped, PLAY_STOPPED, r->seen.stopped_gps_ns, "stopped"},
	              {r->seen.held, PLAY_HELD, 0, "held"},
	              {!watch_observing(d->opt.state_file), PLAY_FAILED, 0, "the station is not observing"},
	              {watch_contact_lost(d), PLAY_FAILED, 0, "no contact with the service"},
	              {watch_stopping(d), PLAY_FAILED, 0, "the driver was told to end"}};
	if (r->now_ns < r->start_ns)
		return;
	for (size_t i = 0; i < sizeof causes / sizeof causes[0]; i++) {
		if (!causes[i].stands)
			continue;
		halt(r, causes[i].why, causes[i].at_ns, causes[i].reason);
		if (!r->halt_said)
			say(r, "slot-halted");
		r->halt_said = true;
	}
}

/* ---- the key ---- */

static void open_sink(struct slot_run *r)
{
	struct sink_slot s = {.station = driver_station(r->d)->name,
	                      .slot = r->n,
	                      .start_gps_ns = r->start_ns,
	                      .rate_hz = r->play.rate_hz,
	                      .n_samples = r->play.n_samples};
	struct qb_error e = {0};
	char line[600];
	r->sinking = sink_begin(r->d->sink, &s, &e) == QB_OK;
	if (r->sinking)
		return;
	halt(r, PLAY_FAILED, 0, "the sink failed");
	log_event(&r->d->log, LOG_ERROR_, "sink-failed", "why", qb_error_line(&e, line, sizeof line), NULL);
}

static void load(struct slot_run *r)
{
	const struct drive *v = &r->drive;
	play_load(&r->play, v->counts, v->at, (int64_t)v->n, v->from_ns, v->to_ns);
	r->sent_cap = r->play.window_to - r->play.window_from;
	r->sent = QB_NEW_ARRAY(double, (size_t)r->sent_cap);
}

/* A station that was not observing when the recipes were fetched may be by now. */
static void get_ready(struct slot_run *r)
{
	struct qb_error e = {0};
	if (r->now_ns < r->freeze_ns && r->d->ready_to <= r->n && fetch_ahead(r->d, r->n, &e) != QB_OK)
		log_event(&r->d->log, LOG_WARN_, "recipes-not-fetched", NULL);
}

/* Asks for the key while that can help; decides at the slot's start, or when it is too late. */
static void settle(struct slot_run *r)
{
	struct qb_error e = {0};
	char line[400];
	bool free_now = !r->seen.held && !r->seen.stopped;
	if (r->settled || r->now_ns < r->freeze_ns || !r->seen_once)
		return;
	if (missed(r)) {
		halt(r, PLAY_SKIPPED, 0, "the driver or the key came too late");
		r->settled = true;
	} else if (r->seen.going == GOING_YES && free_now) {
		enum qb_status st = fetch_drive(r->d, r->n, &r->drive, &e);
		r->settled = st != QB_CONFLICT && st != QB_UNREACHABLE;
		if (st == QB_OK)
			load(r);
		else if (r->settled)
			halt(r, PLAY_FAILED, 0, qb_error_line(&e, line, sizeof line));
	} else if (r->now_ns >= r->start_ns && r->seen.going != GOING_UNKNOWN) {
		halt(r,
		     r->seen.stopped ? PLAY_STOPPED
		     : r->seen.held  ? PLAY_HELD
		                     : PLAY_SKIPPED,
		     0, "the station does not go in this slot");
		r->settled = true;
	}
	if (!r->settled)
		return;
	/* Of a slot that is over there may be a file from before a restart: it is left alone. */
	if (!missed(r))
		open_sink(r);
	say(r, "slot-settled");
}

/* ---- playing ---- */

static void take_note(struct slot_run *r, int64_t due_ns)
{
	struct play_note note = {.slot = r->n,
	                         .number = r->next_note,
	                         .at_gps_ns = due_ns,
	                         .state = r->play.state,
	                         .peak_counts = r->play.peak_counts};
	snprintf(note.station, sizeof note.station, "%s", driver_station(r->d)->name);
	note.samples = play_sent(&r->play, &note.played_from_ns, &note.played_to_ns);
	filing_take(&r->filing, &note);
	wipe(&note, sizeof note);
}

static void put(struct slot_run *r, int64_t from, size_t n)
{
	struct qb_error e = {0};
	char line[600];
	for (size_t k = 0; k < n; k++) {
		int64_t at = from + (int64_t)k - r->play.window_from;
		if (at >= 0 && at < r->sent_cap) {
			r->sent[at] = r->block[k];
			r->sent_n = at + 1;
		}
	}
	if (!r->sinking || sink_put(r->d->sink, r->block, n, &e) == QB_OK)
		return;
	sink_abandon(r->d->sink);
	r->sinking = false;
	halt(r, PLAY_FAILED, 0, "the sink failed");
	log_event(&r->d->log, LOG_ERROR_, "sink-failed", "why", qb_error_line(&e, line, sizeof line), NULL);
}

/* Plays up to the look's time, and takes each note when the samples before it are out. */
static bool advance(struct slot_run *r)
{
	int64_t slot_ns = r->end_ns - r->start_ns, due;
	int64_t before = r->play.next;
	int last = play_notes(slot_ns);
	do {
		due = r->next_note < last ? play_note_due(r->start_ns, slot_ns, r->next_note) : PLAY_NEVER;
		int64_t to = due < r->now_ns ? due : r->now_ns, from = r->play.next;
		for (size_t n; (n = play_emit(&r->play, to, r->block)) > 0; from = r->play.next)
			put(r, from, n);
		if (due <= r->now_ns) {
			take_note(r, due);
			r->next_note++;
		}
	} while (due <= r->now_ns);
	return r->play.next != before;
}

static void close_sink(struct slot_run *r)
{
	struct qb_error e = {0};
	char line[600];
	if (!r->sinking || sink_end(r->d->sink, &e) == QB_OK)
		return;
	r->play.state = PLAY_FAILED;
	snprintf(r->reason, sizeof r->reason, "the sink failed");
	log_event(&r->d->log, LOG_ERROR_, "sink-failed", "why", qb_error_line(&e, line, sizeof line), NULL);
}

/* Told to end: goes on until the ramp is out, so that the actuator is not left at a step. */
static bool may_leave(const struct slot_run *r)
{
	if (!watch_stopping(r->d))
		return false;
	return r->now_ns < r->start_ns || r->play.drive == NULL || r->play.last == 0 ||
	       (r->play.silent_from != PLAY_NEVER && r->play.next >= r->play.silent_from);
}

/* Until the slot's last sample is out and its last note taken. False: told to end, or the campaign ended before it. */
static bool play_out(struct slot_run *r)
{
	bool begun = false;
	while (!play_done(&r->play)) {
		struct qb_error e = {0};
		bool progress = false;
		if (look(r, &e) == QB_OK || !r->d->link.rehearsal) {
			if (watch_ended(&r->seen))
				return false;
			if (r->seen_once && r->seen.host >= 0 && r->seen.host != (int)r->d->place) {
				r->left = true;
				say(r, "slot-left-to-other-host");
				return false;
			}
			if (!begun && r->seen_once) {
				filing_begin(&r->filing, r->d, r->n, r->seen.notes);
				begun = true;
			}
			get_ready(r);
			settle(r);
			if (r->settled) {
				obey(r);
				progress = r->now_ns >= r->start_ns && advance(r);
			}
			if (begun)
				filing_send(&r->filing);
		}
		if (may_leave(r))
			return false;
		if (!progress)
			watch_pause(r->d, r->settled && r->now_ns >= r->start_ns);
	}
	return true;
}

/* ---- the report ---- */

static void make_report(const struct slot_run *r, struct play_report *out)
{
	*out = (struct play_report){
	    .slot = r->n, .state = r->play.state, .peak_counts = r->play.peak_counts, .margin = r->drive.margin};
	snprintf(out->station, sizeof out->station, "%s", driver_station(r->d)->name);
	snprintf(out->calibration_id, sizeof out->calibration_id, "%s", r->drive.calibration_id);
	snprintf(out->reason, sizeof out->reason, "%s", r->reason);
	out->samples = play_sent(&r->play, &out->played_from_ns, &out->played_to_ns);
	blake2b_512(out->samples_hash, r->sent, (size_t)out->samples * sizeof *r->sent);
}

enum qb_status slot_run(struct driver *d, int64_t n, bool *filed, struct qb_error *e)
{
	struct slot_run r;
	struct play_report report;
	enum qb_status st = QB_OK;
	*filed = false;
	begin(&r, d, n);
	say(&r, "slot-waits");
	if (play_out(&r)) {
		close_sink(&r);
		st = prekeys_erase(d->prekeys, n, e);
		make_report(&r, &report);
		drive_free(&r.drive);
		struct qb_error ignored = {0};
		if (fetch_ahead(d, n + 1, &ignored) != QB_OK)
			log_event(&d->log, LOG_WARN_, "recipes-not-fetched", NULL);
		*filed = filing_finish(&r.filing, &report);
		wipe(&report, sizeof report);
		say(&r, "slot-ends");
	} else {
		sink_abandon(d->sink);
		if (r.left)
			st = prekeys_erase(d->prekeys, n, e);
	}
	end(&r);
	return st;
}
