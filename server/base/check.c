/* The end of a program that found a bug in itself: say where, then abort so that a supervisor sees it. */
#include "server/base/check.h"

#include <stdio.h>
#include <stdlib.h>

_Noreturn void check_failed(const char *file, int line, const char *text)
{
	fprintf(stderr, "quietbell: bug at %s:%d: %s\n", file, line, text);
	abort();
}
