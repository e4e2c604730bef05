/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Dose curves against a published fit, curves without noise, and every status. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "base/random.h"
#include "fit/distribution.h"
#include "near.h"
#include "stats/dose.h"

#define COUNT_OF(array) (sizeof array / sizeof array[0])

/* Inderjit, Streibig and Olofsdotter 2002, Physiol. Plant. 114:422: root length (cm) of ryegrass under ferulic acid
 * (mM). */
static const uf_dose_point ryegrass[] = {
    {0, 7.58},      {0, 8},         {0, 8.3286},    {0, 7.25},      {0, 7.375},    {0, 7.9625},
    {0.94, 8.3556}, {0.94, 6.9143}, {0.94, 7.75},   {1.88, 6.8714}, {1.88, 6.45},  {1.88, 5.9222},
    {3.75, 1.925},  {3.75, 2.8857}, {3.75, 4.2333}, {7.5, 1.1875},  {7.5, 0.8571}, {7.5, 1.0571},
    {15, 0.6875},   {15, 0.525},    {15, 0.825},    {30, 0.25},     {30, 0.22},    {30, 0.44}};

static uf_dose_fit fit_of(const uf_dose_point *points, size_t count)
{
    uf_dose_fit fit;
    assert_int_equal(uf_dose_fit_one(points, count, 0.05, 0.95, &fit, NULL), UF_OK);
    return fit;
}

/* Ritz, Baty, Streibig and Gerhard 2015, PLoS ONE 10:e0146021, fit these data: the R package drc prints ED50
 * 3.057955 and residual sum 5.400215, which is 5e-6 from the optimum; that was computed with 40 digits, and so were
 * the standard errors. */
static void test_ryegrass(void **state)
{
    (void)state;
    uf_dose_fit fit = fit_of(ryegrass, COUNT_OF(ryegrass));
    assert_int_equal(fit.status, UF_DOSE_OK);
    assert_near_rel(fit.ec50, 3.057955, 1e-5);
    assert_near_rel(fit.ec50, 3.05794083190, 1e-6);
    assert_near_rel(fit.hill_slope, 2.98223694518, 1e-6);
    assert_near_rel(fit.full, 0.481405854021, 1e-6);
    assert_near_rel(fit.zero, 7.79297013231, 1e-6);
    assert_near_rel(fit.rss, 5.40021543946, 1e-9);
    assert_near_rel(fit.residual_sd, 0.5196256075, 1e-9);
    assert_near_rel(fit.hill_slope_se, 0.458428288, 1e-4);
    assert_near_rel(fit.full_se, 0.209505420, 1e-4);
    assert_near_rel(fit.zero_se, 0.189733306, 1e-4);
    assert_near_rel(fit.log10_ec50_se * fit.ec50 * log(10), 0.185827498, 1e-4);
    assert_near_rel(fit.df, 20, 1e-15);
    assert_true(fit.direction == -1 && fit.doses == 6 && fit.notes == 0 && fit.effect_p < 1e-10);
}

/* The profile interval by its definition: at each end the best curve with the EC50 held there has the sum that F
 * allows. The inner search here is a plain grid refined around its best, plateaus by two sums. */
static double best_sum_at(double log10_ec50)
{
    double low = log(0.3), high = log(12), best = INFINITY, at = 0;
    for (int round = 0; round < 30; round++) {
        double step = (high - low) / 24;
        for (int k = 0; k <= 24; k++) {
            double h = exp(low + k * step), g1 = 0, gg = 0, gy = 0, y1 = 0, yy = 0, n = 24;
            for (size_t i = 0; i < 24; i++) {
                double g = ryegrass[i].dose > 0 ? 1 / (1 + pow(pow(10, log10_ec50) / ryegrass[i].dose, h)) : 0;
                double y = ryegrass[i].response;
                g1 += g, gg += g * g, gy += g * y, y1 += y, yy += y * y;
            }
            double rise = (gy - g1 * y1 / n) / (gg - g1 * g1 / n);
            double sum = yy - y1 * y1 / n - rise * (gy - g1 * y1 / n);
            if (sum < best) {
                best = sum;
                at = log(h);
            }
        }
        low = at - 2 * step;
        high = at + 2 * step;
    }
    return best;
}

