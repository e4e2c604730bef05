/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From settings to the numbers of a run, in closed form. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "near.h"
#include "optics/systematic.h"
#include "run/plan.h"

static const char bench[] = "[light]\nwavelength_nm = 488\n[interface]\nsubstrate_n = 1.518\nmedium_n = 1.337\n"
                            "[reference]\nratio = 1.5\nratio_sd = 0.03\n";

static uf_status plan_of(const char *more, double image_um, uf_plan *plan, uf_error *error)
{
    uf_settings *settings;
    assert_int_equal(uf_settings_new(&settings, error), UF_OK);
    uf_status status = uf_settings_parse(settings, bench, sizeof bench - 1, "b.ini", UF_INSTRUMENT_FILE, error);
    if (status == UF_OK)
        status = uf_settings_parse(settings, more, strlen(more), "m.ini", UF_INSTRUMENT_FILE, error);
    if (status == UF_OK)
        status = uf_plan_make(settings, image_um, plan, error);
    uf_settings_free(&settings);
    return status;
}

static void test_depth_three_ways(void **state)
{
    (void)state;
    static uf_plan a, b, c;
    double na = 1.518 * sin(70 * 3.14159265358979323846 / 180);
    double depth = 488 / (4 * 3.14159265358979323846 * sqrt(na * na - 1.337 * 1.337));
    char text[80];
    assert_int_equal(plan_of("[interface]\nangle_deg = 70\n", 0.1, &a, NULL), UF_OK);
    (void)snprintf(text, sizeof text, "[interface]\nna_effective = %.12f\n", na);
    assert_int_equal(plan_of(text, 0.1, &b, NULL), UF_OK);
    (void)snprintf(text, sizeof text, "[interface]\ndepth_nm = %.10f\n", depth);
    assert_int_equal(plan_of(text, 0.1, &c, NULL), UF_OK);
    assert_near_rel(a.depth_nm, depth, 1e-10);
    assert_near_rel(b.depth_nm, depth, 1e-9);
    assert_near_rel(c.depth_nm, depth, 1e-9);
}

/* The ratio at gap 0 is the measured one times exp(gap / depth); its relative sd stays. */
static void test_reference_at_a_gap(void **state)
{
    (void)state;
    static uf_plan plan;
    assert_int_equal(plan_of("[interface]\nangle_deg = 70\n[reference]\ngap_nm = 30\n", 0.1, &plan, NULL), UF_OK);
    assert_near_rel(plan.reference_ratio, 1.5 * exp(30 / plan.depth_nm), 1e-6);
    assert_near_abs(plan.reference_sd, 0.02, 1e-12);
}

static void test_pixel_size(void **state)
{
    (void)state;
    static uf_plan plan;
    uf_error error;
    assert_int_equal(plan_of("[interface]\nangle_deg = 70\n", (double)NAN, &plan, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "[pixel]"));
    assert_int_equal(plan_of("[interface]\nangle_deg = 70\n[pixel]\nsize_um = 0.2\n", 0.1, &plan, NULL), UF_OK);
    assert_near_abs(plan.pixel_size_um, 0.2, 0);
}

/* An angle quoted in water-like index 1.34 conserves n sin angle (Snell). */
static void test_angle_in_another_index(void **state)
{
    (void)state;
    static uf_plan plan;
    uf_error error;
    assert_int_equal(plan_of("[interface]\nangle_deg = 80\nangle_n = 1.45\n", 0.1, &plan, NULL), UF_OK);
    assert_near_rel(plan.bench.na_effective, 1.45 * sin(80 * 3.14159265358979323846 / 180), 1e-11);
    assert_int_equal(plan_of("[interface]\nangle_deg = 80\nangle_n = 1.34\n", 0.1, &plan, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "not totally reflected"));
}

/* Indices by name: Sellmeier's formula over air for the glass, IAPWS R9-97 for water (both held to published tables in
 * tests/optics/test_refractive.c); here only that they reach the depth, and that a recipe's spread reaches its sd. */
