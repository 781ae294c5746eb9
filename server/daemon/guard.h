/*
 * What the process gives up before it touches anything: privileges it could gain, core dumps, being traced, loose file
 * modes; for the sealer also every descriptor and nearly every system call.
 */
#ifndef QB_DAEMON_GUARD_H
#define QB_DAEMON_GUARD_H

#include "server/base/err.h"
#include "server/base/log.h"

/* no_new_privs, no core dumps, not dumpable, umask 077. Errors: QB_FAULT */
enum qb_status guard_process(struct qb_error *e) QB_MUST_USE;

/* Errors: QB_IO it is not there; QB_REFUSED not a directory, another owner, or others may enter it */
enum qb_status guard_data_dir(const char *path, struct qb_error *e) QB_MUST_USE;

/*
 * Shuts the sealer in: only descriptors 0, 1 and 2, memory locked, and a filter that kills the process at any system
 * call beyond memory, locks, clocks, randomness, reading 0 and writing 1 and 2. Call it after secret_setup and
 * guard_process. That memory can't be locked (a container's limit) is a logged warning.
 *
 * Errors:   QB_FAULT  the filter can't be installed: then nothing may be sealed
 */
enum qb_status guard_sealer(const struct log *log, struct qb_error *e) QB_MUST_USE;

#endif
