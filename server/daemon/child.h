/* The child process that seals, as the service and the sealer's host start it. */
#ifndef QB_DAEMON_CHILD_H
#define QB_DAEMON_CHILD_H

#include <stdbool.h>
#include <sys/types.h>

/* state: a const struct log *. Whoever calls writes to *to_child_fd, reads from *from_child_fd and waits for *pid. */
bool child_spawn(void *state, int *to_child_fd, int *from_child_fd, pid_t *pid);

#endif
