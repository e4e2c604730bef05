/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Dunnett's and Holm's procedures against published examples and tables. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "fit/distribution.h"
#include "near.h"
#include "stats/many.h"

#define COUNT_OF(array) (sizeof array / sizeof array[0])

/* Dunnett 1955, J. Am. Stat. Assoc. 50:1096: blood counts of animals, control and two drugs. */
static const double control[] = {7.40, 8.50, 7.20, 8.24, 9.84, 8.32};
static const double drug_a[] = {9.76, 8.80, 7.68, 9.36};
static const double drug_b[] = {12.80, 9.68, 12.16, 9.20, 10.55};
static const uf_arm arms[] = {{control, 6}, {drug_a, 4}, {drug_b, 5}};

/* scipy's manual works the example (p 0.62005 and 0.00590, "may vary" with its random integration); the exact values
 * here were computed by two independent quadratures. */
static void test_dunnett_1955(void **state)
{
    (void)state;
    uf_many many[3];
    double sd, df;
    assert_int_equal(uf_dunnett_arms(arms, 3, UF_SCALE_DIFFERENCE, UF_TWO_SIDED, 0.95, many, &sd, &df, NULL), UF_OK);
    assert_near_rel(df, 12, 1e-15);
    assert_near_rel(sd * sd, 1.3805233333, 1e-10);
    assert_near_rel(many[1].t, 0.8570321259, 1e-9);
    assert_near_rel(many[2].t, 3.6937523112, 1e-9);
    assert_near_abs(many[1].p_adjusted, 0.6201019800, 1e-9);
    assert_near_abs(many[2].p_adjusted, 0.0058253608, 1e-9);
    assert_near_abs(many[1].p_adjusted, 0.62005, 5e-4);
    assert_near_abs(many[2].p_adjusted, 0.00590, 5e-4);
    assert_near_abs(many[1].low, -1.256304, 1e-6);
    assert_near_abs(many[1].high, 2.556304, 1e-6);
    assert_near_abs(many[2].low, 0.839728, 1e-6);
    assert_near_abs(many[2].high, 4.416272, 1e-6);
    assert_true(isnan(many[0].t) && isnan(many[0].p_adjusted));
}

static void test_one_sided(void **state)
{
    (void)state;
    uf_many up[3], down[3];
    assert_int_equal(uf_dunnett_arms(arms, 3, UF_SCALE_DIFFERENCE, UF_ABOVE, 0.95, up, NULL, NULL, NULL), UF_OK);
    assert_near_abs(up[1].p_adjusted, 0.3249776109, 1e-9);
    assert_near_abs(up[2].p_adjusted, 0.0029138830, 1e-9);
    assert_true(isinf(up[1].high) && up[2].low > 0);
    /* Mirrored data, mirrored answer. */
    const double means[] = {-8.25, -8.90, -10.878};
    const size_t counts[] = {6, 4, 5};
    assert_int_equal(uf_dunnett_means(means, counts, 3, sqrt(1.3805233333), 12, UF_BELOW, 0.95, down, NULL), UF_OK);
    assert_near_abs(down[1].p_adjusted, up[1].p_adjusted, 1e-9);
    assert_near_abs(down[2].high, -up[2].low, 1e-8);
    assert_true(isinf(down[2].low));
}

static double factor_of(double df, size_t k, uf_sides sides)
{
    double loading[9];
    for (size_t j = 0; j < k; j++)
        loading[j] = sqrt(0.5);
    return uf_dunnett_factor(0.95, df, loading, k, sides);
}

