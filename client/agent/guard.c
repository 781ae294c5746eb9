/* What the driver gives up at its start; see guard.h. Apart, so that the list is read at one glance. */
#include "client/agent/guard.h"

#include <errno.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <sys/stat.h>

enum qb_status guard_set(bool *locked, struct qb_error *e)
{
	const struct rlimit none = {0, 0};
	umask(077);
	if (prctl(PR_SET_NO_NEW_PRIVS, 1, 0, 0, 0) != 0)
		return qb_fail(e, QB_IO, "no_new_privs", NULL, "cannot be set: %s", strerror(errno));
	if (setrlimit(RLIMIT_CORE, &none) != 0 || prctl(PR_SET_DUMPABLE, 0, 0, 0, 0) != 0)
		return qb_fail(e, QB_IO, "core dumps", NULL, "cannot be forbidden: %s", strerror(errno));
	/* What exists now; later arrays of samples would hit the usual limit, and key material has its own locked
	 * memory anyway. */
	*locked = mlockall(MCL_CURRENT) == 0;
	return QB_OK;
}
