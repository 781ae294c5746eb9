/*
 * Notes and reports on their way to the service: encoded, sealed to the group key at one fixed size, entered in the
 * ledger. What was due while the service was out of reach waits here, as it was when it was due.
 */
#ifndef QB_AGENT_FILING_H
#define QB_AGENT_FILING_H

#include "client/agent/driver.h"
#include "server/drill/report.h"

struct filing {
	struct driver *d;
	int64_t slot;
	struct play_note note[PLAY_NOTES_MAX];
	int n_notes;     /* taken in */
	int n_sent;      /* of them the service has, or refused for good */
	int64_t next_ns; /* no further try before this time of the system clock */
	int tries;
	bool left; /* the station's other host has the slot: nothing of this one is filed */
};

/* notes: how many of the slot the service has already (after a restart); they are not taken in again. */
void filing_begin(struct filing *f, struct driver *d, int64_t slot, int64_t notes);
void filing_take(struct filing *f, const struct play_note *note);
/* Sends what waits, oldest first, unless it is too early for another try. Never fails: it logs and tries again. */
void filing_send(struct filing *f);
/* All notes and then the report, trying until the service has them or refuses; false when the driver shall end. */
bool filing_finish(struct filing *f, const struct play_report *report);

/*
 * The sealed record of a note or report (docs/protocol.md: index = slot * 256 + station index * 16 + number, 15 for a
 * report).
 *
 * Given:    content, n     encoded
 * Returned: out            the record, appended; id its record id
 */
enum qb_status filing_seal(const struct driver *d, enum record_type type, int64_t slot, int number, const void *content,
                           size_t n, struct buf *out, uint8_t id[static RECORD_ID_BYTES],
                           struct qb_error *e) QB_MUST_USE;

#endif
