/*
 * One slot from its freeze to its report: when the key is asked for, what stops the drive, when notes are due. The
 * same steps, log lines and messages whatever the slot holds.
 */
#ifndef QB_AGENT_SLOT_H
#define QB_AGENT_SLOT_H

#include "client/agent/driver.h"

/*
 * Plays and reports slot n. A slot that is over, or that began too long ago, is only reported.
 *
 * Returned: *filed     the service has its report; false when the driver was told to end, the campaign ended, or the
 * station's other host has the slot Errors:   QB_IO      a one-time key could not be erased
 */
enum qb_status slot_run(struct driver *d, int64_t n, bool *filed, struct qb_error *e) QB_MUST_USE;

#endif
