/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The evanescent field against published formulas and figures. "Exact" values are the formulas evaluated with
 * extended precision outside this program. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "near.h"
#include "optics/decay.h"

static double depth_at(double wavelength, double n1, double n2, double angle)
{
    return uf_depth_nm(wavelength, uf_na_from_angle(angle, n1), n2);
}

/* depth = wavelength / (4 pi sqrt(n1^2 sin^2 - n2^2)), theta_c = asin(n2 / n1): exact grid. */
static void test_depth_grid(void **state)
{
    (void)state;
    static const double grid[][6] = {
        {488, 1.518, 1.33, 62, 61.181708, 233.994583},  {488, 1.518, 1.33, 65, 61.181708, 110.344039},
        {488, 1.518, 1.33, 70, 61.181708, 75.314026},   {488, 1.518, 1.33, 75, 61.181708, 62.908778},
        {488, 1.518, 1.33, 80, 61.181708, 56.891175},   {488, 1.518, 1.37, 65, 64.489090, 308.384949},
        {488, 1.518, 1.37, 70, 64.489090, 97.737476},   {488, 1.518, 1.37, 75, 64.489090, 74.315274},
        {405, 1.518, 1.33, 70, 61.181708, 62.504468},   {561, 1.518, 1.33, 70, 61.181708, 86.580263},
        {640, 1.518, 1.33, 70, 61.181708, 98.772493},   {488, 1.78, 1.33, 60, 48.347637, 49.827898},
        {488, 1.46, 1.33, 75, 65.638203, 82.810917},    {514.5, 1.46, 1.33, 75, 65.638203, 87.307821}};
    for (size_t k = 0; k < sizeof grid / sizeof grid[0]; k++) {
        const double *g = grid[k];
        assert_near_abs(uf_critical_angle_deg(g[1], g[2]), g[4], 1e-6);
        assert_near_rel(depth_at(g[0], g[1], g[2], g[3]), g[5], 1e-6);
    }
}

static void test_depth_by_aperture(void **state)
{
    (void)state;
    static const double n2[] = {1.33, 1.337, 1.36, 1.37, 1.38, 1.40};
    static const double at_145[] = {67.235237, 69.199388, 77.221022, 81.759911, 87.250459, 102.873265};
    static const double at_149[] = {57.812988, 59.047476, 63.799291, 66.288214, 69.115056, 76.144718};
    for (int k = 0; k < 6; k++) {
        assert_near_rel(uf_depth_nm(488, 1.45, n2[k]), at_145[k], 1e-6);
        assert_near_rel(uf_depth_nm(488, 1.49, n2[k]), at_149[k], 1e-6);
    }
}

/* Worked answers of a biophysics textbook's chapter on light microscopy (title from memory): a 1.49 NA oil lens in
 * 1.515 reaches 79.6 deg, and at 561 nm in 1.33 no depth below 66 nm. */
static void test_worked_answers(void **state)
{
    (void)state;
    assert_near_abs(uf_angle_from_na(1.49, 1.515), 79.6, 0.05);
    assert_near_abs(uf_depth_nm(561, 1.49, 1.33), 66, 0.5);
}

/* Angles quoted in Axelrod's reviews (values from memory): fused silica 1.46 on water 65.7, glass 1.52 on 1.38 65.2. */
static void test_textbook_angles(void **state)
{
    (void)state;
    assert_near_abs(uf_critical_angle_deg(1.46, 1.33), 65.7, 0.1);
    assert_near_abs(uf_critical_angle_deg(1.52, 1.38), 65.2, 0.1);
    /* closed form: NA 1.42 in 1.52 */
    assert_near_abs(uf_angle_from_na(1.42, 1.52), 69.10, 0.005);
}

