/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Contrasts of two arms against published worked examples and closed forms. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "near.h"
#include "stats/contrast.h"

#define COUNT_OF(array) (sizeof array / sizeof array[0])

/* Student 1908, Biometrika 6:1: extra hours of sleep of ten patients under two drugs. */
static const double sleep_a[] = {0.7, -1.6, -0.2, -1.2, -0.1, 3.4, 3.7, 0.8, 0.0, 2.0};
static const double sleep_b[] = {1.9, 0.8, 1.1, 0.1, -0.1, 4.4, 5.5, 1.6, 4.6, 3.4};

/* Help page of R's t.test: t -1.8608, df 17.776, p 0.07939, interval -3.3654832 .. 0.2054832, means 0.75 and 2.33;
 * more digits computed in exact arithmetic. */
static void test_welch_on_sleep(void **state)
{
    (void)state;
    uf_contrast c = uf_welch((uf_arm){sleep_a, 10}, (uf_arm){sleep_b, 10}, UF_SCALE_DIFFERENCE, 0.95);
    assert_near_abs(c.mean_treated, 0.75, 1e-14);
    assert_near_abs(c.mean_control, 2.33, 1e-14);
    assert_near_rel(c.effect, -1.58, 1e-13);
    assert_near_rel(c.t, -1.8608134675, 1e-9);
    assert_near_rel(c.df, 17.7764735162, 1e-9);
    assert_near_rel(c.p, 0.0793941402, 1e-8);
    assert_near_rel(c.effect_low, -3.3654832307, 1e-9);
    assert_near_rel(c.effect_high, 0.2054832307, 1e-8);
    assert_int_equal(c.notes, 0);
}

/* A common worked example of Welch's test (values from memory: -2.46, 24.99, 0.021; more digits computed). */
static void test_welch_of_unlike_spreads(void **state)
{
    (void)state;
    static const double a[] = {27.5, 21.0, 19.0, 23.6, 17.0, 17.9, 16.9, 20.1,
                               21.9, 22.6, 23.1, 19.6, 19.0, 21.7, 21.4};
    static const double b[] = {27.1, 22.0, 20.8, 23.4, 23.4, 23.5, 25.8, 22.0,
                               24.8, 20.2, 21.9, 22.1, 22.9, 20.5, 24.4};
    uf_contrast c = uf_welch((uf_arm){a, 15}, (uf_arm){b, 15}, UF_SCALE_DIFFERENCE, 0.95);
    assert_near_rel(c.t, -2.4553563983, 1e-9);
    assert_near_rel(c.df, 24.9885292902, 1e-9);
    assert_near_rel(c.p, 0.0213780015, 1e-8);
}

/* Definition: a ratio is the exponential of a difference of logarithms, interval and all, and t and p are those of
 * the logarithms. */
static void test_ratio_is_difference_of_logarithms(void **state)
{
    (void)state;
    double x[10], y[10];
    for (int k = 0; k < 10; k++) {
        x[k] = exp(sleep_a[k]);
        y[k] = exp(sleep_b[k]);
    }
    uf_contrast c = uf_welch((uf_arm){x, 10}, (uf_arm){y, 10}, UF_SCALE_RATIO, 0.95);
    assert_near_rel(c.effect, exp(-1.58), 1e-12);
    assert_near_rel(c.effect_low, exp(-3.3654832307), 1e-9);
    assert_near_rel(c.effect_high, exp(0.2054832307), 1e-9);
    assert_near_rel(c.mean_treated, exp(0.75), 1e-12);
    assert_near_rel(c.p, 0.0793941402, 1e-8);
    y[3] = 0;
    c = uf_welch((uf_arm){x, 10}, (uf_arm){y, 10}, UF_SCALE_RATIO, 0.95);
    assert_true(isnan(c.effect) && isnan(c.p) && (c.notes & UF_NOTE_NOT_POSITIVE));
}