static void test_indices_by_name(void **state)
{
    (void)state;
    static uf_plan plan;
    uf_error error;
    assert_int_equal(plan_of("[interface]\nsubstrate = bk7\nmedium = water\ntemperature_c = 25\nna_effective = 1.44\n",
                             0.1, &plan, NULL), UF_OK);
    assert_near_abs(plan.bench.substrate_n, 1.522242 * 1.0002743, 2e-6);
    assert_near_abs(plan.bench.medium_n, 1.336894, 2e-6);
    double depth = 488 / (4 * 3.14159265358979323846 * sqrt(1.44 * 1.44 - 1.336894 * 1.336894));
    assert_near_rel(plan.depth_nm, depth, 2e-5);
    assert_near_abs(plan.depth_sd_nm, 0, 1e-12);
    assert_int_equal(plan_of("[interface]\nmedium = culture-medium\nna_effective = 1.44\n", 0.1, &plan, NULL), UF_OK);
    assert_true(plan.depth_sd_nm > 0.3);
    assert_int_equal(plan_of("[light]\nwavelength_nm = 1200\n[interface]\nmedium = water\nna_effective = 1.44\n", 0.1,
                             &plan, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "300 to 1100 nm"));
}

/* A coating changes amplitudes, never the depth in the medium (Axelrod's reviews, from memory; thin-film sums in
 * tests/optics/test_published.c): the exponential is untouched, the layered field nearly so. */
static void test_coating_in_the_plan(void **state)
{
    (void)state;
    static uf_plan bare, coated;
    static const char layered[] = "[interface]\nangle_deg = 70\n[decay]\nmodel = layered\n";
    assert_int_equal(plan_of(layered, 0.1, &bare, NULL), UF_OK);
    char text[200];
    (void)snprintf(text, sizeof text, "%s[interface]\ncoating_n = 1.45\ncoating_nm = 50\n", layered);
    assert_int_equal(plan_of(text, 0.1, &coated, NULL), UF_OK);
    assert_near_abs(coated.depth_nm, bare.depth_nm, 0);
    double shift = uf_decay_gap(&coated.decay, -1) - uf_decay_gap(&bare.decay, -1);
    assert_true(fabs(shift) > 0.05 && fabs(shift) < 5);
}

/* ---- a series of angles ---------------------------------------------------------------------- */

static void test_series_needs_no_reference_and_no_angle(void **state)
{
    (void)state;
    static uf_plan plan;
    assert_int_equal(plan_of("[series]\nangles_deg = 73, 69, 77\npower = 1, 2, 3\n[pixel]\nsize_um = 0.1\n", 0.1, &plan,
                             NULL), UF_OK);
    assert_int_equal(plan.series.count, 3);
    assert_int_equal(plan.series.widest, 1);
    assert_near_abs(plan.series.power[2], 3, 0);
    assert_near_rel(plan.bench.na_effective, 1.518 * sin(69 * 3.14159265358979323846 / 180), 1e-11);
    assert_true(isnan(plan.reference_ratio));
}

/* asin(1.37 / 1.518) = 64.489090 deg: 64 deg is not enough, and it is page 2. */
static void test_series_refuses_what_is_not_reflected_by_the_cell(void **state)
{
    (void)state;
    static uf_plan plan;
    uf_error error;
    assert_int_equal(plan_of("[series]\nangles_deg = 69, 64, 62\n", 0.1, &plan, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "64 deg, the angle of page 2"));
    assert_non_null(strstr(error.text, "64.49 deg"));
    assert_int_equal(plan_of("[interface]\nobjective_na = 1.45\n[series]\nangles_deg = 69, 80\n", 0.1, &plan, &error),
                     UF_INPUT);
    assert_non_null(strstr(error.text, "aperture"));
}

