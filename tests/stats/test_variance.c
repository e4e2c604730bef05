/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Analysis of variance against NIST StRD, intraclass correlation and variance components against published
 * examples. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "near.h"
#include "nist.h"
#include "stats/variance.h"

#define COUNT_OF(array) (sizeof array / sizeof array[0])

typedef struct certified {
    double ms_between, ms_within, f, r_squared, residual_sd;
} certified;

static void check(const double *values, const int *from_one, size_t count, int groups, certified c, double digits)
{
    int group[200];
    uf_one_way fit;
    for (size_t k = 0; k < count; k++)
        group[k] = from_one[k] - 1;
    assert_int_equal(uf_one_way_fit(values, group, count, groups, 0.95, &fit, NULL), UF_OK);
    assert_near_rel(fit.ms_between, c.ms_between, digits);
    assert_near_rel(fit.ms_within, c.ms_within, digits);
    assert_near_rel(fit.f, c.f, digits);
    assert_near_rel(fit.r_squared, c.r_squared, digits);
    assert_near_rel(fit.residual_sd, c.residual_sd, digits);
}

/* NIST StRD, analysis of variance. AtmWtAg has seven constant leading digits: reading it into doubles already costs
 * half of the digits. */
static void test_nist(void **state)
{
    (void)state;
    check(sirstv_data, sirstv_groups, COUNT_OF(sirstv_data), 5,
          (certified){1.27865654e-2, 1.0831828e-2, 1.18046237440255, 0.190999039051129, 0.104076068334656}, 1e-11);
    check(atmwtag_data, atmwtag_groups, COUNT_OF(atmwtag_data), 2,
          (certified){3.638341875e-9, 2.28155932971014e-10, 15.9467335677930, 0.257426544538321, 1.51048314446410e-5},
          1e-8);
    check(smls01_data, smls01_groups, COUNT_OF(smls01_data), 9, (certified){0.21, 0.01, 21.0, 0.482758620689655, 0.1},
          1e-12);
}

/* Shrout and Fleiss 1979, Psychol. Bull. 86:420, table 2: six targets by four judges. ICC(1) 0.17; F 1.8 on 5 and
 * 18 degrees, p 0.16477 and interval -0.133 .. 0.72 as the R package psych prints them; more digits computed. */
static void test_shrout_and_fleiss(void **state)
{
    (void)state;
    static const double scores[] = {9, 2, 5, 8, 6, 1, 3, 2, 8, 4, 6, 8, 7, 1, 2, 6, 10, 5, 6, 9, 6, 2, 4, 7};
    int target[24];
    uf_one_way fit;
    for (int k = 0; k < 24; k++)
        target[k] = k / 4;
    assert_int_equal(uf_one_way_fit(scores, target, 24, 6, 0.95, &fit, NULL), UF_OK);
    assert_near_rel(fit.ms_between, 11.2416667, 1e-8);
    assert_near_rel(fit.ms_within, 6.2638889, 1e-8);
    assert_near_rel(fit.f, 1.7946785, 1e-7);
    assert_near_rel(fit.p, 0.1647688, 1e-6);
    assert_near_rel(fit.icc, 0.1657418, 1e-6);
    assert_near_abs(fit.icc_low, -0.1329323, 1e-6);
    assert_near_abs(fit.icc_high, 0.7225601, 1e-6);
    assert_near_rel(uf_design_effect(4, fit.icc), 1.4972253, 1e-7);
    assert_near_rel(uf_design_effect(100, 0.1), 10.9, 1e-14);
}

static void test_negative_icc_and_too_few(void **state)
{
    (void)state;
    static const double values[] = {1, 5, 2, 4.5, 1.5, 4};
    static const int pairs[] = {0, 0, 1, 1, 2, 2}, alone[] = {0, 1, 2, 3, 4, 5};
    uf_one_way fit;
    assert_int_equal(uf_one_way_fit(values, pairs, 6, 3, 0.95, &fit, NULL), UF_OK);
    assert_true(fit.icc == 0 && fit.icc_signed < 0 && fit.notes == UF_NOTE_NEGATIVE_AS_ZERO);
    assert_int_equal(uf_one_way_fit(values, alone, 6, 6, 0.95, &fit, NULL), UF_OK);
    assert_true(isnan(fit.f) && isnan(fit.p) && isnan(fit.icc) && fit.notes == UF_NOTE_TOO_FEW);
}