static void test_nothing_below_the_critical_angle(void **state)
{
    (void)state;
    assert_true(isnan(depth_at(445, 1.52, 1.33, 61))); /* critical at 61.044976 deg */
    assert_true(isnan(uf_critical_angle_deg(1.33, 1.37)));
    assert_true(isnan(uf_interface_s(1.30, 1.518, 1.33)));
    assert_true(isnan(uf_na_from_angle(91, 1.5)));
    uf_error error;
    uf_bench bench = {.wavelength_nm = 488, .substrate_n = 1.518, .medium_n = 1.337, .cell_n = 1.37,
                      .na_effective = 1.30, .objective_na = (double)NAN, .depth_sd_nm = (double)NAN};
    assert_int_equal(uf_bench_check(&bench, &error), UF_INPUT);
    bench.na_effective = 1.42;
    assert_int_equal(uf_bench_check(&bench, &error), UF_OK);
}

/* I_s, I_p of Axelrod, Burghardt and Thompson 1984, exact. */
static void test_interface_intensities(void **state)
{
    (void)state;
    static const double rows[][5] = {{1.518, 1.33, 62, 3.794235492, 4.920214562}, {1.518, 1.33, 65, 3.074696256, 3.932265293},
                                     {1.518, 1.33, 70, 2.013766304, 2.534647433}, {1.518, 1.33, 75, 1.153182814, 1.436761246},
                                     {1.518, 1.37, 70, 2.522597723, 3.047104103}, {1.46, 1.33, 75, 1.574746343, 1.859671451}};
    for (size_t k = 0; k < sizeof rows / sizeof rows[0]; k++) {
        double na = uf_na_from_angle(rows[k][2], rows[k][0]);
        assert_near_rel(uf_interface_s(na, rows[k][0], rows[k][1]), rows[k][3], 1e-8);
        assert_near_rel(uf_interface_p(na, rows[k][0], rows[k][1]), rows[k][4], 1e-8);
    }
    /* at the critical angle I_s is 4 whatever the indices (closed form) */
    assert_near_abs(uf_interface_s(1.33, 1.518, 1.33), 4, 1e-12);
}

static uf_bench three_layers(double p_fraction)
{
    return (uf_bench){.wavelength_nm = 488, .substrate_n = 1.518, .medium_n = 1.335, .cell_n = 1.37,
                      .na_effective = uf_na_from_angle(70, 1.518), .p_fraction = p_fraction,
                      .objective_na = (double)NAN, .depth_sd_nm = (double)NAN};
}

/* Glass | water gap | cytoplasm, s polarized, at the cytoplasm's boundary: thin-film matrix, computed outside. */
static void test_three_layers(void **state)
{
    (void)state;
    uf_bench s = three_layers(0), p = three_layers(1);
    static const double rows[][2] = {{0, 2.522598}, {10, 2.225201}, {30, 1.727614}, {100, 0.704103}, {300, 0.053076}};
    for (size_t k = 0; k < sizeof rows / sizeof rows[0]; k++)
        assert_near_abs(uf_layered_intensity(&s, rows[k][0]), rows[k][1], 1e-6);
    /* without a gap the medium is not there: the two-media value for glass and cytoplasm */
    assert_near_rel(uf_layered_intensity(&p, 0), 3.047104103, 1e-8);
}

/* 66 deg, 488 nm, 1.518 / 1.337 / 1.37: an exponential reads about 81.5 nm for a layered 100. They agree within 2 nm
 * only around n sin angle 1.43 to 1.45; beyond, the exponential reads up to 4.3 nm too far (the same thin-film sums,
 * evaluated here). */
static void test_layered_effect(void **state)
{
    (void)state;
    uf_bench b = three_layers(0);
    b.medium_n = 1.337;
    b.na_effective = uf_na_from_angle(66, 1.518);
    assert_near_abs(100 + uf_layered_effect_nm(&b, 100), 81.5, 0.1);
    for (b.na_effective = 1.43; b.na_effective < 1.455; b.na_effective += 0.005)
        assert_true(fabs(uf_layered_effect_nm(&b, 100)) < 2);
    b.na_effective = 1.49;
    assert_near_abs(uf_layered_effect_nm(&b, 100), 3.73, 0.01);
    assert_near_abs(uf_layered_effect_nm(&b, 50), 2.61, 0.01);
}