/* Signals of the bench as it says, fitted with each input moved up and down by its sd, by the fit itself. */
static void test_series_systematic_part(void **state)
{
    (void)state;
    static uf_plan plan;
    const double angles[] = {69, 71, 73, 75, 77}, sds[] = {0.2, 0.004, 0.01};
    assert_int_equal(plan_of("[decay]\nmodel = layered\n[interface]\nangle_sd_deg = 0.2\nmedium_n_sd = 0.004\n"
                             "[series]\nangles_deg = 69, 71, 73, 75, 77\n", 0.1, &plan, NULL), UF_OK);
    for (double gap = 20; gap < 120; gap += 40) {
        double signal[UF_SERIES_MOST], slope[UF_SERIES_MOST], weight[UF_SERIES_MOST], squares = 0;
        uf_field_kind kind = {&plan.bench, plan.law.model, plan.law.stray};
        uf_series_field(&plan.series, &kind, gap, signal, slope);
        for (int k = 0; k < 5; k++)
            weight[k] = 1 / signal[k];
        for (int input = 0; input < 3; input++) {
            double found[2];
            for (int side = 0; side < 2; side++) {
                double by = (side ? 1 : -1) * sds[input];
                uf_bench other = plan.bench;
                uf_series series = plan.series;
                for (int k = 0; k < 5; k++)
                    series.na_effective[k] = uf_na_from_angle(angles[k] + (input == 0 ? by : 0), 1.518);
                other.medium_n += input == 1 ? by : 0;
                other.cell_n += input == 2 ? by : 0;
                uf_field_kind moved = {&other, plan.law.model, plan.law.stray};
                found[side] = uf_series_fit(&series, &moved, signal, weight, NULL);
            }
            squares += (found[1] - found[0]) * (found[1] - found[0]) / 4;
        }
        assert_near_rel(uf_series_systematic(&plan.series, gap), sqrt(squares), 0.05); /* first order against all orders */
    }
}

/* ---- what the inputs' sds do to a gap ------------------------------------------------------------ */

/* A depth of sd s shifts a gap by (gap - reference gap) s / d: closed form of the exponential. */
static void test_depth_error_scales_with_the_gap(void **state)
{
    (void)state;
    static uf_plan plan;
    assert_int_equal(plan_of("[interface]\ndepth_nm = 80\ndepth_sd_nm = 1.6\n[reference]\ngap_nm = 20\nnormalisation_sd = "
                             "0\nratio_sd = 0\n", 0.1, &plan, NULL), UF_OK);
    for (double gap = 0; gap < 200; gap += 23.85)
        assert_near_abs(uf_systematic_nm(&plan, gap), fabs(gap - 20) * 0.02, 0.21 * 0.02 + 0.002 * fabs(gap - 20));
}

/* Ratio, normalisation and the reference's own gap: d times the relative errors in squares, and the gap's sd as it is. */
static void test_reference_errors_move_all_gaps_alike(void **state)
{
    (void)state;
    static uf_plan plan;
    assert_int_equal(plan_of("[interface]\nangle_deg = 70\n[reference]\ngap_nm = 10\ngap_sd_nm = 3\n", 0.1, &plan, NULL),
                     UF_OK);
    double expected = hypot(plan.depth_nm * hypot(0.02, 0.05), 3);
    assert_near_rel(uf_systematic_nm(&plan, 10), expected, 1e-3);
    assert_near_rel(uf_systematic_nm(&plan, 120), expected, 1e-3);
}

/* The cell's index enters the layered field only, and more the nearer the angle is to critical (checked against the
 * readings themselves: 66 deg, +0.01 reads 11.3 nm short at 50 nm, underfoot optics). */