/* ---- three levels ----------------------------------------------------------------------------- */

/* Contrasts that sum to 0, so that each stratum has the sum of squares it is given. */
static double deviation(int k, int count)
{
    return k - (count - 1) / 2.0;
}

static double scale_for(double sum_of_squares, int count, double times)
{
    double squares = 0;
    for (int k = 0; k < count; k++)
        squares += pow(deviation(k, count), 2);
    return sqrt(sum_of_squares / (squares * times));
}

/* Davies 1967, Statistical Methods in Research and Production, a nested sampling of 9 batches x 3 samples x 2
 * tests: mean squares 99.110 (8 degrees), 1.406 (18), 0.747 (27), variances 16.2841, 0.3294, 0.7470, standard error
 * of the mean 1.355 (as worked in a public note). The values are made so that they have these mean squares. */
static void test_davies(void **state)
{
    (void)state;
    uf_nested_row rows[54];
    uf_components c;
    double batch = scale_for(8 * 99.110, 9, 6), sample = scale_for(18 * 1.406, 3, 9 * 2),
           test = scale_for(27 * 0.747, 2, 27);
    for (int k = 0; k < 54; k++)
        rows[k] = (uf_nested_row){47.148 + batch * deviation(k / 6, 9) + sample * deviation(k / 2 % 3, 3) +
                                      test * deviation(k % 2, 2),
                                  0, 5 * (k / 6), k / 2 % 3};
    assert_int_equal(uf_components_fit(rows, 54, &c, NULL), UF_OK);
    assert_near_rel(c.mean, 47.148, 1e-13);
    assert_near_rel(c.mean_square[UF_STRATUM_REPLICATE], 99.110, 1e-12);
    assert_near_rel(c.mean_square[UF_STRATUM_WELL], 1.406, 1e-11);
    assert_near_rel(c.mean_square[UF_STRATUM_CELL], 0.747, 1e-11);
    assert_near_abs(c.variance[UF_STRATUM_REPLICATE], 16.2841, 2e-4);
    assert_near_abs(c.variance[UF_STRATUM_WELL], 0.3294, 2e-4);
    assert_near_rel(c.variance[UF_STRATUM_CELL], 0.7470, 1e-11);
    double df, variance = uf_replicate_variance(&c, 3, 2, &df);
    assert_near_abs(sqrt(variance / 9), 1.355, 5e-4);
    assert_near_rel(variance, 99.110 / 6, 1e-10); /* balanced: the mean square itself, with its degrees */
    assert_near_rel(df, 8, 1e-8);
    assert_near_rel(c.icc_replicate, 16.284 / (16.284 + 0.3295 + 0.747), 1e-5);
    assert_near_rel(c.design_effect, variance / 9 / ((16.284 + 0.3295 + 0.747) / 54), 1e-5);
    assert_int_equal(c.notes, 0);
}

/* Unequal sizes by the definitions written out: two treatments, replicates of 2, 1 and 2, 2 wells. The coefficients
 * are those of Searle, Casella and McCulloch 1992: a matrix of zeros and ones per stratum, its trace within the
 * space of a mean square. */
