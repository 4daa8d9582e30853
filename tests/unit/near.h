/*
 * near: two numbers that should be the same but for rounding. For cmocka tests.
 */
#ifndef UNDERTAG_TESTS_NEAR_H
#define UNDERTAG_TESTS_NEAR_H

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

static inline void near_check(double value, double expected, double tolerance, const char *file,
                              int line)
{
    if (!(fabs(value - expected) <= tolerance)) {
        print_error("%.12g is not %.12g within %g\n", value, expected, tolerance);
        _fail(file, line);
    }
}

#define assert_near(value, expected, tolerance)                                                    \
    near_check((value), (expected), (tolerance), __FILE__, __LINE__)

#endif