static void test_too_few_and_no_spread(void **state)
{
    (void)state;
    static const double two[] = {2.5, 3.25}, same[] = {4, 4, 4}, with_gap[] = {1.5, NAN, 2.5};
    uf_contrast c = uf_welch((uf_arm){two, 2}, (uf_arm){sleep_b, 10}, UF_SCALE_DIFFERENCE, 0.95);
    assert_near_rel(c.effect, 2.875 - 2.33, 1e-13);
    assert_true(isnan(c.p) && isnan(c.effect_low) && isnan(c.hedges_g) && c.notes == UF_NOTE_TOO_FEW);
    c = uf_welch((uf_arm){with_gap, 3}, (uf_arm){sleep_b, 10}, UF_SCALE_DIFFERENCE, 0.95);
    assert_true(c.n_treated == 2 && isnan(c.p) && c.notes == UF_NOTE_TOO_FEW);
    c = uf_welch((uf_arm){same, 3}, (uf_arm){same, 3}, UF_SCALE_DIFFERENCE, 0.95);
    assert_true(c.effect == 0 && isnan(c.p) && c.notes == UF_NOTE_NO_SPREAD);
    c = uf_welch((uf_arm){NULL, 0}, (uf_arm){same, 3}, UF_SCALE_DIFFERENCE, 0.95);
    assert_true(isnan(c.effect) && c.mean_control == 4);
}

/* Hedges 1981: the factor is 1 / sqrt(pi) for two degrees and Gamma(3/2) / sqrt(3/2) for three (closed forms). Like
 * arms of ten have df 18: the factor is close to 1 - 3 / (4 df - 1) (his approximation, good to 1e-4 there). */
static void test_hedges_g(void **state)
{
    (void)state;
    assert_near_rel(uf_hedges_g(1, 2, 1, 0.95).g, sqrt(1 / 3.14159265358979323846), 1e-12);
    assert_near_rel(uf_hedges_g(1, 3, 1, 0.95).g, sqrt(3.14159265358979323846) / 2 / sqrt(1.5), 1e-12);
    uf_contrast c = uf_welch((uf_arm){sleep_a, 10}, (uf_arm){sleep_b, 10}, UF_SCALE_DIFFERENCE, 0.95);
    double pooled = sqrt((c.sd_treated * c.sd_treated + c.sd_control * c.sd_control) / 2);
    assert_near_rel(c.hedges_g, -1.58 / pooled * (1 - 3.0 / 71), 2e-4);
    assert_true(c.hedges_g_low < c.hedges_g && c.hedges_g < c.hedges_g_high);
}

/* Cumming and Finch 2001, Educ. Psychol. Meas. 61:532, make the interval of a standardised difference from
 * noncentral t: for an effect of 0 it is symmetric, and its end is where P(T <= 0) = Phi(-delta) = 0.025 (closed
 * form). */
static void test_interval_of_no_effect(void **state)
{
    (void)state;
    uf_effect_size size = uf_hedges_g(0, 11, 0.5, 0.95);
    assert_near_abs(size.g, 0, 1e-15);
    assert_near_rel(size.high, 0.5 * 1.9599639845400545, 1e-9);
    assert_near_rel(size.low, -0.5 * 1.9599639845400545, 1e-9);
}

/* ---- blocks ---------------------------------------------------------------------------------- */

static size_t sleep_rows(uf_blocked_row *rows)
{
    for (int k = 0; k < 10; k++) {
        rows[2 * k] = (uf_blocked_row){sleep_a[k], k, 1};
        rows[2 * k + 1] = (uf_blocked_row){sleep_b[k], k, 0};
    }
    return 20;
}

/* Student 1908 gives the mean of the differences 1.58 and their standard deviation 1.17 (divisor n; 1.23 with n -
 * 1); the paired t is -4.0621 on 9 degrees, p 0.002833, interval -2.4598858 .. -0.7001142 (R's t.test, values from
 * memory). */
static void test_pairs(void **state)
{
    (void)state;
    uf_blocked_row rows[20];
    uf_blocked fit;
    assert_int_equal(uf_blocked_fit(rows, sleep_rows(rows), 10, 2, UF_SCALE_DIFFERENCE, &fit, NULL), UF_OK);
    uf_contrast c = uf_blocked_contrast(&fit, 1, 0, 0.95);
    assert_near_rel(c.effect, -1.58, 1e-12);
    assert_near_rel(c.df, 9, 1e-15);
    assert_near_rel(c.t, -4.0621, 1e-5);
    assert_near_rel(c.p, 0.002833, 2e-4);
    assert_near_rel(c.effect_low, -2.4598858, 1e-7);
    assert_near_rel(c.effect_high, -0.7001142, 1e-7);
    assert_near_rel(fit.residual_sd * sqrt(2), 1.23, 1e-3);
    uf_blocked_free(&fit);
    uf_blocked_free(&fit);
}

