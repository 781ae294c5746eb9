/* Floating comparison for cmocka: says both values, the difference and the bound when it fails. */
#ifndef QB_TESTS_NEAR_H
#define QB_TESTS_NEAR_H

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#define near_abs(got, want, tol) near_check(#got, (got), (want), (tol), __FILE__, __LINE__)
#define near_rel(got, want, tol) near_check(#got, (got), (want), (tol)*fabs(want), __FILE__, __LINE__)

static inline void near_check(const char *text, double got, double want, double bound, const char *file, int line)
{
	if (fabs(got - want) <= bound)
		return;
	print_error("%s:%d: %s is %.17g, expected %.17g, difference %.3g, bound %.3g\n", file, line, text, got, want,
	            fabs(got - want), bound);
	_fail(file, line);
}

#endif
