/* The guards: loose directories are refused, and a shut-in sealer computes but dies at its first forbidden call. */
#include <fcntl.h>
#include <setjmp.h>
#include <signal.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>
#include <cmocka.h>

#include "server/base/alloc.h"
#include "server/base/secret.h"
#include "server/daemon/guard.h"

static void only_a_private_directory_will_do(void **state)
{
	char dir[] = "/tmp/quietbell-guard-XXXXXX", file[64];
	struct qb_error e = {0};
	(void)state;
	assert_non_null(mkdtemp(dir));
	assert_int_equal(guard_data_dir(dir, &e), QB_OK);
	const mode_t loose[] = {0710, 0701, 0750, 0720, 0777};
	for (size_t i = 0; i < sizeof loose / sizeof loose[0]; i++) {
		e = (struct qb_error){0};
		assert_int_equal(chmod(dir, loose[i]), 0);
		assert_int_equal(guard_data_dir(dir, &e), QB_REFUSED);
		assert_non_null(strstr(e.mend, "chmod 700"));
	}
	assert_int_equal(chmod(dir, 0700), 0);
	(void)snprintf(file, sizeof file, "%s/x", dir);
	int fd = open(file, O_CREAT | O_WRONLY | O_CLOEXEC, 0600);
	assert_true(fd >= 0);
	(void)close(fd);
	e = (struct qb_error){0};
	assert_int_equal(guard_data_dir(file, &e), QB_REFUSED);
	assert_int_equal(unlink(file), 0);
	assert_int_equal(rmdir(dir), 0);
	e = (struct qb_error){0};
	assert_int_equal(guard_data_dir(dir, &e), QB_IO);
}

/* The way a child of ours ends: its exit status, or minus the signal that killed it. */
static int run(int (*child)(void))
{
	pid_t pid = fork();
	int status;
	assert_true(pid >= 0);
	if (pid == 0)
		_exit(child());
	assert_int_equal(waitpid(pid, &status, 0), pid);
	return WIFSIGNALED(status) ? -WTERMSIG(status) : WEXITSTATUS(status);
}

static int hardened(void)
{
	struct rlimit core;
	mode_t before;
	struct qb_error e = {0};
	if (guard_process(&e) != QB_OK || getrlimit(RLIMIT_CORE, &core) != 0)
		return 1;
	before = umask(0);
	return core.rlim_cur == 0 && core.rlim_max == 0 && prctl(PR_GET_DUMPABLE, 0, 0, 0, 0) == 0 &&
	               prctl(PR_GET_NO_NEW_PRIVS, 0, 0, 0, 0) == 1 && before == 077
	           ? 0
	           : 2;
}

static void the_process_gives_up_what_it_does_not_need(void **state)
{
	(void)state;
	assert_int_equal(run(hardened), 0);
}

static bool shut_in(void)
{
	static const struct log silent = {.fd = -1};
	struct qb_error e = {0};
	return secret_setup(&e) == QB_OK && guard_process(&e) == QB_OK && guard_sealer(&silent, &e) == QB_OK;
}

static int works(void)
{
	int pipe_in[2];
	uint8_t bytes[32];
	if (pipe(pipe_in) != 0 || dup2(pipe_in[0], 0) != 0 || write(pipe_in[1], "a", 1) != 1 || !shut_in())
		return 1;
	char got;
	if (read(0, &got, 1) != 1 || got != 'a')
		return 3;
	struct secret *s = secret_random(4096);
	random_bytes(bytes, sizeof bytes);
	uint8_t *big = qb_alloc(1, (size_t)40 << 20);
	memcpy(big, bytes, sizeof bytes);
	memcpy(secret_bytes(s), big, sizeof bytes);
	bool same = same_bytes(secret_view(s), bytes, sizeof bytes);
	qb_free(big);
	secret_free(&s);
	return same && time(NULL) > 0 ? 0 : 4;
}

/* Descriptors beyond the three are closed, so this can only fail; that it is tried at all is forbidden. */
static int writes_elsewhere(void)
{
	int ends[2];
	return pipe(ends) == 0 && shut_in() && write(ends[1], "b", 1) == 1 ? 0 : 1;
}

static int opens(void)
{
	return shut_in() && open("/dev/null", O_RDONLY | O_CLOEXEC) >= 0 ? 0 : 1;
}
static int connects(void)
{
	return shut_in() && socket(AF_INET, SOCK_STREAM, 0) >= 0 ? 0 : 1;
}
static int forks(void)
{
	return shut_in() && fork() >= 0 ? 0 : 1;
}
static int execs(void)
{
	char *const argv[] = {"true", NULL};
	return shut_in() && execv("/bin/true", argv) == 0 ? 0 : 1;
}
static int kills_others(void)
{
	return shut_in() && kill(getppid(), 0) == 0 ? 0 : 1;
}
static int becomes_traceable(void)
{
	return shut_in() && prctl(PR_SET_DUMPABLE, 1, 0, 0, 0) == 0 ? 0 : 1;
}

static void a_sealer_computes_and_nothing_else(void **state)
{
	int (*const forbidden[])(void) = {opens, writes_elsewhere, connects,         forks,
	                                  execs, kills_others,     becomes_traceable};
	(void)state;
	assert_int_equal(run(works), 0);
	for (size_t i = 0; i < sizeof forbidden / sizeof forbidden[0]; i++)
		assert_int_equal(run(forbidden[i]), -SIGSYS);
}

int main(void)
{
	const struct CMUnitTest tests[] = {
	    cmocka_unit_test(only_a_private_directory_will_do),
	    cmocka_unit_test(the_process_gives_up_what_it_does_not_need),
	    cmocka_unit_test(a_sealer_computes_and_nothing_else),
	};
	return cmocka_run_group_tests(tests, NULL, NULL);
}