/* Complete blocks, three arms: effects are differences of means, the residual is that of two-way analysis of
 * variance, and any contrast has the variance 2 s^2 / blocks (Scheffe 1959, 4.2; worked out by hand below). */
static void test_complete_blocks(void **state)
{
    (void)state;
    static const double y[3][4] = {{10.25, 12.5, 9.75, 14}, {11, 13.75, 10, 15.5}, {13.5, 14.25, 12.75, 18}};
    uf_blocked_row rows[12];
    uf_blocked fit;
    double all = 0, group[3] = {0}, block[4] = {0}, squares = 0;
    for (int g = 0; g < 3; g++)
        for (int b = 0; b < 4; b++) {
            rows[4 * g + b] = (uf_blocked_row){y[g][b], b, g};
            all += y[g][b] / 12;
            group[g] += y[g][b] / 4;
            block[b] += y[g][b] / 3;
        }
    for (int g = 0; g < 3; g++)
        for (int b = 0; b < 4; b++)
            squares += pow(y[g][b] - group[g] - block[b] + all, 2);
    assert_int_equal(uf_blocked_fit(rows, 12, 4, 3, UF_SCALE_DIFFERENCE, &fit, NULL), UF_OK);
    uf_contrast c = uf_blocked_contrast(&fit, 2, 0, 0.9), between = uf_blocked_contrast(&fit, 2, 1, 0.9);
    assert_near_rel(c.df, 6, 1e-15);
    assert_near_rel(c.effect, group[2] - group[0], 1e-12);
    assert_near_rel(c.standard_error, sqrt(2 * squares / 6 / 4), 1e-12);
    assert_near_rel(between.effect, group[2] - group[1], 1e-12);
    assert_near_rel(between.standard_error, c.standard_error, 1e-12);
    assert_near_rel(fit.unscaled[1 * 3 + 2] / fit.unscaled[1 * 3 + 1], 0.5, 1e-12); /* they share the control */
    uf_blocked_free(&fit);
}

/* Arms that never meet: nothing to say about them, and the rest is as if they were not there. */
static void test_arms_that_never_meet(void **state)
{
    (void)state;
    uf_blocked_row rows[24];
    uf_blocked fit;
    size_t count = sleep_rows(rows);
    for (int k = 0; k < 4; k++)
        rows[count++] = (uf_blocked_row){3.5 + k * k, 10 + k / 2, 2 + k % 2};
    assert_int_equal(uf_blocked_fit(rows, count, 12, 4, UF_SCALE_DIFFERENCE, &fit, NULL), UF_OK);
    uf_contrast c = uf_blocked_contrast(&fit, 1, 0, 0.95), alone = uf_blocked_contrast(&fit, 3, 0, 0.95);
    assert_near_rel(c.t, -4.0621, 1e-5);
    assert_true(isnan(alone.effect) && isnan(alone.p) && (alone.notes & UF_NOTE_NOT_CONNECTED));
    assert_near_rel(alone.mean_treated, (4.5 + 12.5) / 2, 1e-14);
    uf_blocked_free(&fit);
}

static void test_two_blocks_are_too_few(void **state)
{
    (void)state;
    const uf_blocked_row rows[] = {{2.5, 0, 0}, {3.5, 0, 1}, {4.25, 1, 0}, {6, 1, 1}};
    uf_blocked fit;
    assert_int_equal(uf_blocked_fit(rows, 4, 2, 2, UF_SCALE_RATIO, &fit, NULL), UF_OK);
    uf_contrast c = uf_blocked_contrast(&fit, 1, 0, 0.95);
    assert_near_rel(c.effect, sqrt(3.5 / 2.5 * 6 / 4.25), 1e-12);
    assert_true(isnan(c.p) && isnan(c.effect_low) && c.notes == UF_NOTE_TOO_FEW);
    uf_blocked_free(&fit);
}

