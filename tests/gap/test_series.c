/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A series of angles: closed forms, its own inverse for other fields, and the Cramer-Rao bound. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "gap/series.h"
#include "near.h"
#include "scene/random.h"

static const double substrate_n = 1.518;

static uf_series series_of(const double *angles, int count)
{
    uf_series series = {.count = count, .farthest_nm = UF_SERIES_FARTHEST_NM};
    for (int k = 0; k < count; k++) {
        series.na_effective[k] = uf_na_from_angle(angles[k], substrate_n);
        series.power[k] = 1;
        if (angles[k] < angles[series.widest])
            series.widest = k;
    }
    return series;
}

static uf_bench bench_of(double medium_n, double p_fraction)
{
    return (uf_bench){.wavelength_nm = 488,
                      .substrate_n = substrate_n,
                      .medium_n = medium_n,
                      .cell_n = 1.37,
                      .p_fraction = p_fraction};
}

static const double five[] = {71, 69, 73, 77, 75}, flat_weights[UF_SERIES_MOST] = {1, 1, 1, 1, 1, 1, 1, 1, 1};

/* ---- exact ----------------------------------------------------------------------------------- */

/* s polarized, 1.518 | 1.37, 488 nm, gap 100 nm, A = 1: T = 4 cos^2 / (1 - n^2), F = T exp(-gap / d), computed in another
 * language from the closed form. The line's slope against 1 / d is -100. */
static void test_closed_form(void **state)
{
    (void)state;
    static const double angles[] = {66, 67, 68, 69, 70, 71, 72, 73, 74};
    static const double fields[] = {3.567560, 3.292309, 3.026185, 2.769510, 2.522598, 2.285749, 2.059251, 1.843382,
                                    1.638403};
    static const double signals[] = {2.05101975, 1.62167934, 1.31868394, 1.08863535, 0.90677604,
                                     0.75925241, 0.63742223, 0.53549580, 0.44939404};
    uf_series series = series_of(angles, 9);
    uf_bench bench = bench_of(1.37, 0);
    uf_field_kind kind = {&bench, UF_FIELD_EXPONENTIAL, {0, 1000}};
    double field[UF_SERIES_MOST], slope[UF_SERIES_MOST], chi_square;
    uf_series_field(&series, &kind, 0, field, slope);
    for (int k = 0; k < 9; k++)
        assert_near_abs(field[k], fields[k], 1e-6);
    uf_series_field(&series, &kind, 100, field, slope);
    for (int k = 0; k < 9; k++)
        assert_near_abs(field[k], signals[k], 1e-8);
    assert_near_abs(uf_series_line(&series, &kind, signals), 100, 2e-5);
    assert_near_abs(uf_series_fit(&series, &kind, signals, flat_weights, &chi_square), 100, 5e-5);
    assert_near_abs(chi_square, 0, 1e-15);
}

/* A film of dye, t thick: F = T d (exp(-z / d) - exp(-(z + t) / d)). The line returns 102.480552 for 5 nm and 104.922216
 * for 10 nm (closed form, computed in another language): z plus about t / 2. */
static void test_thick_membrane(void **state)
{
    (void)state;
    static const double angles[] = {66, 67, 68, 69, 70, 71, 72, 73, 74}, thick[] = {5, 10};
    static const double found[] = {102.480552, 104.922216};
    uf_series series = series_of(angles, 9);
    uf_bench bench = bench_of(1.37, 0);
    uf_field_kind kind = {&bench, UF_FIELD_EXPONENTIAL, {0, 1000}};
    for (int j = 0; j < 2; j++) {
        double signal[UF_SERIES_MOST];
        for (int k = 0; k < 9; k++) {
            double d = uf_depth_nm(488, series.na_effective[k], 1.37);
            signal[k] = uf_interface_s(series.na_effective[k], substrate_n, 1.37) * d *
                        (exp(-100 / d) - exp(-(100 + thick[j]) / d));
        }
        assert_near_abs(uf_series_line(&series, &kind, signal), found[j], 1e-5);
    }
}

/* Signals made by a field, any amplitude and power, give their gap back: below 0 too, in every polarization, with stray
 * light. */
