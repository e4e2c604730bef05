/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Plate quality against worked figures, closed forms and plates made with known effects; planning against printed
 * tables. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "base/random.h"
#include "near.h"
#include "stats/planning.h"
#include "stats/plate_quality.h"

#define COUNT_OF(array) (sizeof array / sizeof array[0])

static uf_plate_quality quality_of(const double *control, size_t n, const double *positive, size_t m)
{
    uf_plate_quality q;
    assert_int_equal(uf_plate_quality_of(control, n, positive, m, 0.95, &q, NULL), UF_OK);
    return q;
}

/* By hand: means 100 and 10, sd 2 and sqrt(12/7); medians 100 and 10, median deviations 1.5 and 1. */
static void test_eight_and_eight(void **state)
{
    (void)state;
    static const double positive[] = {98, 102, 101, 99, 100, 103, 97, 100},
                        negative[] = {10, 12, 9, 11, 8, 10, 11, 9};
    uf_plate_quality q = quality_of(negative, 8, positive, 8);
    assert_near_abs(q.z_prime.value, 0.8896897553, 1e-9);
    assert_near_abs(q.z_prime_robust.value, 0.8764498151, 1e-9);
    assert_near_abs(q.ssmd.value, 37.6497011940, 1e-8);
    assert_near_abs(q.ssmd_robust.value, 33.6725637107, 1e-8);
    assert_near_rel(q.signal_window.value, (90 - 3 * (2 + 1.3093073414)) / 2, 1e-9);
    assert_true(q.verdict == UF_PLATE_GOOD && q.notes == 0);
    q = quality_of(positive, 8, negative, 8); /* the other way round only turns the sign of SSMD */
    assert_near_abs(q.z_prime.value, 0.8896897553, 1e-9);
    assert_near_abs(q.ssmd.value, -37.6497011940, 1e-8);
}

/* Closed form: unit sd, separation 6, 12, 18 gives Z' 0, 1/2, 2/3, and SSMD 12 / sqrt 2 (Zhang, Chung and Oldenburg
 * 1999; Zhang 2007). */
static void test_separations(void **state)
{
    (void)state;
    double low[12], high[12], unit = sqrt(11 / 12.0);
    static const double z[] = {0, 0.5, 2 / 3.0};
    for (int k = 0; k < 3; k++) {
        for (int j = 0; j < 12; j++) {
            low[j] = 2.385 + (j % 2 ? unit : -unit);
            high[j] = low[j] + 6 * (k + 1);
        }
        uf_plate_quality q = quality_of(low, 12, high, 12);
        assert_near_abs(q.z_prime.value, z[k], 1e-12);
        assert_true(q.z_prime.low < z[k] && z[k] < q.z_prime.high && q.z_prime.high < 1);
        assert_near_rel(q.ssmd.value, 6 * (k + 1) / sqrt(2), 1e-12);
    }
}

static void test_no_verdict(void **state)
{
    (void)state;
    static const double few[] = {1, 2, 3, 2, 1, 2, 3}, many[] = {11, 12, 13, 12, 11, 12, 13, 14, NAN},
                        same[] = {5, 5, 5};
    uf_plate_quality q = quality_of(few, 7, many, 9);
    assert_true(q.verdict == UF_PLATE_NO_VERDICT && (q.notes & UF_NOTE_TOO_FEW) && !isnan(q.z_prime.value));
    assert_int_equal(q.n_positive, 8);
    q = quality_of(few, 1, many, 8);
    assert_true(isnan(q.z_prime.value) && isnan(q.ssmd.value));
    q = quality_of(same, 3, same, 3);
    assert_true(isnan(q.z_prime.value) && isnan(q.ssmd.value) && (q.notes & UF_NOTE_NO_SPREAD));
}

/* The intervals hold the truth as often as they say, give or take what propagation costs (simulated, fixed seed:
 * 2000 plates of 16 + 16 wells; unlike spreads). */
