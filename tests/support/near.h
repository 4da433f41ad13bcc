/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_NEAR_H
#define DRIVETRIAL_NEAR_H
/*
 * cmocka with its includes, and comparison of doubles: cmocka's
 * assert_float_equal casts to float and passes NaN against anything.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

static inline void assert_near_at(double actual, double expected, double tolerance,
                                  const char *unit, const char *file, int line)
{
	if (!(fabs(actual - expected) <= tolerance)) {
		print_error("%.17g %s, expected %.17g within %g\n", actual, unit, expected, tolerance);
		_fail(file, line);
	}
}

#define assert_near(actual, expected, tolerance, unit)                                             \
	assert_near_at((actual), (expected), (tolerance), (unit), __FILE__, __LINE__)

/* cmocka returns the number of failures, and an exit status wraps at 256. */
#define RUN_GROUP(tests) (cmocka_run_group_tests((tests), NULL, NULL) != 0)

#endif