static void test_own_inverse(void **state)
{
    (void)state;
    static const double gaps[] = {-21.3, 0, 12.5, 47.3, 101.7, 139.9}, p_fractions[] = {0, 0.5, 1}, strays[] = {0, 0.06};
    static uf_series_table table;
    for (int j = 0; j < 12; j++) {
        uf_series series = series_of(five, 5);
        uf_bench bench = bench_of(1.337, p_fractions[j % 3]);
        uf_field_kind kind = {&bench, j < 6 ? UF_FIELD_LAYERED : UF_FIELD_EXPONENTIAL, {strays[j / 3 % 2], 1200}};
        for (int k = 0; k < 5; k++)
            series.power[k] = 1 + 0.37 * k;
        series.farthest_nm = uf_series_farthest(&series, &kind);
        uf_series_tabulate(&series, &kind, &table);
        for (int g = 0; g < 6; g++) {
            double signal[UF_SERIES_MOST], slope[UF_SERIES_MOST];
            float row[5], *rows[5] = {row, row + 1, row + 2, row + 3, row + 4}, one = 1, *ones[5], gap;
            uf_series_field(&series, &kind, gaps[g], signal, slope);
            for (int k = 0; k < 5; k++) {
                signal[k] *= 731.5;
                row[k] = (float)signal[k];
                ones[k] = &one;
            }
            assert_near_abs(uf_series_fit(&series, &kind, signal, flat_weights, NULL), gaps[g], 1e-4);
            uf_series_fit_row(&table, (const float *const *)rows, (const float *const *)ones, 1, &gap);
            assert_near_abs((double)gap, gaps[g], 0.01);
        }
    }
}

/* ---- noise ----------------------------------------------------------------------------------- */

enum { PIXELS = 20000 };

/* 1 sigma of the gap at best: from the Fisher information of amplitude and gap, its derivatives by plain differences of the
 * model. */
static double bound_of(const uf_series *series, const uf_field_kind *kind, double a, double gap, const double *sd)
{
    double here[UF_SERIES_MOST], up[UF_SERIES_MOST], down[UF_SERIES_MOST], slope[UF_SERIES_MOST];
    double faa = 0, fag = 0, fgg = 0;
    uf_series_field(series, kind, gap, here, slope);
    uf_series_field(series, kind, gap + 0.5, up, slope);
    uf_series_field(series, kind, gap - 0.5, down, slope);
    for (int k = 0; k < series->count; k++) {
        double by_gap = a * (up[k] - down[k]);
        faa += here[k] * here[k] / (sd[k] * sd[k]);
        fag += here[k] * by_gap / (sd[k] * sd[k]);
        fgg += by_gap * by_gap / (sd[k] * sd[k]);
    }
    return sqrt(faa / (faa * fgg - fag * fag));
}

static void test_spread_is_that_of_the_bound(void **state)
{
    (void)state;
    static uf_series_table table;
    static float signal[5][PIXELS], weight[5][PIXELS], gap[PIXELS], chi_square[PIXELS];
    const float *signals[5], *weights[5];
    uf_series series = series_of(five, 5);
    uf_bench bench = bench_of(1.337, 0);
    uf_field_kind kind = {&bench, UF_FIELD_LAYERED, {0, 1200}};
    uf_channel camera = {.noise = {.gain_e_per_adu = 2.17, .read_adu = 0.74, .excess2 = 1},
                         .background_adu = 120,
                         .background_sd_adu = 0.31};
    double truth = 63.2, a = 2000, field[UF_SERIES_MOST], slope[UF_SERIES_MOST], sd[5];
    uf_random random;
    uf_random_start(&random, 17, 1);
    uf_series_field(&series, &kind, truth, field, slope);
    for (int k = 0; k < 5; k++) {
        sd[k] = sqrt(uf_noise_variance(&camera.noise, 120 + a * field[k]));
        for (int x = 0; x < PIXELS; x++) {
            signal[k][x] = (float)(a * field[k] + sd[k] * uf_random_normal(&random));
            weight[k][x] = (float)(1 / (sd[k] * sd[k]));
        }
        signals[k] = signal[k];
        weights[k] = weight[k];
    }
    uf_series_tabulate(&series, &kind, &table);
    uf_series_fit_row(&table, signals, weights, PIXELS, gap);
    uf_series_chi_square_row(&table, signals, weights, PIXELS, gap, chi_square);
    double sum = 0, squares = 0, chi = 0, bound = bound_of(&series, &kind, a, truth, sd);
    for (int x = 0; x < PIXELS; x++) {
        sum += (double)gap[x] - truth;
        squares += ((double)gap[x] - truth) * ((double)gap[x] - truth);
        chi += 4 * (double)chi_square[x];
    }
    double bias = sum / PIXELS, spread = sqrt(squares / PIXELS - bias * bias);
    /* 20 000 draws fix a spread to 0.5 %; the fit is nonlinear, which adds the rest. */
    assert_near_rel(spread, bound, 0.03);
    assert_near_abs(bias, 0, 0.1 * bound);
    assert_near_rel(chi / PIXELS, 3, 0.02); /* 5 pages less 2 unknowns; its standard error is 0.017 */
    assert_near_rel(uf_series_noise_nm(&series, &kind, &camera, a * field[series.widest], truth), bound, 1e-3);
    /* Backgrounds: the gain of each page by differences of the scalar fit. */
    double by_background = 0, weight_of[5];
    for (int k = 0; k < 5; k++)
        weight_of[k] = 1 / (sd[k] * sd[k]);
    for (int k = 0; k < 5; k++) {
        double moved[5];
        for (int j = 0; j < 5; j++)
            moved[j] = a * field[j] + (j == k ? 0.31 : 0);
        double by = uf_series_fit(&series, &kind, moved, weight_of, NULL) - truth;
        by_background += by * by;
    }
    assert_near_rel(uf_series_background_nm(&series, &kind, &camera, a * field[series.widest], truth),
                    sqrt(by_background), 0.01);
}

