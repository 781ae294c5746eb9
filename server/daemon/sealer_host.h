/*
 * The sealer on a machine of its own. The host starts the same guarded sealer as the service does, carries its messages
 * over a socket or as files, and signs the sealer's two statements with the key that the plan names. It sees nothing
 * that is secret either: what passes is sealed or boxed.
 */
#ifndef QB_DAEMON_SEALER_HOST_H
#define QB_DAEMON_SEALER_HOST_H

#include "server/base/err.h"

/* Makes DIR with host.key (mode 0600) and prints the public half for the plan. Errors: QB_CONFLICT, QB_IO */
enum qb_status sealer_host_init(const char *dir, struct qb_error *e) QB_MUST_USE;
/*
 * One run: waits for a connection on address ("127.0.0.1:7001"; port 0: any, printed) or for files in folder, exactly
 * one of which is given.
 *
 * Errors:   QB_REFUSED   the key file can be read by others; QB_IO; QB_NO the run ended without a seal
 */
enum qb_status sealer_host_run(const char *dir, const char *address, const char *folder,
                               struct qb_error *e) QB_MUST_USE;

#endif
