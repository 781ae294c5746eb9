/*
 * What the driver gives up before it touches a key: new privileges, core dumps, swapping, group and other permissions
 * on what it writes.
 */
#ifndef QB_AGENT_GUARD_H
#define QB_AGENT_GUARD_H

#include <stdbool.h>

#include "server/base/err.h"

/*
 * Returned: *locked   whether all memory could be locked (a limit of the system may forbid it; that is no error)
 * Errors:   QB_IO     no_new_privs or the core limit could not be set
 */
enum qb_status guard_set(bool *locked, struct qb_error *e) QB_MUST_USE;

#endif
