/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Means, spreads and middles against NIST StRD (univariate summary statistics) and closed forms; the distributions
 * they are judged by against published tables. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "fit/distribution.h"
#include "near.h"
#include "nist.h"
#include "stats/notes.h"
#include "stats/summary.h"

#define COUNT_OF(array) (sizeof array / sizeof array[0])

/* Certified to fifteen digits; thirteen are asked of the mean, eleven of the standard deviation. */
static void test_nist(void **state)
{
    (void)state;
    uf_moments lew = uf_moments_of(lew_data, NULL, COUNT_OF(lew_data));
    assert_near_rel(lew.mean, -177.435, 1e-13);
    assert_near_rel(lew.sd, 277.332168044316, 1e-11);
    uf_moments lottery = uf_moments_of(lottery_data, NULL, COUNT_OF(lottery_data));
    assert_near_rel(lottery.mean, 518.958715596330, 1e-13);
    assert_near_rel(lottery.sd, 291.699727470969, 1e-11);
    uf_moments mavro = uf_moments_of(mavro_data, NULL, COUNT_OF(mavro_data));
    assert_near_rel(mavro.mean, 2.001856, 1e-13);
    assert_near_rel(mavro.sd, 0.000429123454003053, 1e-11);
    uf_moments michelso = uf_moments_of(michelso_data, NULL, COUNT_OF(michelso_data));
    assert_near_rel(michelso.mean, 299.8524, 1e-13);
    assert_near_rel(michelso.sd, 0.0790105478190518, 1e-11);
}

/* NIST StRD NumAcc4 by its rule: 10000000.2, then 10000000.1 and 10000000.3 in turn; certified mean 10000000.2, sd
 * 0.1. One pass over squares keeps no digit here. */
static void test_numacc4(void **state)
{
    (void)state;
    double values[1001];
    for (int k = 0; k < 1001; k++)
        values[k] = k == 0 ? 10000000.2 : k % 2 ? 10000000.1 : 10000000.3;
    uf_moments m = uf_moments_of(values, NULL, 1001);
    assert_near_rel(m.mean, 10000000.2, 1e-15);
    assert_near_rel(m.sd, 0.1, 1e-8);
}

/* Closed form: like weights change nothing, and a weighted mean is sum w x / sum w. */
static void test_weights(void **state)
{
    (void)state;
    const double x[] = {2.385, -1.25, NAN, 7.5, 3.125, 0.875}, same[] = {3, 3, 3, 3, 3, 3};
    const double w[] = {1.5, 2.25, 9, 1, 0, 4};
    uf_moments plain = uf_moments_of(x, NULL, 6), like = uf_moments_of(x, same, 6), m = uf_moments_of(x, w, 6);
    assert_int_equal(plain.count, 5);
    assert_near_rel(like.mean, plain.mean, 1e-15);
    assert_near_rel(like.sd, plain.sd, 1e-14);
    double mean = (1.5 * 2.385 - 2.25 * 1.25 + 7.5 + 4 * 0.875) / 8.75;
    double squares =
        1.5 * pow(2.385 - mean, 2) + 2.25 * pow(-1.25 - mean, 2) + pow(7.5 - mean, 2) + 4 * pow(0.875 - mean, 2);
    assert_int_equal(m.count, 4);
    assert_near_rel(m.mean, mean, 1e-14);
    assert_near_rel(m.sd, sqrt(squares / (8.75 - (1.5 * 1.5 + 2.25 * 2.25 + 1 + 16) / 8.75)), 1e-14);
}