static void test_profile_interval(void **state)
{
    (void)state;
    uf_dose_fit fit = fit_of(ryegrass, COUNT_OF(ryegrass));
    double limit = fit.rss * (1 + uf_f_quantile(0.95, 1, 20) / 20);
    assert_true(fit.ec50_low < fit.ec50 && fit.ec50 < fit.ec50_high);
    assert_near_rel(best_sum_at(log10(fit.ec50_low)), limit, 1e-7);
    assert_near_rel(best_sum_at(log10(fit.ec50_high)), limit, 1e-7);
}

/* ---- invented curves ------------------------------------------------------------------------------ */

static size_t make(uf_dose_point *points, double zero, double full, double ec50, double slope, double noise,
                   int doses, double lowest, double ratio, uint64_t seed)
{
    uf_random random;
    size_t n = 0;
    uf_random_start(&random, seed, 0);
    for (int k = 0; k < 8; k++)
        points[n++] = (uf_dose_point){0, zero + noise * uf_random_normal(&random)};
    for (int d = 0; d < doses; d++)
        for (int k = 0; k < 3; k++) {
            double dose = lowest * pow(ratio, d), gone = 1 / (1 + pow(ec50 / dose, slope));
            points[n++] = (uf_dose_point){dose, zero + (full - zero) * gone + noise * uf_random_normal(&random)};
        }
    return n;
}

/* Without noise what went in comes out (closed form), rising or falling, whatever the units. */
static void test_curves_without_noise(void **state)
{
    (void)state;
    uf_dose_point points[64];
    static const double cases[][4] = {
        {120.5, 31.25, 0.4, 1.3}, {2.385, 9.75, 35, 0.8}, {-4, 18, 3.3e-9, 2.7}, {1e6, 5e6, 2.2e4, 1.1}};
    for (size_t k = 0; k < COUNT_OF(cases); k++) {
        const double *c = cases[k];
        size_t n = make(points, c[0], c[1], c[2], c[3], 0, 8, c[2] / 40, 3, 1);
        uf_dose_fit fit = fit_of(points, n);
        assert_near_rel(fit.zero, c[0], 1e-6);
        assert_near_rel(fit.full, c[1], 1e-6);
        assert_near_rel(pow(10, fit.log10_ec50), c[2], 1e-6);
        assert_near_rel(fit.hill_slope, c[3], 1e-6);
        assert_int_equal(fit.direction, c[1] > c[0] ? 1 : -1);
        assert_near_rel(fit.bottom, fmin(c[0], c[1]), 1e-6);
    }
}

static void test_few_doses_hold_the_slope(void **state)
{
    (void)state;
    uf_dose_point points[64];
    uf_dose_fit fit = fit_of(points, make(points, 10, 50, 2, 1, 0.5, 4, 0.25, 4, 5));
    assert_true(fit.notes & UF_NOTE_SLOPE_FIXED && fit.hill_slope == 1 && isnan(fit.hill_slope_se));
    assert_int_equal(fit.status, UF_DOSE_OK);
    assert_true(fit.ec50_low < 2 && 2 < fit.ec50_high);
    assert_near_rel(fit.df, 8 + 12 - 3, 1e-15);
}

static void test_flat_and_no_fit(void **state)
{
    (void)state;
    uf_dose_point points[64];
    uf_dose_fit fit = fit_of(points, make(points, 10, 10, 2, 1, 0.5, 7, 0.1, 3, 3));
    assert_int_equal(fit.status, UF_DOSE_FLAT);
    assert_true(fit.effect_p > 0.05 && isnan(fit.ec50) && isnan(fit.log10_ec50) && fit.direction == 0);
    for (int k = 0; k < 20; k++)
        points[k].response = 3;
    assert_int_equal(fit_of(points, 20).status, UF_DOSE_FLAT);
    const uf_dose_point few[] = {{0, 1}, {0, 1.1}, {0, 0.9}, {0, 1.05}, {5, 9}, {5, 9.5}};
    assert_int_equal(fit_of(few, 6).status, UF_DOSE_NO_FIT);
    assert_int_equal(fit_of(few, 0).status, UF_DOSE_NO_FIT);
}

