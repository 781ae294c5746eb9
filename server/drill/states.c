/* Slot states from events; the rules are audit A14 and docs/decisions/301-slot-states.md. */
#include "server/drill/states.h"

#include <string.h>

#include "server/base/check.h"

static const char *const state_words[SLOT_STATES] = {"live", "null", "vetoed", "skipped", "aborted", "failed_delivery"};
static const char *const outcome_words[STATION_OUTCOMES] = {"played", "not_ready", "held",    "too_few",
                                                            "vetoed", "aborted",   "skipped", "unreported"};

const char *slot_state_word(enum slot_state s)
{
	CHECK(s < SLOT_STATES);
	return state_words[s];
}

bool slot_state_parse(const char *word, enum slot_state *out)
{
	for (int i = 0; i < SLOT_STATES; i++) {
		if (strcmp(word, state_words[i]) == 0) {
			*out = (enum slot_state)i;
			return true;
		}
	}
	return false;
}

const char *station_outcome_word(enum station_outcome o)
{
	CHECK(o < STATION_OUTCOMES);
	return outcome_words[o];
}

static bool about(int whom, int station)
{
	return whom == STATES_ALL || whom == station;
}

/* Held or stopped as known at the freeze: placed by then and not lifted by then. */
static bool held_at_freeze(const struct states_slot *slot, int station, const struct states_hold *holds, size_t n_holds,
                           const struct states_stop *stops, size_t n_stops)
{
	for (size_t i = 0; i < n_holds; i++) {
		const struct states_hold *h = &holds[i];
		if (about(h->station, station) && h->placed_ns <= slot->freeze_ns && h->lifted_ns > slot->freeze_ns &&
		    h->from_ns < slot->end_ns && h->to_ns > slot->start_ns)
			return true;
	}
	for (size_t i = 0; i < n_stops; i++) {
		if (about(stops[i].station, station) && stops[i].placed_ns <= slot->freeze_ns &&
		    stops[i].lifted_ns > slot->freeze_ns)
			return true;
	}
	return false;
}

/*
 * When a hold or stop that came after the freeze first bears on the station's drive, or STATES_NEVER. A hold bears from
 * the later of its placing and its own beginning.
 */
static int64_t late_break(const struct states_slot *slot, int station, const struct states_hold *holds, size_t n_holds,
                          const struct states_stop *stops, size_t n_stops)
{
	int64_t first = STATES_NEVER;
	for (size_t i = 0; i < n_holds; i++) {
		const struct states_hold *h = &holds[i];
		int64_t bears = h->placed_ns > h->from_ns ? h->placed_ns : h->from_ns;
		if (about(h->station, station) && h->placed_ns > slot->freeze_ns && bears < h->to_ns &&
		    bears < h->lifted_ns && h->to_ns > slot->start_ns && bears < first)
			first = bears;
	}
	for (size_t i = 0; i < n_stops; i++) {
		if (about(stops[i].station, station) && stops[i].placed_ns > slot->freeze_ns &&
		    stops[i].placed_ns < first)
			first = stops[i].placed_ns;
	}
	return first;
}

bool states_freeze(const struct states_slot *slot, const struct states_hold *holds, size_t n_holds,
                   const struct states_stop *stops, size_t n_stops, bool going[STATES_MAX_STATIONS])
{
	int n = 0;
	CHECK(slot->n_stations >= 0 && slot->n_stations <= STATES_MAX_STATIONS);
	for (int i = 0; i < STATES_MAX_STATIONS; i++)
		going[i] = false;
	for (int i = 0; i < slot->n_stations; i++) {
		going[i] = slot->station[i].ready && !held_at_freeze(slot, i, holds, n_holds, stops, n_stops);
		n += going[i];
	}
	return n >= slot->stations_needed;
}

static enum station_outcome from_report(const struct states_station *s)
{
	const struct play_report *r = s->report;
	bool begun = r->samples > 0 && r->played_to_ns > r->played_from_ns;
	switch (r->state) {
	case PLAY_PLAYED:
		return STATION_PLAYED;
	case PLAY_HELD:
	case PLAY_STOPPED:
		return begun ? STATION_ABORTED : STATION_VETOED;
	case PLAY_SKIPPED:
	case PLAY_WAITING:
	case PLAY_PLAYING:
	case PLAY_FAILED:
	case PLAY_STATES:
		break;
	}
	return begun ? STATION_ABORTED : STATION_SKIPPED;
}

static enum station_outcome outcome(const struct states_slot *slot, int i, int64_t broken_ns)
{
	const struct states_station *s = &slot->station[i];
	if (s->report != NULL)
		return from_report(s);
	if (broken_ns < s->drive_from_ns)
		return STATION_VETOED;
	if (broken_ns < s->drive_to_ns)
		return STATION_ABORTED;
	return STATION_UNREPORTED;
}

/* The slot's state from its stations' outcomes, when the key was released. */
static enum slot_state overall(const struct states_slot *slot, const struct states_verdict *v)
{
	int count[STATION_OUTCOMES] = {0};
	for (int i = 0; i < slot->n_stations; i++)
		count[v->station[i]]++;
	if (v->n_played >= slot->stations_needed)
		return slot->live ? SLOT_LIVE : SLOT_NULL;
	/* Some energy went out, but not what was planned at enough stations. A null sends none, so that it was stopped
	 * is all that can be said of it. */
	if (count[STATION_ABORTED] > 0 || v->n_played > 0)
		return slot->live ? SLOT_ABORTED : SLOT_VETOED;
	if (count[STATION_UNREPORTED] > 0)
		return slot->live ? SLOT_FAILED_DELIVERY : SLOT_SKIPPED;
	return count[STATION_VETOED] > 0 ? SLOT_VETOED : SLOT_SKIPPED;
}

void states_judge(const struct states_slot *slot, const struct states_hold *holds, size_t n_holds,
                  const struct states_stop *stops, size_t n_stops, struct states_verdict *out)
{
	bool going[STATES_MAX_STATIONS];
	int n_ready = 0;
	*out = (struct states_verdict){0};
	out->key_released = states_freeze(slot, holds, n_holds, stops, n_stops, going);
	for (int i = 0; i < slot->n_stations; i++) {
		const struct states_station *s = &slot->station[i];
		n_ready += s->ready;
		if (!s->ready)
			out->station[i] = STATION_NOT_READY;
		else if (!going[i])
			out->station[i] = STATION_HELD;
		else if (!out->key_released)
			out->station[i] = STATION_TOO_FEW;
		else
			out->station[i] = outcome(slot, i, late_break(slot, i, holds, n_holds, stops, n_stops));
		out->n_played += out->station[i] == STATION_PLAYED;
	}
	/* Without a key: a hold is the cause when there would have been enough stations without it. */
	if (!out->key_released)
		out->state = n_ready >= slot->stations_needed ? SLOT_VETOED : SLOT_SKIPPED;
	else
		out->state = overall(slot, out);
}
