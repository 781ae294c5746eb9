/*
 * Slot states (audit A0, A14) from what happened: readiness, holds, stops and play reports. Pure bookkeeping, kept
 * apart because the service, the bundle's verifier and the audit must all come to the same answer from the same events.
 */
#ifndef QB_DRILL_STATES_H
#define QB_DRILL_STATES_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "server/drill/report.h"

#define STATES_MAX_STATIONS 8
#define STATES_NEVER        INT64_MAX
#define STATES_ALL          (-1)

enum slot_state { SLOT_LIVE, SLOT_NULL, SLOT_VETOED, SLOT_SKIPPED, SLOT_ABORTED, SLOT_FAILED_DELIVERY, SLOT_STATES };
const char *slot_state_word(enum slot_state s); /* "live", "null", "vetoed" ... as in audit.json */
bool slot_state_parse(const char *word, enum slot_state *out);

/* What became of one station in one slot. */
enum station_outcome {
	STATION_PLAYED,     /* the whole drive (or the whole null) */
	STATION_NOT_READY,  /* did not take part: not ready at the freeze */
	STATION_HELD,       /* did not take part: held or stopped at the freeze */
	STATION_TOO_FEW,    /* free and ready, but fewer than stations_needed were */
	STATION_VETOED,     /* held or stopped after the freeze and before its drive began */
	STATION_ABORTED,    /* its drive was cut short */
	STATION_SKIPPED,    /* took part, failed before its drive began */
	STATION_UNREPORTED, /* took part, no play report and nothing that explains it */
	STATION_OUTCOMES
};
const char *station_outcome_word(enum station_outcome o);

struct states_hold {
	int station;            /* position in the network, or STATES_ALL */
	int64_t from_ns, to_ns; /* the stretch that must not be driven, [from, to) */
	int64_t placed_ns;      /* received by the service */
	int64_t lifted_ns;      /* STATES_NEVER while it stands */
};
struct states_stop {
	int station; /* or STATES_ALL */
	int64_t placed_ns, lifted_ns;
};

struct states_station {
	bool ready;                         /* fetched its recipe before the freeze */
	int64_t drive_from_ns, drive_to_ns; /* of the truth; from == to: outside the drill */
	const struct play_report *report;   /* NULL: none */
};

struct states_slot {
	int64_t start_ns, end_ns, freeze_ns;
	bool live;
	int n_stations, stations_needed;
	struct states_station station[STATES_MAX_STATIONS];
};

struct states_verdict {
	enum slot_state state;
	bool key_released; /* at the freeze enough stations were ready and free */
	int n_played;
	enum station_outcome station[STATES_MAX_STATIONS];
};

/*
 * At the freeze only: which stations go. This is all that the service needs, and it depends on nothing sealed.
 *
 * Returned: going[i]    true for the stations that are ready and free
 *           result      true when at least stations_needed go, that is, when the slot key may be released
 */
bool states_freeze(const struct states_slot *slot, const struct states_hold *holds, size_t n_holds,
                   const struct states_stop *stops, size_t n_stops, bool going[STATES_MAX_STATIONS]);

/* The whole verdict. A null slot follows the same rule; its state is SLOT_NULL where a live one's is SLOT_LIVE. */
void states_judge(const struct states_slot *slot, const struct states_hold *holds, size_t n_holds,
                  const struct states_stop *stops, size_t n_stops, struct states_verdict *out);

#endif
