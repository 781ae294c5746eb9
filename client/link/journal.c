/* Appending under a lock on the file. */
#include "client/link/journal.h"

#include <errno.h>
#include <fcntl.h>
#include <string.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

enum qb_status journal_append(const char *path, size_t at, const void *p, size_t n, bool *done, size_t *size,
                              struct qb_error *e)
{
	struct stat s;
	int fd = open(path, O_RDWR | O_CREAT | O_APPEND | O_CLOEXEC | O_NOFOLLOW, 0600);
	*done = false;
	bool good = fd >= 0 && flock(fd, LOCK_EX) == 0 && fstat(fd, &s) == 0;
	if (good && size != NULL)
		*size = (size_t)s.st_size;
	if (good && (size_t)s.st_size == at) {
		good = fd_write_all(fd, p, n) && fsync(fd) == 0;
		*done = good;
		if (!good) {
			int saved = errno;
			if (ftruncate(fd, s.st_size) != 0)
				saved = errno;
			errno = saved;
		}
	}
	int saved = errno;
	if (fd >= 0)
		(void)close(fd);
	return good ? QB_OK
	            : qb_fail(e, QB_IO, path, "check free space and permissions", "can't be written: %s",
	                      strerror(saved));
}
