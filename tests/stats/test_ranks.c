/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rank tests against published worked examples and counts by hand. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "near.h"
#include "stats/ranks.h"

static uf_rank_test mann_whitney(const double *x, size_t n, const double *y, size_t m, double level)
{
    uf_rank_test test;
    assert_int_equal(uf_mann_whitney((uf_arm){x, n}, (uf_arm){y, m}, UF_SCALE_DIFFERENCE, level, 1, &test, NULL),
                     UF_OK);
    return test;
}

/* Hollander and Wolfe 1973, p. 69 (permeability of membranes): U 35, one-sided exact p 0.1272 = 382/3003. The shift
 * 0.305 with its exact interval -0.15 .. 0.76 is in the manual of R's exact rank tests (from memory; computed
 * again). */
static void test_no_ties(void **state)
{
    (void)state;
    static const double x[] = {0.80, 0.83, 1.89, 1.04, 1.45, 1.38, 1.91, 1.64, 0.73, 1.46};
    static const double y[] = {1.15, 0.88, 0.90, 0.74, 1.21};
    uf_rank_test t = mann_whitney(x, 10, y, 5, 0.95);
    assert_true(t.exact);
    assert_near_rel(t.statistic, 35, 1e-15);
    assert_near_rel(t.p_above, 382.0 / 3003, 1e-12);
    assert_near_rel(t.p, 764.0 / 3003, 1e-12);
    assert_near_rel(t.shift, 0.305, 1e-12);
    assert_near_rel(t.shift_low, -0.15, 1e-12);
    assert_near_rel(t.shift_high, 0.76, 1e-12);
    assert_near_abs(t.coverage, 0.960, 5e-4);
}

/* Three below four: two of the 35 choices are as far apart (counted by hand). */
static void test_full_separation(void **state)
{
    (void)state;
    static const double x[] = {1.1, 2.2, 3.3}, y[] = {4.4, 5.5, 6.6, 7.7};
    uf_rank_test t = mann_whitney(x, 3, y, 4, 0.95);
    assert_near_abs(t.statistic, 0, 1e-15);
    assert_near_rel(t.p, 2.0 / 35, 1e-12);
    assert_true(isnan(t.shift_low) && (t.notes & UF_NOTE_LEVEL_OUT_OF_REACH));
    assert_int_equal(
        uf_mann_whitney((uf_arm){x, 3}, (uf_arm){y, 4}, UF_SCALE_DIFFERENCE, 0.95, UF_RANKS_LEAST, &t, NULL), UF_OK);
    assert_true(isnan(t.p) && isnan(t.shift_low) && (t.notes & UF_NOTE_TOO_FEW));
    assert_near_rel(t.shift, -3.85, 1e-12);
}

/* SAS/STAT User's Guide, procedure NPAR1WAY, examples 3 and 4: rank sums 110.5 and 79.5, expected 130 and 60,
 * standard deviation 11.004784; shift 0.35. The exact p were computed by counting all 27132 choices. */
static void test_ties(void **state)
{
    (void)state;
    static const double x[] = {1.94, 1.94, 2.92, 2.92, 2.92, 2.92, 3.27, 3.27, 3.27, 3.27, 3.70, 3.70, 3.74};
    static const double y[] = {3.27, 3.27, 3.27, 3.70, 3.70, 3.74};
    uf_rank_test t = mann_whitney(y, 6, x, 13, 0.98);
    assert_near_rel(t.statistic, 79.5 - 21, 1e-12);
    assert_near_rel(t.expected, 60 - 21, 1e-12);
    assert_near_rel(t.sd, 11.0047836488, 1e-10);
    assert_near_rel(t.p_above, 0.0527052926, 1e-8);
    assert_near_rel(t.p, 0.1054105853, 1e-8);
    assert_near_rel(t.shift, 0.35, 1e-12);
}

/* Sleep data of Student 1908: U 25.5 and p 0.06933 by the normal approximation in R's output; here the
 * approximation is called by a sample so large that it is not counted, and checked by its formula (Lehmann 1975,
 * 1.3 and appendix). */
