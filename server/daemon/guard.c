/* Hardening of the daemon and of its sealer. */
#include "server/daemon/guard.h"

#include <errno.h>
#include <fcntl.h>
#include <seccomp.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

enum qb_status guard_process(struct qb_error *e)
{
	struct rlimit none = {0, 0};
	if (prctl(PR_SET_NO_NEW_PRIVS, 1, 0, 0, 0) != 0 || setrlimit(RLIMIT_CORE, &none) != 0 ||
	    prctl(PR_SET_DUMPABLE, 0, 0, 0, 0) != 0)
		return qb_fail(e, QB_FAULT, "guard", NULL, "the process can't be hardened: %s", strerror(errno));
	(void)umask(077);
	return QB_OK;
}

enum qb_status guard_data_dir(const char *path, struct qb_error *e)
{
	struct stat s;
	if (stat(path, &s) != 0)
		return qb_fail(e, QB_IO, path, "make it with quietbelld init", "can't be entered: %s", strerror(errno));
	if (!S_ISDIR(s.st_mode))
		return qb_fail(e, QB_REFUSED, path, "give the directory that quietbelld init made",
		               "is not a directory");
	if (s.st_uid != geteuid())
		return qb_fail(e, QB_REFUSED, path, "run as its owner", "belongs to another user");
	if ((s.st_mode & 077) != 0)
		return qb_fail(e, QB_REFUSED, path, "chmod 700 it", "can be entered by others");
	return QB_OK;
}

/* With too low a limit, locking future memory would make allocations fail later; then only the secrets are locked. */
static void lock_memory(const struct log *log)
{
	struct rlimit all = {RLIM_INFINITY, RLIM_INFINITY}, now;
	if (setrlimit(RLIMIT_MEMLOCK, &all) != 0 && getrlimit(RLIMIT_MEMLOCK, &now) == 0) {
		now.rlim_cur = now.rlim_max;
		(void)setrlimit(RLIMIT_MEMLOCK, &now);
	}
	if (getrlimit(RLIMIT_MEMLOCK, &now) != 0 || now.rlim_cur < ((rlim_t)1 << 30) ||
	    mlockall(MCL_CURRENT | MCL_FUTURE) != 0)
		log_event(log, LOG_WARN_, "memory-not-locked", "process", "sealer", "mend",
		          "raise the limit of locked memory; secrets alone are locked", NULL);
}

/* Everything that computing with locked memory, two pipes and threads of its own needs. */
static const int allowed[] = {
    SCMP_SYS(exit),
    SCMP_SYS(exit_group),
    SCMP_SYS(brk),
    SCMP_SYS(mmap),
    SCMP_SYS(munmap),
    SCMP_SYS(mremap),
    SCMP_SYS(mprotect),
    SCMP_SYS(madvise),
    SCMP_SYS(mlock),
    SCMP_SYS(mlock2),
    SCMP_SYS(munlock),
    SCMP_SYS(munlockall),
    SCMP_SYS(futex),
    SCMP_SYS(set_robust_list),
    SCMP_SYS(rseq),
    SCMP_SYS(sched_yield),
    SCMP_SYS(sched_getaffinity),
    SCMP_SYS(clock_gettime),
    SCMP_SYS(clock_nanosleep),
    SCMP_SYS(nanosleep),
    SCMP_SYS(getrandom),
    SCMP_SYS(getpid),
    SCMP_SYS(gettid),
    SCMP_SYS(rt_sigaction),
    SCMP_SYS(rt_sigprocmask),
    SCMP_SYS(rt_sigreturn),
    SCMP_SYS(restart_syscall),
    SCMP_SYS(poll),
};

static int build_filter(scmp_filter_ctx filter)
{
	int bad = 0;
	for (size_t i = 0; bad == 0 && i < sizeof allowed / sizeof allowed[0]; i++)
		bad = seccomp_rule_add(filter, SCMP_ACT_ALLOW, allowed[i], 0);
	if (bad == 0)
		bad = seccomp_rule_add(filter, SCMP_ACT_ALLOW, SCMP_SYS(read), 1, SCMP_A0(SCMP_CMP_EQ, 0));
	for (scmp_datum_t fd = 1; bad == 0 && fd <= 2; fd++)
		bad = seccomp_rule_add(filter, SCMP_ACT_ALLOW, SCMP_SYS(write), 1, SCMP_A0(SCMP_CMP_EQ, fd));
	for (scmp_datum_t fd = 0; bad == 0 && fd <= 2; fd++)
		bad = seccomp_rule_add(filter, SCMP_ACT_ALLOW, SCMP_SYS(close), 1, SCMP_A0(SCMP_CMP_EQ, fd));
	/* An assertion of ours may still end this process, and no other one. */
	if (bad == 0)
		bad = seccomp_rule_add(filter, SCMP_ACT_ALLOW, SCMP_SYS(tgkill), 1,
		                       SCMP_A0(SCMP_CMP_EQ, (scmp_datum_t)getpid()));
	/* Whether a standard stream is a terminal: the answer is no. */
	if (bad == 0)
		bad = seccomp_rule_add(filter, SCMP_ACT_ERRNO(EBADF), SCMP_SYS(newfstatat), 0);
	/* glibc asks for clone3 first and takes clone when it is not there; threads only, never a process. */
	if (bad == 0)
		bad = seccomp_rule_add(filter, SCMP_ACT_ERRNO(ENOSYS), SCMP_SYS(clone3), 0);
	if (bad == 0)
		bad = seccomp_rule_add(filter, SCMP_ACT_ALLOW, SCMP_SYS(clone), 1,
		                       SCMP_A0(SCMP_CMP_MASKED_EQ, 0x00010000 /* CLONE_THREAD */, 0x00010000));
	return bad != 0 ? bad : seccomp_load(filter);
}

enum qb_status guard_sealer(const struct log *log, struct qb_error *e)
{
	if (close_range(3, ~0u, 0) != 0)
		return qb_fail(e, QB_FAULT, "sealer", NULL, "descriptors can't be closed: %s", strerror(errno));
	lock_memory(log);
	scmp_filter_ctx filter = seccomp_init(SCMP_ACT_KILL_PROCESS);
	int bad = filter != NULL ? build_filter(filter) : -ENOMEM;
	if (filter != NULL)
		seccomp_release(filter);
	if (bad != 0)
		return qb_fail(e, QB_FAULT, "sealer", "run it on a kernel with seccomp filters",
		               "the filter can't be installed: %s", strerror(-bad));
	return QB_OK;
}
