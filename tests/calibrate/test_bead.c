/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Depth from beads: the sphere's geometry against closed forms, the blurred profile against a sum over a fine grid, and the
 * whole against simulated beads (scene/beads.h: points on spheres, nothing of the profile used here). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "base/constants.h"
#include "calibrate/bead.h"
#include "near.h"
#include "scene/beads.h"

/* h = R - sqrt(R^2 - r^2), worked out in 40 digits; 2500, 700, 100 is Pythagoras' triple 7 24 25. */
static void test_heights(void **state)
{
    (void)state;
    static const double table[][3] = {{1000, 100, 5.012563},    {1000, 300, 46.060799},   {1000, 500, 133.974596},
                                      {2500, 500, 50.510257},   {2500, 700, 100.000000},  {2500, 1000, 208.712153},
                                      {5000, 1000, 101.020514}, {7500, 1000, 66.965626},  {7500, 2000, 271.583853}};
    for (size_t k = 0; k < sizeof table / sizeof table[0]; k++)
        assert_near_abs(uf_bead_height_nm(table[k][0] / 1000, table[k][1] / 1000), table[k][2], 6e-7);
    assert_near_rel(uf_bead_height_nm(2.5, 1e-6), 2e-10, 1e-12); /* r^2 / 2R, no digits lost */
    assert_true(isnan(uf_bead_height_nm(2.5, 2.6)));
}

static double bare(uf_bead_dye dye, double radius, double r, double depth)
{
    if (r >= radius)
        return dye == UF_DYE_SURFACE ? 0 : depth;
    double half = sqrt(radius * radius - r * r), low = 1000 * (radius - half), high = 1000 * (radius + half);
    if (dye == UF_DYE_SURFACE)
        return radius / half * (exp(-low / depth) + exp(-high / depth));
    return depth * (1 - exp(-low / depth) + exp(-high / depth));
}

/* Twin: the plane's convolution by the midpoint rule on a square grid. The rim's pole is left out: r is inside. */
static double by_grid(uf_bead_dye dye, double radius, double blur, double r, double depth)
{
    enum { STEPS = 241 };
    double reach = 6 * blur, step = 2 * reach / STEPS, sum = 0;
    for (int j = 0; j < STEPS; j++)
        for (int i = 0; i < STEPS; i++) {
            double x = -reach + (i + 0.5) * step, y = -reach + (j + 0.5) * step;
            double weight = exp(-(x * x + y * y) / (2 * blur * blur)) / (2 * UF_PI * blur * blur) * step * step;
            sum += weight * bare(dye, radius, hypot(r + x, y), depth);
        }
    return sum;
}

static void check_profile(uf_bead_dye dye, double radius, double blur, double depth)
{
    uf_bead_profile p;
    double table[4000];
    assert_int_equal(uf_bead_profile_init(&p, dye, radius, blur, 0.8 * radius, NULL), UF_OK);
    assert_true(p.rows < 4000);
    uf_bead_profile_of(&p, depth, table);
    for (double r = 0; r + 6 * blur < 0.97 * radius && r < 0.8 * radius; r += 0.0917 * radius) {
        double expected = by_grid(dye, radius, blur, r, depth);
        assert_near_abs(uf_bead_profile_at(&p, table, r), expected, 2e-4 * by_grid(dye, radius, blur, 0, depth) + 2e-4 * expected);
    }
    uf_bead_profile_free(&p);
    uf_bead_profile_free(&p);
}

static void test_profile_against_a_grid(void **state)
{
    (void)state;
    check_profile(UF_DYE_SURFACE, 2.5, 0.083, 78.1);
    check_profile(UF_DYE_SURFACE, 1.03, 0.071, 103.7);
    check_profile(UF_DYE_SURFACE, 7.5, 0.11, 61.9);
    check_profile(UF_DYE_IMMERSED, 2.5, 0.083, 78.1);
    check_profile(UF_DYE_IMMERSED, 5.17, 0.095, 1187);
}

/* Near the axis a core is exp(-r^2 / 2 R d), and a Gaussian blur adds its variance to R d: without the blur in the model the
 * depth comes out sigma^2 / R too long. */
static void test_blur_adds_its_variance(void **state)
{
    (void)state;
    double radius = 5, blur = 0.1, depth_um = 0.08, table[2000], sharp[2000];
    uf_bead_profile with, without;
    assert_int_equal(uf_bead_profile_init(&with, UF_DYE_SURFACE, radius, blur, 0.5, NULL), UF_OK);
    assert_int_equal(uf_bead_profile_init(&without, UF_DYE_SURFACE, radius, 0.02, 0.5, NULL), UF_OK);
    uf_bead_profile_of(&with, 1000 * depth_um, table);
    uf_bead_profile_of(&without, 1000 * (depth_um + (blur * blur - 0.02 * 0.02) / radius), sharp);
    for (double r = 0; r < 0.45; r += 0.05)
        assert_near_rel(uf_bead_profile_at(&with, table, r) / table[0], uf_bead_profile_at(&without, sharp, r) / sharp[0], 2e-3);
    uf_bead_profile_free(&with);
    uf_bead_profile_free(&without);
}

/* ---- simulated beads ------------------------------------------------------------------------------- */

static const uf_bead_scene usual = {.seed = 31,
                                    .width = 420,
                                    .height = 431,
                                    .pixel_size_um = 0.11,
                                    .beads = 14,
                                    .radius_um = 2.5,
                                    .depth_nm = 82.3,
                                    .scattered_fraction = 0.09,
                                    .scattered_depth_nm = 1350,
                                    .psf_sigma_um = 0.078,
                                    .peak_adu = 3000,
                                    .label_spread = 0.1,
                                    .background_adu = 60,
                                    .offset_adu = 0,
                                    .full_scale_adu = 65535,
                                    .gain_e_per_adu = 2.17,
                                    .read_noise_e = 1.6};