/* ---- two factors ------------------------------------------------------------------------------- */

/* Closed form: with four arms of like size the degrees of freedom are (sum s^2)^2 / sum (s^4 / (n - 1)). */
static void test_interaction(void **state)
{
    (void)state;
    static const double v[4][4] = {
        {2.5, 3.75, 3, 4.25}, {2.75, 4, 3.5, 3.25}, {5, 6.5, 5.75, 7.25}, {9.5, 8.25, 11, 10.5}};
    uf_arm arms[2][2] = {{{v[0], 4}, {v[1], 4}}, {{v[2], 4}, {v[3], 4}}};
    double mean[4] = {0}, variance[4] = {0}, sum = 0, below = 0;
    for (int k = 0; k < 4; k++) {
        for (int j = 0; j < 4; j++)
            mean[k] += v[k][j] / 4;
        for (int j = 0; j < 4; j++)
            variance[k] += pow(v[k][j] - mean[k], 2) / 3;
        sum += variance[k];
        below += variance[k] * variance[k] / 3;
    }
    uf_contrast c = uf_interaction(arms, UF_SCALE_DIFFERENCE, 0.95);
    assert_near_rel(c.effect, (mean[3] - mean[1]) - (mean[2] - mean[0]), 1e-12);
    assert_near_rel(c.standard_error, sqrt(sum / 4), 1e-12);
    assert_near_rel(c.df, sum * sum / below, 1e-12);
    c = uf_interaction(arms, UF_SCALE_RATIO, 0.95);
    double logs = 0;
    for (int j = 0; j < 4; j++)
        logs += (log(v[3][j]) - log(v[1][j]) - log(v[2][j]) + log(v[0][j])) / 4;
    assert_near_rel(c.effect, exp(logs), 1e-12);
    assert_true(c.effect_low < c.effect && c.effect < c.effect_high);
}

/* In complete blocks the blocked interaction's variance is 4 s^2 / blocks (two-way analysis of variance). */
static void test_blocked_interaction(void **state)
{
    (void)state;
    static const double v[4][5] = {{2.5, 3.75, 3, 4.25, 5.125},
                                   {2.75, 4, 3.5, 3.25, 5.5},
                                   {5, 6.5, 5.75, 7.25, 8.5},
                                   {9.5, 8.25, 11, 10.5, 12.25}};
    uf_blocked_row rows[20];
    int cells[2][2] = {{0, 1}, {2, 3}};
    uf_blocked fit;
    double effect = 0;
    for (int k = 0; k < 20; k++)
        rows[k] = (uf_blocked_row){v[k / 5][k % 5], k % 5, k / 5};
    for (int b = 0; b < 5; b++)
        effect += (v[3][b] - v[1][b] - v[2][b] + v[0][b]) / 5;
    assert_int_equal(uf_blocked_fit(rows, 20, 5, 4, UF_SCALE_DIFFERENCE, &fit, NULL), UF_OK);
    uf_contrast c = uf_blocked_interaction(&fit, cells, 0.95);
    assert_near_rel(c.effect, effect, 1e-12);
    assert_near_rel(c.df, 12, 1e-15);
    assert_near_rel(c.standard_error, fit.residual_sd * sqrt(4.0 / 5), 1e-12);
    uf_blocked_free(&fit);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_welch_on_sleep),
                                       cmocka_unit_test(test_welch_of_unlike_spreads),
                                       cmocka_unit_test(test_ratio_is_difference_of_logarithms),
                                       cmocka_unit_test(test_too_few_and_no_spread),
                                       cmocka_unit_test(test_hedges_g),
                                       cmocka_unit_test(test_interval_of_no_effect),
                                       cmocka_unit_test(test_pairs),
                                       cmocka_unit_test(test_complete_blocks),
                                       cmocka_unit_test(test_arms_that_never_meet),
                                       cmocka_unit_test(test_two_blocks_are_too_few),
                                       cmocka_unit_test(test_interaction),
                                       cmocka_unit_test(test_blocked_interaction)};
    return cmocka_run_group_tests_name("contrasts", tests, NULL, NULL);
}