static void test_sleep_and_large_samples(void **state)
{
    (void)state;
    static const double a[] = {0.7, -1.6, -0.2, -1.2, -0.1, 3.4, 3.7, 0.8, 0.0, 2.0};
    static const double b[] = {1.9, 0.8, 1.1, 0.1, -0.1, 4.4, 5.5, 1.6, 4.6, 3.4};
    uf_rank_test t = mann_whitney(a, 10, b, 10, 0.95);
    assert_near_rel(t.statistic, 25.5, 1e-15);
    double z = (fabs(t.statistic - t.expected) - 0.5) / t.sd;
    assert_near_abs(erfc(z / sqrt(2)), 0.0693275754, 1e-9);
    double x[60], y[60];
    for (int k = 0; k < 60; k++) {
        x[k] = (k * 37) % 101;
        y[k] = (k * 53) % 97 + 6.5;
    }
    t = mann_whitney(x, 60, y, 60, 0.95);
    assert_true(!t.exact && t.notes == UF_NOTE_NORMAL && isnan(t.coverage));
    assert_near_rel(t.p, erfc((fabs(t.statistic - 1800) - 0.5) / t.sd / sqrt(2)), 1e-10);
    assert_true(t.shift_low < t.shift && t.shift < t.shift_high);
}

static void test_ratio_and_all_alike(void **state)
{
    (void)state;
    static const double x[] = {4, 8, 16, 2}, y[] = {1, 2, 4, 0.5}, same[] = {3, 3, 3, 3};
    uf_rank_test t;
    assert_int_equal(uf_mann_whitney((uf_arm){x, 4}, (uf_arm){y, 4}, UF_SCALE_RATIO, 0.95, 4, &t, NULL), UF_OK);
    assert_near_rel(t.shift, 4, 1e-12); /* all of x are four times y: the median ratio is 4 */
    t = mann_whitney(same, 4, same, 4, 0.95);
    assert_true(isnan(t.p) && t.notes & UF_NOTE_NO_SPREAD && t.shift == 0);
}

/* ---- signed ranks ------------------------------------------------------------------------------- */

/* Hollander and Wolfe 1973, p. 29 (depression scale before and after a tranquilliser): sum of positive ranks 40 of
 * 45, one-sided exact p 0.0195 = 10/512 (R's help page of wilcox.test; from memory). Shift 0.46, interval 0.01 ..
 * 0.786 at 96.1 %: computed by hand from the 45 means. */
static void test_signed_ranks(void **state)
{
    (void)state;
    static const double x[] = {1.83, 0.50, 1.62, 2.48, 1.68, 1.88, 1.55, 3.06, 1.30};
    static const double y[] = {0.878, 0.647, 0.598, 2.05, 1.06, 1.29, 1.06, 3.14, 1.29};
    uf_rank_test t;
    assert_int_equal(uf_signed_rank(x, y, 9, UF_SCALE_DIFFERENCE, 0.95, UF_RANKS_LEAST, &t, NULL), UF_OK);
    assert_near_rel(t.statistic, 40, 1e-15);
    assert_near_rel(t.p_above, 10.0 / 512, 1e-12);
    assert_near_rel(t.p, 20.0 / 512, 1e-12);
    assert_near_rel(t.shift, 0.46, 1e-12);
    assert_near_rel(t.shift_low, 0.01, 1e-9);
    assert_near_rel(t.shift_high, 0.786, 1e-9);
    assert_near_rel(t.coverage, 1 - 2 * 10.0 / 512, 1e-12);
}

/* Differences 1, 1, 1, -1, 0: the four ones share rank 2.5, and of 16 changes of sign 5 have at least 7.5 (by
 * hand). */
static void test_signed_ranks_with_ties(void **state)
{
    (void)state;
    static const double x[] = {3, 4, 5, 6, 7, NAN}, y[] = {2, 3, 4, 7, 7, 1};
    uf_rank_test t;
    assert_int_equal(uf_signed_rank(x, y, 6, UF_SCALE_DIFFERENCE, 0.95, UF_RANKS_LEAST, &t, NULL), UF_OK);
    assert_int_equal(t.n_treated, 5);
    assert_near_rel(t.statistic, 7.5, 1e-15);
    assert_near_rel(t.p_above, 5.0 / 16, 1e-12);
    assert_near_rel(t.p, 10.0 / 16, 1e-12);
    assert_true(isnan(t.shift_low) && (t.notes & UF_NOTE_LEVEL_OUT_OF_REACH));
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_no_ties),
                                       cmocka_unit_test(test_full_separation),
                                       cmocka_unit_test(test_ties),
                                       cmocka_unit_test(test_sleep_and_large_samples),
                                       cmocka_unit_test(test_ratio_and_all_alike),
                                       cmocka_unit_test(test_signed_ranks),
                                       cmocka_unit_test(test_signed_ranks_with_ties)};
    return cmocka_run_group_tests_name("rank tests", tests, NULL, NULL);
}
