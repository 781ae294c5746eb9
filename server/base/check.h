/*
 * Assertions that stay on in release builds. They are for our own bugs only: nothing that a request, a file or a
 * database holds may reach one.
 */
#ifndef QB_BASE_CHECK_H
#define QB_BASE_CHECK_H

#include <stdbool.h>

_Noreturn void check_failed(const char *file, int line, const char *text);

#define CHECK(cond) ((cond) ? (void)0 : check_failed(__FILE__, __LINE__, #cond))

#endif