static void test_unequal_sizes(void **state)
{
    (void)state;
    static const uf_nested_row rows[] = {{2.385, 1, 1, 1}, {3.5, 1, 1, 1},  {2.75, 1, 1, 1}, {4.125, 1, 1, 2},
                                         {4.5, 1, 1, 2},   {5.25, 1, 2, 1}, {6.5, 1, 2, 1},  {8.125, 2, 1, 1},
                                         {7.5, 2, 1, 2},   {9.75, 2, 1, 2}, {NAN, 2, 1, 2},  {10.5, 2, 2, 7},
                                         {12.25, 2, 2, 7}, {11, 2, 2, 7},   {11.5, 2, 2, 9}};
    uf_components c;
    assert_int_equal(uf_components_fit(rows, COUNT_OF(rows), &c, NULL), UF_OK);
    assert_true(c.cells == 14 && c.wells == 7 && c.replicates == 4 && c.treatments == 2);
    assert_near_rel(c.df[UF_STRATUM_REPLICATE], 2, 1e-15);
    assert_near_rel(c.df[UF_STRATUM_WELL], 3, 1e-15);
    assert_near_rel(c.df[UF_STRATUM_CELL], 7, 1e-15);
    double wells = 13 / 5.0 + 4 / 2.0 + 5 / 3.0 + 10 / 4.0; /* sum of n_well^2 / n_replicate */
    assert_near_rel(c.well_size, (14 - wells) / 3, 1e-14);
    assert_near_rel(c.replicate_well_size, (wells - 17 / 7.0 - 15 / 7.0) / 2, 1e-14);
    assert_near_rel(c.replicate_size, (14 - 29 / 7.0 - 25 / 7.0) / 2, 1e-14);
    double cell = c.variance_signed[UF_STRATUM_CELL], well = c.variance_signed[UF_STRATUM_WELL];
    assert_near_rel(cell + c.well_size * well, c.mean_square[UF_STRATUM_WELL], 1e-12);
    assert_near_rel(cell + c.replicate_well_size * well + c.replicate_size * c.variance_signed[UF_STRATUM_REPLICATE],
                    c.mean_square[UF_STRATUM_REPLICATE], 1e-12);
}

/* One well a replicate is one level: components, icc and design effect are those of the one-way analysis. */
static void test_one_well_each(void **state)
{
    (void)state;
    static const double values[] = {2.5, 3.25, 2.75, 6, 5.5, 6.25, 5, 9.5, 9, 10.25};
    static const int group[] = {0, 0, 0, 1, 1, 1, 1, 2, 2, 2};
    uf_nested_row rows[10];
    uf_components c;
    uf_one_way fit;
    for (int k = 0; k < 10; k++)
        rows[k] = (uf_nested_row){values[k], 0, group[k], 0};
    assert_int_equal(uf_components_fit(rows, 10, &c, NULL), UF_OK);
    assert_int_equal(uf_one_way_fit(values, group, 10, 3, 0.95, &fit, NULL), UF_OK);
    assert_true(isnan(c.variance[UF_STRATUM_WELL]) && c.notes == 0);
    assert_near_rel(c.icc_replicate, fit.icc, 1e-12);
    assert_near_rel(c.icc_well, fit.icc, 1e-12);
    assert_near_rel(c.replicate_size, fit.group_size, 1e-14);
    assert_near_rel(c.design_effect, 1 - fit.icc + fit.icc * 34 / 10, 1e-12);
}

static void test_negative_shown_as_zero(void **state)
{
    (void)state;
    uf_nested_row rows[12]; /* wells of like means, cells far apart */
    uf_components c;
    for (int k = 0; k < 12; k++)
        rows[k] = (uf_nested_row){10 + (k % 2 ? 3 : -3) + 0.01 * k * (k % 5), 0, k / 4, k / 2 % 2};
    assert_int_equal(uf_components_fit(rows, 12, &c, NULL), UF_OK);
    assert_true(c.variance[UF_STRATUM_WELL] == 0 && c.variance_signed[UF_STRATUM_WELL] < 0);
    assert_true(c.notes & UF_NOTE_NEGATIVE_AS_ZERO);
    assert_int_equal(uf_components_fit(rows, 1, &c, NULL), UF_OK);
    assert_true(c.notes & UF_NOTE_TOO_FEW && isnan(c.icc_replicate));
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_nist),
                                       cmocka_unit_test(test_shrout_and_fleiss),
                                       cmocka_unit_test(test_negative_icc_and_too_few),
                                       cmocka_unit_test(test_davies),
                                       cmocka_unit_test(test_unequal_sizes),
                                       cmocka_unit_test(test_one_well_each),
                                       cmocka_unit_test(test_negative_shown_as_zero)};
    return cmocka_run_group_tests_name("variance", tests, NULL, NULL);
}
