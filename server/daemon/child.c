/* Starting a sealer: this program anew, with two pipes, no environment and nothing else. */
#include "server/daemon/child.h"

#include <fcntl.h>
#include <signal.h>
#include <unistd.h>

#include "server/base/log.h"

/* Only calls that are safe between fork and exec in a program with threads. */
_Noreturn static void become_sealer(int in, int out)
{
	char *const argv[] = {"quietbelld", "--sealer", NULL};
	char *const no_environment[] = {NULL};
	sigset_t none;
	(void)sigemptyset(&none);
	if (dup2(in, 0) == 0 && dup2(out, 1) == 1 && sigprocmask(SIG_SETMASK, &none, NULL) == 0)
		(void)execve("/proc/self/exe", argv, no_environment);
	_exit(70);
}

bool child_spawn(void *state, int *to_child_fd, int *from_child_fd, pid_t *pid)
{
	const struct log *log = state;
	int to[2], from[2];
	if (pipe2(to, O_CLOEXEC) != 0)
		return false;
	if (pipe2(from, O_CLOEXEC) != 0) {
		(void)close(to[0]);
		(void)close(to[1]);
		return false;
	}
	*pid = fork();
	if (*pid == 0)
		become_sealer(to[0], from[1]);
	(void)close(to[0]);
	(void)close(from[1]);
	if (*pid < 0) {
		(void)close(to[1]);
		(void)close(from[0]);
		return false;
	}
	*to_child_fd = to[1];
	*from_child_fd = from[0];
	log_event(log, LOG_INFO_, "sealer-started", NULL);
	return true;
}
