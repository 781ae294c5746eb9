/* The daemon's life: start, serve and tick, re-read, drain, stop; and starting a sealer. */
#ifndef QB_DAEMON_LIFE_H
#define QB_DAEMON_LIFE_H

#include "server/daemon/config.h"

/*
 * Serves until SIGTERM or SIGINT. Blocks these signals and SIGHUP for every thread; call it from the only thread.
 *
 * Given:    config, config_path   the file is read again on SIGHUP (log level only)
 * Errors:   whatever kept the service from starting
 */
enum qb_status life_run(const struct config *config, const char *config_path, struct qb_error *e) QB_MUST_USE;

#endif