/* Dunnett 1955 and 1964 (Biometrics 20:482), tables at 5 % for groups of like size, to the two decimals printed. */
static void test_tables(void **state)
{
    (void)state;
    static const double two_20[] = {2.09, 2.38, 2.54, 2.65, 2.73, 2.80, 2.86, 2.90, 2.95};
    static const double one_10[] = {1.81, 2.15, 2.34, 2.47, 2.56}, one_20[] = {1.72, 2.03, 2.19, 2.30, 2.39};
    for (size_t k = 0; k < COUNT_OF(two_20); k++)
        assert_near_abs(factor_of(20, k + 1, UF_TWO_SIDED), two_20[k], 0.0051);
    for (size_t k = 0; k < COUNT_OF(one_10); k++) {
        assert_near_abs(factor_of(10, k + 1, UF_ABOVE), one_10[k], 0.0051);
        assert_near_abs(factor_of(20, k + 1, UF_ABOVE), one_20[k], 0.0051);
    }
    assert_near_abs(factor_of(10, 2, UF_TWO_SIDED), 2.57, 0.0051);
    assert_near_abs(factor_of(10, 3, UF_TWO_SIDED), 2.76, 0.0051);
    assert_near_abs(factor_of(60, 3, UF_TWO_SIDED), 2.41, 0.0051);
}

/* The same to four decimals, computed by two independent quadratures. */
static void test_more_digits(void **state)
{
    (void)state;
    static const size_t k[] = {2, 3, 4, 5, 9};
    static const double two_20[] = {2.3787, 2.5403, 2.6510, 2.7347, 2.9463};
    for (size_t j = 0; j < COUNT_OF(k); j++)
        assert_near_abs(factor_of(20, k[j], UF_TWO_SIDED), two_20[j], 5.1e-5);
    assert_near_abs(factor_of(10, 2, UF_TWO_SIDED), 2.5683, 5.1e-5);
    assert_near_abs(factor_of(10, 3, UF_TWO_SIDED), 2.7590, 5.1e-5);
    assert_near_abs(factor_of(60, 3, UF_TWO_SIDED), 2.4099, 5.1e-5);
    assert_near_abs(factor_of(20, 2, UF_ABOVE), 2.0273, 5.1e-5);
    assert_near_abs(factor_of(20, 3, UF_ABOVE), 2.1923, 5.1e-5);
    assert_near_abs(factor_of(20, 5, UF_ABOVE), 2.3888, 5.1e-5);
    const double loading[] = {sqrt(4.0 / 10), sqrt(5.0 / 11)};
    assert_near_abs(uf_dunnett_factor(0.95, 12, loading, 2, UF_TWO_SIDED), 2.5134829036, 1e-8);
}

/* Closed forms: one arm is Student's t, whatever its loading; and without correlation and with endless degrees of
 * freedom (here 1e7) arms are independent normals. */
static void test_closed_forms(void **state)
{
    (void)state;
    const double one[] = {0.83}, none[] = {0, 0, 0};
    for (double df = 1; df < 40; df += 6.5)
        assert_near_abs(1 - uf_dunnett_below(2.385, df, one, 1, UF_TWO_SIDED), uf_t_beyond(2.385, df), 1e-10);
    assert_near_abs(uf_dunnett_below(1.7, 5, one, 1, UF_ABOVE), uf_t_below(1.7, 5), 1e-10);
    double in = 2 * uf_normal_below(2.385) - 1;
    assert_near_abs(uf_dunnett_below(2.385, 1e7, none, 3, UF_TWO_SIDED), in * in * in, 1e-6);
    assert_true(isnan(uf_dunnett_below(1, 0, one, 1, UF_ABOVE)));
}

/* A plate of 300 compounds: Bonferroni's bound holds from above, that of independent arms from below. */
static void test_many_arms(void **state)
{
    (void)state;
    double loading[300];
    for (int k = 0; k < 300; k++)
        loading[k] = sqrt(3.0 / (3 + 16));
    double p = 1 - uf_dunnett_below(4.1, 614, loading, 300, UF_TWO_SIDED);
    assert_true(p < 300 * uf_t_beyond(4.1, 614));
    assert_true(p > 0.5 * 300 * uf_t_beyond(4.1, 614));
}

