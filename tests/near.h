/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Comparison of doubles, which cmocka 1.1.5 has not. Include after <cmocka.h>. */
#ifndef TESTS_NEAR_H
#define TESTS_NEAR_H

#include <math.h>
#include <stdio.h>

#define assert_near_abs(a, b, tolerance)                                                                 \
    do {                                                                                                 \
        double near_a = (a), near_b = (b);                                                               \
        if (!(fabs(near_a - near_b) <= (tolerance))) {                                                   \
            (void)printf("%.15g is not %.15g within %g\n", near_a, near_b, (double)(tolerance));         \
            fail();                                                                                      \
        }                                                                                                \
    } while (0)

#define assert_near_rel(a, b, tolerance) assert_near_abs(a, b, (tolerance) * fabs((double)(b)))

#endif