/* By hand: sorted -1.25 0.875 2.385 3.125 7.5 has the middle 2.385 and deviations 0 0.74 1.51 3.635 5.115. */
static void test_middle(void **state)
{
    (void)state;
    const double x[] = {2.385, -1.25, 7.5, 3.125, 0.875}, tilted[] = {1, 1, 4, 1, 1}, balanced[] = {1, 1, 1, 1, 2};
    uf_summary s;
    assert_int_equal(uf_summarize(x, NULL, 5, &s, NULL), UF_OK);
    assert_near_rel(s.median, 2.385, 1e-15);
    assert_near_rel(s.mad, 1.51, 1e-14);
    assert_int_equal(uf_summarize(x, NULL, 4, &s, NULL), UF_OK);
    assert_near_rel(s.median, (2.385 + 3.125) / 2, 1e-15);
    assert_int_equal(uf_summarize(x, tilted, 5, &s, NULL), UF_OK);
    assert_near_rel(s.median, (3.125 + 7.5) / 2, 1e-15); /* four below, four at the top */
    assert_int_equal(uf_summarize(x, balanced, 5, &s, NULL), UF_OK);
    assert_near_rel(s.median, (0.875 + 2.385) / 2, 1e-15); /* three on each side */
}

static void test_nothing_and_one(void **state)
{
    (void)state;
    const double x[] = {NAN, 4.5};
    uf_summary s;
    assert_int_equal(uf_summarize(x, NULL, 1, &s, NULL), UF_OK);
    assert_true(s.moments.count == 0 && isnan(s.moments.mean) && isnan(s.median) && isnan(s.mad));
    assert_int_equal(uf_summarize(x, NULL, 2, &s, NULL), UF_OK);
    assert_true(s.moments.mean == 4.5 && isnan(s.moments.sd) && s.median == 4.5 && s.mad == 0);
}

/* Owen 1968 (Technometrics 10:445): a one-sided normal tolerance factor is k = t'(0.95; n - 1, z_p sqrt n) / sqrt
 * n; n = 10, 90 % of the population with 95 % confidence is 2.355 in every printed table (value from memory). Then
 * closed forms: with delta 0 Student's own, and t = 0 leaves Phi(-delta). */
static void test_noncentral_t(void **state)
{
    (void)state;
    double delta = 1.2815515655446004 * sqrt(10);
    assert_near_abs(uf_noncentral_t_below(2.355 * sqrt(10), 9, delta), 0.95, 2e-4);
    assert_near_rel(uf_noncentrality(2.355 * sqrt(10), 9, 0.95), delta, 1e-3);
    assert_near_rel(uf_noncentral_t_below(1.7, 4, 0), uf_t_below(1.7, 4), 1e-11);
    assert_near_rel(uf_noncentral_t_below(0, 7, 1.3), uf_normal_below(-1.3), 1e-11);
    assert_near_rel(uf_noncentral_t_below(-2.1, 1, 0), uf_t_below(-2.1, 1), 1e-11);
    assert_true(isnan(uf_noncentral_t_below(1, 0.5, 0)) && isnan(uf_noncentrality(NAN, 5, 0.5)));
}

/* The density of s has the integral 1, and E s^2 = 1 (chi-square has the mean df). */
static double second_moment(double s, void *df)
{
    return s * s * uf_sd_ratio_density(s, *(double *)df);
}

static void test_sd_ratio(void **state)
{
    (void)state;
    static const double dfs[] = {1, 2, 3.7, 19, 240, 1e5};
    for (size_t k = 0; k < COUNT_OF(dfs); k++) {
        double low, high, df = dfs[k];
        uf_sd_ratio_range(df, &low, &high);
        assert_near_rel(uf_integral(second_moment, &df, low, high, 4), 1, 1e-9);
    }
}

static void test_every_note_has_words(void **state)
{
    (void)state;
    for (int bit = 0; bit < UF_NOTE_BITS; bit++)
        assert_non_null(uf_note_text(1u << bit));
    assert_null(uf_note_text(1u << UF_NOTE_BITS));
    assert_null(uf_note_text(3));
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_nist),
                                       cmocka_unit_test(test_numacc4),
                                       cmocka_unit_test(test_weights),
                                       cmocka_unit_test(test_middle),
                                       cmocka_unit_test(test_nothing_and_one),
                                       cmocka_unit_test(test_noncentral_t),
                                       cmocka_unit_test(test_sd_ratio),
                                       cmocka_unit_test(test_every_note_has_words)};
    return cmocka_run_group_tests_name("summaries", tests, NULL, NULL);
}
