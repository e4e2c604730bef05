/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The chi-square distribution where it is elementary: with 2 degrees it is exponential, P(above x) = exp(-x / 2); with 4,
 * P(above x) = exp(-x / 2) (1 + x / 2). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "fit/chi_square.h"
#include "near.h"

static void test_two_and_four_degrees(void **state)
{
    (void)state;
    static const double values[] = {0, 0.137, 1, 2.385, 7.7, 41.3};
    for (int k = 0; k < 6; k++) {
        double x = values[k];
        assert_near_rel(uf_chi_square_above(x, 2), exp(-x / 2), 1e-12);
        assert_near_rel(uf_chi_square_above(x, 4), exp(-x / 2) * (1 + x / 2), 1e-12);
    }
    assert_near_rel(uf_chi_square_quantile(0.5, 2), 2 * log(2), 1e-10);
    assert_near_rel(uf_chi_square_quantile(0.931, 2), -2 * log1p(-0.931), 1e-10);
    assert_near_rel(uf_chi_square_upper_quantile(1e-7, 2), -2 * log(1e-7), 1e-10);
}

static void test_no_degrees(void **state)
{
    (void)state;
    assert_true(isnan(uf_chi_square_above(1, 0)));
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_two_and_four_degrees),
                                       cmocka_unit_test(test_no_degrees)};
    return cmocka_run_group_tests_name("chi-square", tests, NULL, NULL);
}