static void test_out_of_range(void **state)
{
    (void)state;
    uf_dose_point points[64];
    uf_dose_fit fit = fit_of(points, make(points, 10, 110, 40, 1.5, 0.7, 7, 0.02, 3, 7)); /* highest 14.6 */
    assert_int_equal(fit.status, UF_DOSE_ABOVE_RANGE);
    assert_true(isnan(fit.ec50) && isnan(fit.ec50_high) && fit.ec50_low > 5 && fit.ec50_low < 40);
    fit = fit_of(points, make(points, 10, 110, 0.004, 1.2, 1, 7, 0.02, 3, 8));
    assert_int_equal(fit.status, UF_DOSE_BELOW_RANGE);
    assert_true(isnan(fit.ec50) && isnan(fit.ec50_low) && fit.ec50_high < 0.02 && fit.ec50_high > 0.004);
}

/* Half of the effect near the top dose, noise that hides the plateau: a bound below, none above. */
static void test_not_bracketed(void **state)
{
    (void)state;
    uf_dose_point points[64];
    int seen = 0;
    for (uint64_t seed = 1; seed <= 40; seed++) {
        uf_dose_fit fit = fit_of(points, make(points, 10, 110, 9, 1.2, 8, 7, 0.02, 3, seed));
        if (fit.status == UF_DOSE_NOT_BRACKETED) {
            seen++;
            assert_true(isnan(fit.ec50_high) && fit.ec50_low < fit.ec50 && fit.ec50 <= fit.dose_max);
        }
    }
    assert_true(seen > 0);
}

/* No dose twice: the curve is tested against a constant; F written out from sums of squares. */
static void test_no_repeats(void **state)
{
    (void)state;
    static const uf_dose_point points[] = {{0, 10.5}, {0.1, 11}, {0.3, 12.25}, {1, 17},
                                           {3, 27.5}, {10, 36},  {30, 38.5}};
    uf_dose_fit fit = fit_of(points, COUNT_OF(points));
    double mean = 0, constant = 0;
    for (size_t k = 0; k < COUNT_OF(points); k++)
        mean += points[k].response / 7;
    for (size_t k = 0; k < COUNT_OF(points); k++)
        constant += pow(points[k].response - mean, 2);
    assert_true(fit.notes & UF_NOTE_NO_PURE_ERROR);
    assert_near_rel(fit.effect_f, (constant - fit.rss) / 3 / (fit.rss / 3), 1e-10);
    assert_int_equal(fit.status, UF_DOSE_OK);
}

/* A step between two doses has no slope: it ends at the limit and says so; the EC50 lies between the two. */
static void test_step(void **state)
{
    (void)state;
    uf_dose_point points[64];
    uf_dose_fit fit = fit_of(points, make(points, 10, 50, 0.31, 60, 0.5, 7, 0.02, 3, 2));
    assert_true(fit.notes & UF_NOTE_SLOPE_AT_LIMIT);
    assert_true(pow(10, fit.log10_ec50) > 0.18 && pow(10, fit.log10_ec50) < 0.54);
}

/* A hump is no Hill curve: F of what the curve leaves, written out from the pure error. The curve of test_ryegrass
 * passes. */
static void test_misfit(void **state)
{
    (void)state;
    uf_dose_point points[64];
    size_t n = make(points, 10, 50, 0.3, 1.2, 1, 7, 0.02, 3, 4);
    for (size_t k = n - 6; k < n; k++)
        points[k].response -= 25; /* the two highest doses fall again */
    uf_dose_fit fit = fit_of(points, n);
    double pure = 0;
    for (size_t k = 0; k < n; k++) {
        double mean = 0, alike = 0;
        for (size_t j = 0; j < n; j++)
            if (points[j].dose == points[k].dose) {
                mean += points[j].response;
                alike++;
            }
        pure += pow(points[k].response - mean / alike, 2);
    }
    double f = (fit.rss - pure) / 4 / (pure / (double)(n - 8));
    assert_near_rel(fit.misfit_p, uf_f_above(f, 4, (double)n - 8), 1e-9);
    assert_true(fit.misfit_p < 1e-6 && (fit.notes & UF_NOTE_MISFIT));
    fit = fit_of(ryegrass, COUNT_OF(ryegrass));
    assert_true(fit.misfit_p > 0.05 && !(fit.notes & UF_NOTE_MISFIT));
}

