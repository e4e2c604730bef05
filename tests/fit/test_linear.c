/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Linear least squares against NIST StRD and closed forms. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "fit/linear.h"
#include "near.h"

/* NIST StRD Norris (linear least squares, lower difficulty): certified intercept and slope with their standard
 * deviations, and the residual standard deviation. */
static void test_norris(void **state)
{
    (void)state;
    static const double data[][2] = {
        {0.1, 0.2},     {338.8, 337.4}, {118.1, 118.2}, {888.0, 884.6}, {9.2, 10.1},    {228.1, 226.5},
        {668.5, 666.3}, {998.5, 996.3}, {449.1, 448.6}, {778.9, 777.0}, {559.2, 558.2}, {0.3, 0.4},
        {0.1, 0.6},     {778.1, 775.5}, {668.8, 666.9}, {339.3, 338.0}, {448.9, 447.5}, {10.8, 11.6},
        {557.7, 556.0}, {228.3, 228.1}, {998.0, 995.8}, {888.8, 887.6}, {119.6, 120.2}, {0.3, 0.3},
        {0.6, 0.3},     {557.6, 556.8}, {339.3, 339.1}, {888.0, 887.2}, {998.5, 999.0}, {778.9, 779.0},
        {10.2, 11.1},   {117.6, 118.3}, {228.9, 229.2}, {668.4, 669.1}, {449.2, 448.9}, {0.2, 0.5}};
    uf_linear sums = {.parameters = 2};
    uf_linear_fit fit;
    for (size_t k = 0; k < sizeof data / sizeof data[0]; k++) {
        const double x[] = {1, data[k][1] / 1000}; /* of order one, as the header asks */
        uf_linear_add(&sums, x, data[k][0], 1);
    }
    assert_true(uf_linear_solve(&sums, &fit));
    assert_near_rel(fit.value[0], -0.262323073774029, 1e-9);
    assert_near_rel(fit.value[1], 1000 * 1.00211681802045, 1e-12);
    assert_near_rel(fit.sd[0], 0.232818234301152, 1e-7);
    assert_near_rel(fit.sd[1], 1000 * 0.429796848199937E-03, 1e-7);
    assert_near_rel(fit.residual_sd, 0.884796396144373, 1e-7);
}

/* A row of weight 3 is three rows, a row of weight 0 none (definition of weights). */
static void test_weights(void **state)
{
    (void)state;
    static const double rows[][3] = {{0.1, 2.385, 1}, {0.7, 1.1, 3}, {1.9, -0.6, 1}, {2.2, -0.4, 1}, {5, 100, 0}};
    uf_linear weighted = {.parameters = 2}, repeated = {.parameters = 2};
    uf_linear_fit a, b;
    for (int k = 0; k < 5; k++) {
        const double x[] = {1, rows[k][0]};
        uf_linear_add(&weighted, x, rows[k][1], rows[k][2]);
        for (int copy = 0; copy < (int)rows[k][2]; copy++)
            uf_linear_add(&repeated, x, rows[k][1], 1);
    }
    assert_true(uf_linear_solve(&weighted, &a) && uf_linear_solve(&repeated, &b));
    assert_near_rel(a.value[0], b.value[0], 1e-12);
    assert_near_rel(a.value[1], b.value[1], 1e-12);
}

/* Regressors that repeat each other, and too few rows, are told and not solved. */
static void test_what_cannot_be_told_apart(void **state)
{
    (void)state;
    uf_linear sums = {.parameters = 2};
    uf_linear_fit fit;
    for (int k = 0; k < 5; k++) {
        const double x[] = {1 + k * 0.3, 2 + k * 0.6};
        assert_false(uf_linear_solve(&sums, &fit));
        uf_linear_add(&sums, x, k, 1);
    }
    assert_false(uf_linear_solve(&sums, &fit));
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_norris), cmocka_unit_test(test_weights),
                                       cmocka_unit_test(test_what_cannot_be_told_apart)};
    return cmocka_run_group_tests_name("linear least squares", tests, NULL, NULL);
}
