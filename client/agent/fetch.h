/*
 * What the driver gets from the service for one slot: its wrapped recipe in advance, the slot's key at the last moment,
 * and out of both the drive. Apart from playing, so that everything secret is in one place.
 */
#ifndef QB_AGENT_FETCH_H
#define QB_AGENT_FETCH_H

#include "client/agent/drive.h"
#include "client/agent/driver.h"

/*
 * Fetches the wrapped recipes of slots from .. from + DRIVER_READY_AHEAD - 1 that it does not have yet. Fetching says
 * that the station is ready, so a station that does not observe fetches nothing.
 */
enum qb_status fetch_ahead(struct driver *d, int64_t from, struct qb_error *e) QB_MUST_USE;

/*
 * The slot key, the recipe and the drive, in one go.
 *
 * Returned: *out          owned by the caller
 * Errors:   QB_CONFLICT   the service does not release the key (now); QB_UNREACHABLE; both: nothing is decided
 *           others        the slot cannot be played; e is for the sealed report only, and for no log
 */
enum qb_status fetch_drive(struct driver *d, int64_t slot, struct drive *out, struct qb_error *e) QB_MUST_USE;

#endif