/* ---- over replicates ------------------------------------------------------------------------------ */

static uf_dose_fit replicate(uf_dose_status status, double ec50)
{
    uf_dose_fit fit = {
        .status = status, .log10_ec50 = log10(ec50), .hill_slope = 1.5, .dose_min = 0.1, .dose_max = 100};
    return fit;
}

/* By hand: logarithms 0, 0.5, 1, 0.5: mean 0.5, sd sqrt(1/6); t of 3 degrees at 95 % is 3.182446 (any table). */
static void test_combined(void **state)
{
    (void)state;
    uf_dose_fit fits[] = {replicate(UF_DOSE_OK, 1), replicate(UF_DOSE_OK, sqrt(10)), replicate(UF_DOSE_OK, 10),
                          replicate(UF_DOSE_OK, sqrt(10)), replicate(UF_DOSE_FLAT, NAN)};
    uf_dose_combined c = uf_dose_combine(fits, 5, 0.95);
    double half = 3.182446305284 * sqrt(1 / 6.0) / 2;
    assert_int_equal(c.status, UF_DOSE_OK);
    assert_true(c.used == 4 && c.replicates == 5 && c.notes == 0);
    assert_near_rel(c.ec50, pow(10, 0.5), 1e-12);
    assert_near_rel(c.ec50_low, pow(10, 0.5 - half), 1e-9);
    assert_near_rel(c.ec50_high, pow(10, 0.5 + half), 1e-9);
    assert_near_rel(c.hill_slope, 1.5, 1e-12);
    c = uf_dose_combine(fits, 2, 0.95);
    assert_true(isnan(c.ec50_low) && c.notes == UF_NOTE_TOO_FEW && c.ec50 > 1);
    fits[0] = fits[1] = fits[2] = fits[4];
    assert_int_equal(uf_dose_combine(fits, 5, 0.95).status, UF_DOSE_FLAT);
}

static void test_combined_with_bounds(void **state)
{
    (void)state;
    uf_dose_fit fits[] = {replicate(UF_DOSE_OK, 40), replicate(UF_DOSE_OK, 80), replicate(UF_DOSE_OK, 60),
                          replicate(UF_DOSE_ABOVE_RANGE, 3000)};
    uf_dose_combined c = uf_dose_combine(fits, 4, 0.95);
    assert_int_equal(c.status, UF_DOSE_NOT_BRACKETED);
    assert_true(isnan(c.ec50) && isnan(c.ec50_high) && c.ec50_low > 20 && c.ec50_low < 80);
    assert_int_equal(c.notes, UF_NOTE_CENSORED);
    fits[1] = fits[3];
    assert_int_equal(uf_dose_combine(fits, 4, 0.95).status, UF_DOSE_ABOVE_RANGE);
    fits[2] = replicate(UF_DOSE_BELOW_RANGE, 0.001);
    c = uf_dose_combine(fits, 4, 0.95);
    assert_true(c.status == UF_DOSE_NOT_BRACKETED && isnan(c.ec50_low) && isnan(c.ec50_high));
}

static void test_words(void **state)
{
    (void)state;
    assert_string_equal(uf_dose_status_word(UF_DOSE_OK), "ok");
    assert_string_equal(uf_dose_status_word(UF_DOSE_NOT_BRACKETED), "not-bracketed");
    assert_string_equal(uf_dose_status_word(UF_DOSE_NO_FIT), "no-fit");
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_ryegrass),
                                       cmocka_unit_test(test_profile_interval),
                                       cmocka_unit_test(test_curves_without_noise),
                                       cmocka_unit_test(test_few_doses_hold_the_slope),
                                       cmocka_unit_test(test_flat_and_no_fit),
                                       cmocka_unit_test(test_out_of_range),
                                       cmocka_unit_test(test_not_bracketed),
                                       cmocka_unit_test(test_no_repeats),
                                       cmocka_unit_test(test_step),
                                       cmocka_unit_test(test_misfit),
                                       cmocka_unit_test(test_combined),
                                       cmocka_unit_test(test_combined_with_bounds),
                                       cmocka_unit_test(test_words)};
    return cmocka_run_group_tests_name("dose curves", tests, NULL, NULL);
}
