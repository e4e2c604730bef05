/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Missing, like, zero, negative and very large values, in any number: whatever comes in, a p lies in 0 .. 1, an interval holds its
 * estimate, and what has no interval says why (definitions). */
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "base/random.h"
#include "stats/bootstrap.h"
#include "stats/contrast.h"
#include "stats/dose.h"
#include "stats/many.h"
#include "stats/plate_quality.h"
#include "stats/ranks.h"
#include "stats/share.h"
#include "stats/variance.h"

enum { ROUNDS = 300, MOST = 40 };

static double odd_value(uf_random *random)
{
    static const double odd[] = {NAN, 0, -3, 5, 5, 5, 1e12, 1e-12};
    int k = uf_random_whole(random, 0, 30);
    return k < 8 ? odd[k] : 10 * uf_random_uniform(random);
}

static void check_p(double p)
{
    assert_true(isnan(p) || (p >= 0 && p <= 1));
}

/* A hair for what rounding does to sums and exponentials. */
static void check_interval(double low, double value, double high)
{
    double hair = 1e-9 * (1 + fabs(value));
    assert_true(isnan(low) || low <= value + hair);
    assert_true(isnan(high) || value <= high + hair);
}

static void check_contrast(const uf_contrast *c)
{
    check_p(c->p);
    check_interval(c->effect_low, c->effect, c->effect_high);
    check_interval(c->hedges_g_low, c->hedges_g, c->hedges_g_high);
    assert_true(!isnan(c->p) || c->notes || !c->n_treated || !c->n_control);
    assert_true(isnan(c->p) == isnan(c->effect_low));
}

static void test_contrasts(void **state)
{
    (void)state;
    uf_random random;
    uf_random_start(&random, 31, 0);
    for (int round = 0; round < ROUNDS; round++) {
        double x[MOST], y[MOST];
        uf_rank_test t;
        uf_scale scale = round % 2 ? UF_SCALE_RATIO : UF_SCALE_DIFFERENCE;
        uf_arm a = {x, (size_t)uf_random_whole(&random, 0, 9)}, b = {y, (size_t)uf_random_whole(&random, 0, 9)};
        for (int k = 0; k < MOST; k++) {
            x[k] = odd_value(&random);
            y[k] = odd_value(&random);
        }
        uf_contrast c = uf_welch(a, b, scale, 0.95);
        check_contrast(&c);
        assert_int_equal(uf_mann_whitney(a, b, scale, 0.95, UF_RANKS_LEAST, &t, NULL), UF_OK);
        check_p(t.p), check_p(t.p_above), check_p(t.p_below);
        check_interval(t.shift_low, t.shift, t.shift_high);
        assert_int_equal(uf_signed_rank(x, y, a.count, scale, 0.95, UF_RANKS_LEAST, &t, NULL), UF_OK);
        check_p(t.p), check_p(t.p_above), check_p(t.p_below);
        check_interval(t.shift_low, t.shift, t.shift_high);
    }
}

static void test_blocks_and_families(void **state)
{
    (void)state;
    uf_random random;
    uf_random_start(&random, 32, 0);
    for (int round = 0; round < ROUNDS / 3; round++) {
        uf_blocked_row rows[MOST];
        uf_blocked fit;
        uf_many many[5];
        uf_scale scale = round % 2 ? UF_SCALE_RATIO : UF_SCALE_DIFFERENCE;
        for (int k = 0; k < MOST; k++)
            rows[k] = (uf_blocked_row){scale == UF_SCALE_RATIO && round % 4 == 1 ? 1 + uf_random_uniform(&random)
                                                                                 : odd_value(&random),
                                       uf_random_whole(&random, 0, 6), uf_random_whole(&random, 0, 4)};
        size_t count = (size_t)uf_random_whole(&random, 0, MOST);
        assert_int_equal(uf_blocked_fit(rows, count, 7, 5, scale, &fit, NULL), UF_OK);
        assert_int_equal(uf_dunnett_blocked(&fit, UF_TWO_SIDED, 0.95, many, NULL, NULL), UF_OK);
        for (int g = 1; g < 5; g++) {
            uf_contrast c = uf_blocked_contrast(&fit, g, 0, 0.95);
            check_contrast(&c);
            check_p(many[g].p_adjusted);
            check_interval(many[g].low, c.estimate, many[g].high);
            assert_true(isnan(c.p) == isnan(many[g].p_adjusted));
            assert_true(isnan(c.p) || many[g].p_adjusted >= c.p - 1e-9);
        }
        uf_blocked_free(&fit);
    }
}

