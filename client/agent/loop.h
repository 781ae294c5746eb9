/*
 * The driver's whole run: from the campaign's plan through the one-time keys and the sealing to the report of the last
 * slot. It may be ended and started again at any point.
 */
#ifndef QB_AGENT_LOOP_H
#define QB_AGENT_LOOP_H

#include "client/agent/driver.h"

/*
 * Opens home, service and ledger, checks that this party drives this station, and opens the sink.
 *
 * Given:    opt, log      kept; stopping may be NULL
 * Returned: d             loop_close, also after an error
 * Errors:   QB_REFUSED    not this station's driver; what home, link and follow report
 */
enum qb_status loop_open(struct driver *d, const struct driver_options *opt, const struct log *log,
                         volatile sig_atomic_t *stopping, struct qb_error *e) QB_MUST_USE;
void loop_close(struct driver *d);

/*
 * Until the last slot is reported, or until told to end.
 *
 * Errors:   QB_REFUSED    the service has one-time keys of this station that are not in this home
 *           QB_CRYPTO     the ledger or the campaign's certificate does not verify
 */
enum qb_status loop_run(struct driver *d, struct qb_error *e) QB_MUST_USE;

#endif