static void test_intervals_hold(void **state)
{
    (void)state;
    enum { PLATES = 2000, N = 16 };
    uf_random random;
    int held[5] = {0};
    double z = 1 - 3 * 3.5 / 20, ssmd = -20 / sqrt(1.5 * 1.5 + 4), window = (20 - 3 * 3.5) / 2;
    uf_random_start(&random, 20260, 0);
    for (int k = 0; k < PLATES; k++) {
        double control[N], positive[N];
        for (int j = 0; j < N; j++) {
            control[j] = 30 + 2 * uf_random_normal(&random);
            positive[j] = 10 + 1.5 * uf_random_normal(&random);
        }
        uf_plate_quality q = quality_of(control, N, positive, N);
        const uf_index all[] = {q.z_prime, q.z_prime_robust, q.ssmd, q.ssmd_robust, q.signal_window};
        const double truth[] = {z, z, ssmd, ssmd, window};
        for (int j = 0; j < 5; j++)
            held[j] += all[j].low <= truth[j] && truth[j] <= all[j].high;
    }
    for (int j = 0; j < 5; j++) {
        (void)printf("index %d: %.1f %%\n", j, 100.0 * held[j] / PLATES);
        assert_true(held[j] > 0.90 * PLATES && held[j] < 0.98 * PLATES);
    }
}

/* ---- places ------------------------------------------------------------------------------------- */

enum { ROWS = 8, COLUMNS = 12 };

static double value_at(int row, int column, int treatment, uf_random *random)
{
    int rim = row == 0 || row == ROWS - 1 || column == 0 || column == COLUMNS - 1;
    return 100 + 15.0 * treatment + (rim ? 9 : 0) + (row == 3 ? -14 : 0) + uf_random_normal(random);
}

/* Treatments scattered over the plate (like a Latin square): what was put in comes out, within four standard
 * errors. */
static void test_scattered_layout(void **state)
{
    (void)state;
    uf_plate_well wells[ROWS * COLUMNS];
    uf_place_effects e;
    uf_random random;
    uf_random_start(&random, 5, 0);
    for (int k = 0; k < ROWS * COLUMNS; k++) {
        int row = k / COLUMNS, column = k % COLUMNS, treatment = (5 * row + column) % 6;
        wells[k] = (uf_plate_well){value_at(row, column, treatment, &random), row, column, treatment};
    }
    assert_int_equal(uf_place_effects_of(wells, ROWS * COLUMNS, ROWS, COLUMNS, 6, &e, NULL), UF_OK);
    assert_true(!e.row.confounded && !e.column.confounded && !e.edge.confounded && e.notes == 0);
    assert_int_equal(e.row.where, 3);
    assert_true(e.row.effect < -9 && e.row.effect > -19 && e.row.sigma < -4);
    assert_near_abs(e.edge.effect, 9, 2);
    assert_true(e.edge.sigma > 4);
}

/* One treatment a row: rows and treatments are one. All controls at the rim and samples inside: no edge effect can
 * be told. */
static void test_confounded_layouts(void **state)
{
    (void)state;
    uf_plate_well wells[ROWS * COLUMNS];
    uf_place_effects e;
    uf_random random;
    uf_random_start(&random, 6, 0);
    for (int k = 0; k < ROWS * COLUMNS; k++) {
        int row = k / COLUMNS, column = k % COLUMNS;
        wells[k] = (uf_plate_well){value_at(row, column, row, &random), row, column, row};
    }
    assert_int_equal(uf_place_effects_of(wells, ROWS * COLUMNS, ROWS, COLUMNS, ROWS, &e, NULL), UF_OK);
    assert_true(e.row.confounded && isnan(e.row.effect) && !e.column.confounded && (e.notes & UF_NOTE_CONFOUNDED));
    for (int k = 0; k < ROWS * COLUMNS; k++) {
        int row = k / COLUMNS, column = k % COLUMNS;
        int rim = row == 0 || row == ROWS - 1 || column == 0 || column == COLUMNS - 1;
        wells[k].treatment = rim ? k % 2 : 2 + k % 3;
    }
    assert_int_equal(uf_place_effects_of(wells, ROWS * COLUMNS, ROWS, COLUMNS, 5, &e, NULL), UF_OK);
    assert_true(e.edge.confounded && isnan(e.edge.effect));
    assert_int_equal(uf_place_effects_of(wells, 0, ROWS, COLUMNS, 5, &e, NULL), UF_OK);
    assert_true(e.row.confounded && isnan(e.residual_sd));
}

/* ---- planning ----------------------------------------------------------------------------------- */