static void test_cell_index_counts_where_it_acts(void **state)
{
    (void)state;
    static uf_plan exponential, steep, near_critical;
    static const char more[] = "[reference]\nnormalisation_sd = 0\nratio_sd = 0\n[interface]\ncell_n_sd = 0.01\n";
    char text[300];
    (void)snprintf(text, sizeof text, "%s[interface]\nangle_deg = 70\n", more);
    assert_int_equal(plan_of(text, 0.1, &exponential, NULL), UF_OK);
    (void)snprintf(text, sizeof text, "%s[interface]\nangle_deg = 70\n[decay]\nmodel = layered\n", more);
    assert_int_equal(plan_of(text, 0.1, &steep, NULL), UF_OK);
    (void)snprintf(text, sizeof text, "%s[interface]\nangle_deg = 66.5\n[decay]\nmodel = layered\n", more);
    assert_int_equal(plan_of(text, 0.1, &near_critical, NULL), UF_OK);
    assert_near_abs(uf_systematic_nm(&exponential, 50), 0, 1e-9);
    assert_true(uf_systematic_nm(&steep, 50) > 0.3 && uf_systematic_nm(&steep, 50) < 2);
    assert_true(uf_systematic_nm(&near_critical, 50) > 3 * uf_systematic_nm(&steep, 50));
}

/* Dye through the cytoplasm: the evanescent field reaches depth(cell_n) into it, stray light its own depth D, so that a
 * share s at the interface weighs s D / ((1 - s) depth + s D) in what near sums up (closed form). */
static void test_cytosol_weighs_stray_light_by_its_reach(void **state)
{
    (void)state;
    static uf_plan plan;
    uf_settings *settings;
    uf_error error;
    static const char more[] = "[interface]\nangle_deg = 70\n[decay]\nscattered_fraction = 0.1\nscattered_depth_nm = 1000\n";
    assert_int_equal(uf_settings_new(&settings, NULL), UF_OK);
    assert_int_equal(uf_settings_parse(settings, bench, sizeof bench - 1, "b.ini", UF_INSTRUMENT_FILE, NULL), UF_OK);
    assert_int_equal(uf_settings_parse(settings, more, strlen(more), "m.ini", UF_INSTRUMENT_FILE, NULL), UF_OK);
    assert_int_equal(uf_settings_set(settings, "cells", "label", "cytosol", NULL), UF_OK);
    assert_int_equal(uf_plan_make(settings, 0.1, &plan, &error), UF_OK);
    double in_cell = 97.737476, depth = plan.depth_nm, share = 0.1 * 1000 / (0.9 * in_cell + 0.1 * 1000);
    assert_near_rel(plan.law.stray.fraction, share, 1e-6);
    double at_60 = (1 - share) * exp(-60 / depth) + share * exp(-0.06);
    assert_near_abs(uf_decay_gap(&plan.decay, log(at_60)), 60, 0.01);
    assert_true(plan.is_relative && plan.signal == UF_SIGNAL_NEAR);
    /* light that runs on into the cell has no depth there */
    assert_int_equal(uf_settings_set(settings, "interface", "angle_deg", "64", NULL), UF_OK);
    assert_int_equal(uf_plan_make(settings, 0.1, &plan, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "cell_n"));
    uf_settings_free(&settings);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_depth_three_ways), cmocka_unit_test(test_reference_at_a_gap),
                                       cmocka_unit_test(test_pixel_size), cmocka_unit_test(test_angle_in_another_index),
                                       cmocka_unit_test(test_indices_by_name), cmocka_unit_test(test_coating_in_the_plan),
                                       cmocka_unit_test(test_cytosol_weighs_stray_light_by_its_reach),
                                       cmocka_unit_test(test_depth_error_scales_with_the_gap),
                                       cmocka_unit_test(test_reference_errors_move_all_gaps_alike),
                                       cmocka_unit_test(test_cell_index_counts_where_it_acts),
                                       cmocka_unit_test(test_series_needs_no_reference_and_no_angle),
                                       cmocka_unit_test(test_series_refuses_what_is_not_reflected_by_the_cell),
                                       cmocka_unit_test(test_series_systematic_part)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