/* z = -d ln(R / R0), exact, and the inverse of the table within 0.01 nm. */
static void test_gap_of_intensity(void **state)
{
    (void)state;
    uf_decay decay;
    uf_decay_exponential(&decay, 97.737476);
    assert_near_abs(uf_decay_gap(&decay, log(0.9)), 10.297671, 1e-4);
    assert_near_abs(uf_decay_gap(&decay, log(0.5)), 67.746456, 1e-4);
    assert_near_abs(uf_decay_gap(&decay, log(0.1)), 225.048855, 1e-4);
    for (double gap = -50; gap < 600; gap += 0.83) {
        assert_near_abs(uf_decay_gap(&decay, uf_decay_ln(&decay, gap)), gap, 0.01);
        assert_near_abs(uf_decay_ln(&decay, gap), -gap / 97.737476, 1e-4);
    }
}

/* (1 - f) exp(-z/d) + f exp(-z/D) with f 0.1, d 100, D 1000, exact; and what a single exponential would read for it. The
 * share of a tenth is Mattheyses and Axelrod's (2006, J. Biomed. Opt. 11:014006, abstract). */
static void test_stray_light(void **state)
{
    (void)state;
    static const double rows[][3] = {{0, 1, 0}, {50, 0.6410005362, 44.472499}, {100, 0.4215752388, 86.375701},
                                     {200, 0.2036748302, 159.123053}, {500, 0.0667172183, 270.729221}};
    static uf_decay decay;
    uf_error error;
    uf_bench b = three_layers(0);
    b.na_effective = uf_na_from_depth(100, 488, b.medium_n);
    static const uf_decay_law law = {UF_FIELD_EXPONENTIAL, {0.1, 1000}, {0}};
    assert_int_equal(uf_decay_make(&decay, &b, &law, &error), UF_OK);
    for (size_t k = 0; k < sizeof rows / sizeof rows[0]; k++) {
        double relative = uf_relative_excitation(&b, &law, rows[k][0]);
        assert_near_abs(relative, rows[k][1], 1e-9);
        assert_near_abs(-100 * log(relative), rows[k][2], 1e-5);
        assert_near_abs(uf_decay_gap(&decay, log(rows[k][1])), rows[k][0], 0.01);
    }
}

/* A coating between glass and water changes the amplitude, not the depth, whatever its index: 10 nm of 1.40, and 50 nm
 * of 1.45 (in which light propagates), s polarized, 488 nm, 70 deg; thin-film matrix, computed outside. */
static void test_coating(void **state)
{
    (void)state;
    uf_bench b = three_layers(0);
    b.coating_n = 1.40;
    b.coating_nm = 10;
    assert_near_abs(uf_interface_intensity(&b), 1.896393, 1e-6);
    b.cell_n = b.medium_n;
    assert_near_abs(uf_layered_intensity(&b, 0), 1.896393, 1e-6);
    assert_near_rel(uf_layered_intensity(&b, 100) / uf_layered_intensity(&b, 0), exp(-100 / 77.275384), 1e-6);
    b.coating_n = 1.45;
    b.coating_nm = 50;
    assert_near_abs(uf_interface_intensity(&b), 1.619991, 1e-6);
    assert_near_rel(uf_layered_intensity(&b, 100) / uf_layered_intensity(&b, 0), exp(-100 / 77.275384), 1e-6);
    /* a coating of the medium's own index is nothing but a gap (closed form) */
    b.coating_n = b.medium_n;
    b.coating_nm = 10;
    assert_near_abs(uf_interface_intensity(&b), 1.814484, 1e-6);
}

/* The far field of a deep gap stays finite: only decaying exponentials occur. */
static void test_no_gap_is_too_large(void **state)
{
    (void)state;
    uf_bench b = three_layers(0.5);
    b.na_effective = 1.517;
    double far = uf_layered_intensity(&b, 20000);
    assert_true(far >= 0 && far < 1e-100);
}