static int needed(double effect, double power, int paired, double variance)
{
    uf_plan plan = {UF_SCALE_DIFFERENCE, effect, power, 0.95, paired, variance, NAN};
    return uf_plan_replicates(&plan).replicates;
}

/* Cohen 1988, table 2.4.1 (two-sided 5 %): standardised 0.2, 0.5, 0.8 and 1.0 at power 0.80 need 393, 64, 26 and 17
 * an arm, 0.5 at 0.90 needs 85 (from memory). Cohen's 393 comes of his approximation; the exact test needs 394. */
static void test_cohen(void **state)
{
    (void)state;
    assert_int_equal(needed(0.2, 0.8, 0, 1), 394);
    assert_int_equal(needed(0.5, 0.8, 0, 1), 64);
    assert_int_equal(needed(0.8, 0.8, 0, 1), 26);
    assert_int_equal(needed(1.0, 0.8, 0, 1), 17);
    assert_int_equal(needed(0.5, 0.9, 0, 1), 86); /* 85 gives 0.8994 */
    assert_int_equal(needed(0.5, 0.8, 1, 0.5),
                     34); /* pairs whose difference has unit variance: table 2.4.1 adapted, 33.4 */
    assert_int_equal(needed(0.001, 0.8, 0, 1), 0);
}

/* No effect at all is seen as often as the level says; the sign of a difference, and which way a ratio goes, do not
 * matter. */
static void test_power_limits(void **state)
{
    (void)state;
    uf_plan none = {UF_SCALE_RATIO, 1, 0.8, 0.95, 0, 0.02, NAN}, up = {UF_SCALE_RATIO, 1.25, 0.8, 0.95, 0, 0.02, 4};
    uf_plan down = up;
    down.detect = 1 / 1.25;
    assert_near_abs(uf_plan_power(&none, 0.02, 5), 0.05, 1e-9);
    assert_near_rel(uf_plan_power(&up, 0.02, 5), uf_plan_power(&down, 0.02, 5), 1e-10);
    uf_plan_answer a = uf_plan_replicates(&up);
    assert_true(a.power >= 0.8 && uf_plan_power(&up, 0.02, a.replicates - 1) < 0.8);
    assert_near_rel(a.variance_upper, 0.02 * 4 / 1.648777,
                    1e-6); /* chi-square of 4 degrees, 20 %: any table has 1.649 */
    assert_true(a.replicates_upper > a.replicates && a.power_upper >= 0.8);
    assert_near_abs(uf_plan_power(&up, 1e-9, 3), 1, 1e-12);
    assert_true(isnan(uf_plan_power(&up, 0, 3)) && isnan(uf_plan_power(&up, 1, 1)));
}

/* Davies' nested mean squares again: more wells and cells shrink their parts only (definition). */
static void test_plan_variance(void **state)
{
    (void)state;
    uf_components c = {.mean = 4,
                       .mean_square = {10, 3, 2},
                       .df = {4, 10, 45},
                       .well_size = 4,
                       .replicate_well_size = 4,
                       .replicate_size = 12,
                       .variance = {7.0 / 12, 0.25, 2},
                       .variance_signed = {7.0 / 12, 0.25, 2}};
    double df;
    assert_near_rel(uf_plan_variance(&c, UF_SCALE_DIFFERENCE, 3, 4, &df), 10.0 / 12, 1e-12);
    assert_near_rel(df, 4, 1e-9);
    assert_near_rel(uf_plan_variance(&c, UF_SCALE_RATIO, 6, 10, &df), (7.0 / 12 + 0.25 / 6 + 2 / 60.0) / 16, 1e-12);
    assert_true(df > 1 && df < 4);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_eight_and_eight),
                                       cmocka_unit_test(test_separations),
                                       cmocka_unit_test(test_no_verdict),
                                       cmocka_unit_test(test_intervals_hold),
                                       cmocka_unit_test(test_scattered_layout),
                                       cmocka_unit_test(test_confounded_layouts),
                                       cmocka_unit_test(test_cohen),
                                       cmocka_unit_test(test_power_limits),
                                       cmocka_unit_test(test_plan_variance)};
    return cmocka_run_group_tests_name("plates and planning", tests, NULL, NULL);
}