static void test_components(void **state)
{
    (void)state;
    uf_random random;
    uf_random_start(&random, 33, 0);
    for (int round = 0; round < ROUNDS; round++) {
        uf_nested_row rows[MOST];
        uf_components c;
        for (int k = 0; k < MOST; k++)
            rows[k] = (uf_nested_row){odd_value(&random), uf_random_whole(&random, 0, 1),
                                      uf_random_whole(&random, 0, 3), uf_random_whole(&random, 0, 2)};
        assert_int_equal(uf_components_fit(rows, (size_t)uf_random_whole(&random, 0, MOST), &c, NULL), UF_OK);
        check_p(c.icc_replicate), check_p(c.icc_well);
        assert_true(isnan(c.icc_well) || c.icc_replicate <= c.icc_well + 1e-12);
        assert_true(isnan(c.design_effect) || c.design_effect >= 1 - 1e-12);
        assert_true(!isnan(c.icc_well) || c.notes);
    }
}

static void test_doses(void **state)
{
    (void)state;
    uf_random random;
    int seen[6] = {0};
    uf_random_start(&random, 34, 0);
    for (int round = 0; round < ROUNDS; round++) {
        uf_dose_point points[MOST];
        uf_dose_fit fit;
        int doses = uf_random_whole(&random, 1, 8), rise = uf_random_whole(&random, 0, 3);
        for (int k = 0; k < MOST; k++) {
            int d = uf_random_whole(&random, 0, doses);
            double level = uf_random_whole(&random, 0, 60) ? uf_random_normal(&random) : odd_value(&random);
            points[k] = (uf_dose_point){d ? 0.01 * pow(3, d) : 0, level + rise * d};
        }
        size_t count = (size_t)uf_random_whole(&random, 0, MOST);
        assert_int_equal(uf_dose_fit_one(points, count, 0.05, 0.95, &fit, NULL), UF_OK);
        seen[fit.status]++;
        check_p(fit.effect_p), check_p(fit.misfit_p);
        check_interval(fit.ec50_low, pow(10, fit.log10_ec50), fit.ec50_high);
        assert_true((fit.status == UF_DOSE_OK) == (!isnan(fit.ec50_low) && !isnan(fit.ec50_high)));
        assert_true(isnan(fit.ec50) || (fit.ec50 >= fit.dose_min && fit.ec50 <= fit.dose_max));
        assert_true(fit.status != UF_DOSE_FLAT || fit.effect_p > 0.05);
    }
    for (int k = 0; k < 6; k++)
        assert_true(seen[k] > 0 || k == UF_DOSE_BELOW_RANGE);
}

static void test_plates_and_shares(void **state)
{
    (void)state;
    uf_random random;
    uf_random_start(&random, 35, 0);
    for (int round = 0; round < ROUNDS; round++) {
        double x[MOST], y[MOST], hits[MOST], trials[MOST];
        uf_plate_quality q;
        for (int k = 0; k < MOST; k++) {
            x[k] = odd_value(&random);
            y[k] = odd_value(&random);
            trials[k] = uf_random_whole(&random, 0, 30);
            hits[k] = floor(trials[k] * uf_random_uniform(&random));
        }
        size_t n = (size_t)uf_random_whole(&random, 0, 12);
        assert_int_equal(uf_plate_quality_of(x, n, y, (size_t)uf_random_whole(&random, 0, 12), 0.95, &q, NULL),
                         UF_OK);
        check_interval(q.z_prime.low, q.z_prime.value, q.z_prime.high);
        check_interval(q.ssmd_robust.low, q.ssmd_robust.value, q.ssmd_robust.high);
        check_interval(q.signal_window.low, q.signal_window.value, q.signal_window.high);
        uf_wells_share s = uf_share_of_wells(hits, trials, n, 0.95);
        check_p(s.share.low), check_p(s.share.high);
        check_interval(s.share.low, s.share.share, s.share.high);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_contrasts), cmocka_unit_test(test_blocks_and_families),
                                       cmocka_unit_test(test_components), cmocka_unit_test(test_doses),
                                       cmocka_unit_test(test_plates_and_shares)};
    return cmocka_run_group_tests_name("odd input", tests, NULL, NULL);
}