static uf_status find_and_fit(const uf_bead_scene *scene, double radius_um, uf_bead_set *set, uf_bead_result *result,
                              uf_error *error)
{
    uf_work work = {0};
    uf_bead_truth truth;
    uf_channel channel = {.noise = {scene->gain_e_per_adu, scene->read_noise_e / scene->gain_e_per_adu, 1}};
    uf_bead_setup setup = {.dye = scene->immersed ? UF_DYE_IMMERSED : UF_DYE_SURFACE,
                           .with_stray = 1,
                           .radius_um = radius_um,
                           .pixel_size_um = scene->pixel_size_um,
                           .psf_sigma_um = scene->psf_sigma_um,
                           .expected_depth_nm = 95,
                           .scattered_depth_nm = 1000};
    assert_int_equal(uf_scene_beads(&work, scene, &channel.image, &truth, NULL), UF_OK);
    assert_int_equal(uf_mask_take(&work, scene->width, scene->height, &channel.saturated, NULL), UF_OK);
    for (int y = 0; y < scene->height; y++)
        for (int x = 0; x < scene->width; x++)
            uf_mask_row(channel.saturated, y)[x] =
                uf_plane_row(channel.image, y)[x] >= (float)scene->full_scale_adu ? UF_PIXEL_SATURATED : UF_PIXEL_FINE;
    uf_status status = uf_beads_find(&work, &setup, &channel, set, error);
    if (status == UF_OK)
        status = uf_beads_fit(&work, &setup, set, result, error);
    uf_arena_free(&work.arena);
    return status;
}

static void test_depth_and_stray_light_come_back(void **state)
{
    (void)state;
    uf_bead_set set = {0};
    uf_bead_result r;
    assert_int_equal(find_and_fit(&usual, 2.5, &set, &r, NULL), UF_OK);
    assert_int_equal(r.used, set.count);
    assert_true(r.used >= 12);
    assert_near_rel(r.depth_nm.value, 82.3, 0.005);
    assert_near_abs(r.scattered_fraction.value, 0.09, 0.002);
    assert_true(r.scattered_depth_fitted);
    assert_near_rel(r.scattered_depth_nm.value, 1350, 0.05);
    assert_true(r.misfit > 0.8 && r.misfit < 1.2);
    assert_true(r.depth_nm.low < 82.3 && r.depth_nm.high > 82.3);
    uf_bead_set_free(&set);
}

static void test_dye_around_the_beads(void **state)
{
    (void)state;
    uf_bead_set set = {0};
    uf_bead_result r;
    uf_bead_scene scene = usual;
    scene.immersed = 1;
    assert_int_equal(find_and_fit(&scene, 2.5, &set, &r, NULL), UF_OK);
    assert_near_rel(r.depth_nm.value, 82.3, 0.01);
    assert_near_abs(r.scattered_fraction.value, 0.09, 0.005);
    uf_bead_set_free(&set);
}

/* At a given distance height goes with 1 / R: a radius 3 % too large makes the depth 3 % too short. */
static void test_radius_goes_into_the_depth(void **state)
{
    (void)state;
    uf_bead_set set = {0};
    uf_bead_result r;
    assert_int_equal(find_and_fit(&usual, 1.03 * 2.5, &set, &r, NULL), UF_OK);
    assert_near_rel(r.depth_nm.value, 82.3 / 1.03, 0.012);
    uf_bead_set_free(&set);
}

static void test_floating_beads_are_left_out(void **state)
{
    (void)state;
    uf_bead_set set = {0};
    uf_bead_result r;
    uf_bead_scene scene = usual;
    scene.floating = 0.3;
    scene.floating_nm = 150;
    assert_int_equal(find_and_fit(&scene, 2.5, &set, &r, NULL), UF_OK);
    assert_true(r.used == 11 && uf_beads_in_state(&set, UF_BEAD_DIM) == 3);
    assert_near_rel(r.depth_nm.value, 82.3, 0.006);
    uf_bead_set_free(&set);
}

static void check_refused(uf_bead_scene scene, double radius_um, const char *word)
{
    uf_bead_set set = {0};
    uf_bead_result r;
    uf_error error;
    assert_int_equal(find_and_fit(&scene, radius_um, &set, &r, &error), UF_INPUT);
    (void)printf("%s\n", error.text);
    assert_non_null(strstr(error.text, word));
    uf_bead_set_free(&set);
}

static void test_refusals(void **state)
{
    (void)state;
    uf_bead_scene scene = usual;
    scene.beads = 3;
    check_refused(scene, 2.5, "3 beads can be used of 3 found, expected at least 5");
    scene = usual;
    scene.full_scale_adu = 1500;
    check_refused(scene, 2.5, "expose less");
    scene = usual; /* all of them off the substrate: stray light only */
    scene.floating = 1;
    scene.floating_nm = 900;
    check_refused(scene, 2.5, "touch the substrate");
    scene = usual;
    scene.beads = 0;
    check_refused(scene, 2.5, "no cores of the size");
    check_refused(usual, 12, "check the radius");
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_heights),
                                       cmocka_unit_test(test_profile_against_a_grid),
                                       cmocka_unit_test(test_blur_adds_its_variance),
                                       cmocka_unit_test(test_depth_and_stray_light_come_back),
                                       cmocka_unit_test(test_dye_around_the_beads),
                                       cmocka_unit_test(test_radius_goes_into_the_depth),
                                       cmocka_unit_test(test_floating_beads_are_left_out),
                                       cmocka_unit_test(test_refusals)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