/* ---- rows and ends --------------------------------------------------------------------------- */

/* Any cut of a row gives the same bytes; pixels without light have no gap; all others lie in the range. */
static void test_rows_of_any_length(void **state)
{
    (void)state;
    enum { N = 131 };
    static uf_series_table table;
    static float signal[5][N], weight[5][N], whole[N], part[N];
    uf_series series = series_of(five, 5);
    uf_bench bench = bench_of(1.337, 0.5);
    uf_field_kind kind = {&bench, UF_FIELD_LAYERED, {0, 1200}};
    uf_random random;
    uf_random_start(&random, 3, 1);
    for (int k = 0; k < 5; k++)
        for (int x = 0; x < N; x++) {
            signal[k][x] = (float)(40 + 9 * uf_random_normal(&random)) * (x == 7 ? 0.0f : 1.0f) - (x == 7 ? 5.0f : 0.0f);
            weight[k][x] = 0.01f + (float)(k + x % 3);
        }
    const float *signals[5], *weights[5];
    for (int k = 0; k < 5; k++) {
        signals[k] = signal[k];
        weights[k] = weight[k];
    }
    series.farthest_nm = 150;
    uf_series_tabulate(&series, &kind, &table);
    uf_series_fit_row(&table, signals, weights, N, whole);
    static const int cuts[] = {1, 63, 64, 65, 130};
    for (int c = 0; c < 5; c++) {
        const float *rest[5], *rest_weights[5];
        for (int k = 0; k < 5; k++) {
            rest[k] = signal[k] + cuts[c];
            rest_weights[k] = weight[k] + cuts[c];
        }
        uf_series_fit_row(&table, signals, weights, cuts[c], part);
        uf_series_fit_row(&table, rest, rest_weights, N - cuts[c], part + cuts[c]);
        assert_memory_equal(part, whole, sizeof whole);
    }
    for (int x = 0; x < N; x++)
        assert_true(x == 7 ? isnan(whole[x]) : whole[x] >= -100.0f && whole[x] <= 150.0f);
}

/* Where shapes turn back: largest angle between the vectors of square roots of relative page brightness over gaps, computed
 * in another language with its own layered field: 230, 180, 150, 120 nm for 2, 5, 10, 20 % of stray light of 1200 nm
 * depth, each to 10 nm and in a slightly different measure. */
static void test_where_stray_light_ends_it(void **state)
{
    (void)state;
    static const double fractions[] = {0, 0.02, 0.05, 0.1, 0.2}, ends[] = {500, 230, 180, 150, 120};
    uf_series series = series_of(five, 5);
    uf_bench bench = bench_of(1.337, 0);
    for (int j = 0; j < 5; j++) {
        uf_field_kind kind = {&bench, UF_FIELD_LAYERED, {fractions[j], 1200}};
        assert_near_abs(uf_series_farthest(&series, &kind), ends[j], 15);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_closed_form), cmocka_unit_test(test_thick_membrane), cmocka_unit_test(test_own_inverse),
        cmocka_unit_test(test_spread_is_that_of_the_bound), cmocka_unit_test(test_rows_of_any_length),
        cmocka_unit_test(test_where_stray_light_ends_it)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