/* A measured table: at its points what was measured, straight in the logarithm between and beyond them. */
static void test_measured_table(void **state)
{
    (void)state;
    static uf_decay_law law = {UF_FIELD_TABLE, {0, 0}, {4, {0, 40, 90, 200}, {0, -0.5, -0.9, -1.5}}};
    static uf_decay decay;
    uf_error error;
    uf_bench b = three_layers(0);
    assert_int_equal(uf_decay_make(&decay, &b, &law, &error), UF_OK);
    assert_near_abs(uf_relative_excitation(&b, &law, 40), exp(-0.5), 1e-12);
    assert_near_abs(uf_decay_gap(&decay, -0.25), 20, 0.01);
    assert_near_abs(uf_decay_gap(&decay, -0.7), 65, 0.01);
    assert_near_abs(uf_decay_gap(&decay, -2.1), 310, 0.01);
    law.points.ln_relative[2] = -0.5; /* does not fall: a ratio has no one gap */
    assert_int_equal(uf_decay_make(&decay, &b, &law, &error), UF_INPUT);
}

/* Tables of every model give back the gap that an excitation was computed for, within 0.01 nm (closed forms in, the
 * table out). */
static void test_tables_invert_their_model(void **state)
{
    (void)state;
    static uf_decay decay;
    static uf_decay_law law = {UF_FIELD_EXPONENTIAL, {0, 1385}, {4, {0, 37.3, 91.7, 213}, {0, -0.47, -1.03, -2.06}}};
    uf_error error;
    for (int variant = 0; variant < 36; variant++) {
        uf_bench b = three_layers(variant % 3 / 2.0);
        b.coating_n = 1.431;
        b.coating_nm = variant / 3 % 2 * 23.85;
        law.model = (uf_field_model)(variant / 6 % 3);
        law.stray.fraction = variant / 18 ? 0.083 : 0;
        assert_int_equal(uf_decay_make(&decay, &b, &law, &error), UF_OK);
        for (double gap = 0; gap < 600; gap += 2.385)
            assert_near_abs(uf_decay_gap(&decay, log(uf_relative_excitation(&b, &law, gap))), gap, 0.01);
    }
}

/* A depth error follows the angle's and the index's: moved by hand. n1 + 0.002 and theta + 0.5 deg at 488 nm, 1.518 /
 * 1.37, 70 deg give 96.117823 and 94.003501 (exact). */
static void test_sensitivity(void **state)
{
    (void)state;
    assert_near_rel(depth_at(488, 1.518, 1.38, 70), 107.552943, 1e-6);
    assert_near_rel(depth_at(488, 1.518, 1.37, 70.5), 94.003501, 1e-6);
    assert_near_rel(depth_at(488, 1.520, 1.37, 70), 96.117823, 1e-6);
    uf_bench b = three_layers(0);
    b.medium_n_sd = 0.002;
    double up = uf_depth_nm(488, b.na_effective, 1.337), down = uf_depth_nm(488, b.na_effective, 1.333);
    assert_near_rel(uf_depth_sd(&b), (up - down) / 2, 1e-9);
    assert_near_rel(uf_na_from_depth(75.314026, 488, 1.33), uf_na_from_angle(70, 1.518), 1e-8);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_depth_grid), cmocka_unit_test(test_depth_by_aperture), cmocka_unit_test(test_worked_answers),
        cmocka_unit_test(test_textbook_angles), cmocka_unit_test(test_nothing_below_the_critical_angle),
        cmocka_unit_test(test_interface_intensities), cmocka_unit_test(test_three_layers),
        cmocka_unit_test(test_layered_effect), cmocka_unit_test(test_gap_of_intensity), cmocka_unit_test(test_sensitivity),
        cmocka_unit_test(test_stray_light), cmocka_unit_test(test_coating),
        cmocka_unit_test(test_no_gap_is_too_large), cmocka_unit_test(test_measured_table), cmocka_unit_test(test_tables_invert_their_model)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