/* Complete blocks: all correlations are 1/2, so that the blocked family is the plain one of the same t and degrees. */
static void test_blocked_family(void **state)
{
    (void)state;
    static const double y[4][5] = {{10.25, 12.5, 9.75, 14, 11},
                                   {11, 13.75, 10, 15.5, 11.25},
                                   {13.5, 14.25, 12.75, 18, 12},
                                   {9.5, 12.75, 9, 14.5, 10.25}};
    uf_blocked_row rows[20];
    uf_blocked fit;
    uf_many many[4];
    const double half[] = {sqrt(0.5), sqrt(0.5), sqrt(0.5)};
    double misfit;
    for (int k = 0; k < 20; k++)
        rows[k] = (uf_blocked_row){y[k / 5][k % 5], k % 5, k / 5};
    assert_int_equal(uf_blocked_fit(rows, 20, 5, 4, UF_SCALE_DIFFERENCE, &fit, NULL), UF_OK);
    assert_int_equal(uf_dunnett_blocked(&fit, UF_TWO_SIDED, 0.95, many, &misfit, NULL), UF_OK);
    assert_true(misfit < 1e-10);
    double factor = uf_dunnett_factor(0.95, 12, half, 3, UF_TWO_SIDED);
    for (int g = 1; g < 4; g++) {
        uf_contrast c = uf_blocked_contrast(&fit, g, 0, 0.95);
        assert_near_rel(many[g].t, c.t, 1e-12);
        assert_near_abs(many[g].p_adjusted, 1 - uf_dunnett_below(fabs(c.t), 12, half, 3, UF_TWO_SIDED), 1e-9);
        assert_near_rel(many[g].high - many[g].low, 2 * factor * c.standard_error, 1e-8);
        assert_true(many[g].p_adjusted > c.p);
    }
    uf_blocked_free(&fit);
}

/* ---- Holm ------------------------------------------------------------------------------------- */

static void check_holm(const double *p, size_t count, const double *expected)
{
    double adjusted[8];
    assert_int_equal(uf_holm(p, count, adjusted, NULL), UF_OK);
    for (size_t k = 0; k < count; k++)
        assert_near_rel(adjusted[k], expected[k], 1e-12);
}

/* Worked by Holm 1979's rule; the second set is printed with its decisions in the documentation of an R package
 * (HDLSSkST), which rejects below the level only: its second p reaches 0.05 exactly, and Holm rejects it. */
static void test_holm(void **state)
{
    (void)state;
    const double a[] = {0.01, 0.04, 0.03, 0.005}, a_adjusted[] = {0.03, 0.06, 0.06, 0.02};
    const double b[] = {0.50, 0.01, 0.001, 0.69, 0.02, 0.05, 0.0025};
    const double b_adjusted[] = {1, 0.05, 0.007, 1, 0.08, 0.15, 0.015};
    const double c[] = {0.042, 0.001, 0.031, 0.014, 0.007}, c_adjusted[] = {0.062, 0.005, 0.062, 0.042, 0.028};
    check_holm(a, 4, a_adjusted);
    check_holm(b, 7, b_adjusted);
    check_holm(c, 5, c_adjusted);
    double adjusted[7];
    assert_int_equal(uf_holm(b, 7, adjusted, NULL), UF_OK);
    const int rejected[] = {0, 1, 1, 0, 0, 0, 1};
    for (int k = 0; k < 7; k++)
        assert_int_equal(uf_rejects(adjusted[k], 0.05), rejected[k]);
}

static void test_missing_p_is_no_member(void **state)
{
    (void)state;
    const double p[] = {0.02, NAN, 0.04};
    double adjusted[3];
    assert_near_rel(uf_bonferroni_level(0.95, 10), 0.995, 1e-14);
    assert_int_equal(uf_holm(p, 3, adjusted, NULL), UF_OK);
    assert_near_rel(adjusted[0], 0.04, 1e-14);
    assert_true(isnan(adjusted[1]) && !uf_rejects(adjusted[1], 0.05));
    assert_near_rel(adjusted[2], 0.04, 1e-14);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_dunnett_1955),
                                       cmocka_unit_test(test_one_sided),
                                       cmocka_unit_test(test_tables),
                                       cmocka_unit_test(test_more_digits),
                                       cmocka_unit_test(test_closed_forms),
                                       cmocka_unit_test(test_many_arms),
                                       cmocka_unit_test(test_blocked_family),
                                       cmocka_unit_test(test_holm),
                                       cmocka_unit_test(test_missing_p_is_no_member)};
    return cmocka_run_group_tests_name("many comparisons", tests, NULL, NULL);
}
