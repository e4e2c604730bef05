/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Pooling of ratios, films and the place of structure against closed forms. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "base/random.h"
#include "calibrate/reference.h"
#include "calibrate/structure.h"
#include "near.h"

/* Wells count alike however many fields they have, by their logarithms: wells 2, 4 and 8 have the mean 4, and ln 2 of spread
 * on both sides; without the first it would be sqrt 32. */
static void test_wells_count_alike(void **state)
{
    (void)state;
    static const uf_reference_unit units[] = {{0, 2, NAN}, {1, 3, 0.1}, {1, 16.0 / 3, 0.3}, {2, 8, 0.2}, {2, NAN, 5}};
    uf_work work = {0};
    uf_reference_pool pool;
    assert_int_equal(uf_reference_pool_units(&work, units, 5, &pool, NULL), UF_OK);
    assert_int_equal(pool.wells, 3);
    assert_int_equal(pool.fields, 4);
    assert_near_rel(pool.ratio, 4, 1e-12);
    assert_near_rel(pool.ratio_sd, 4 * log(2.0) / sqrt(3.0), 1e-12);
    assert_near_rel(pool.spread, 0.2, 1e-12);
    assert_false(pool.sd_from_fields);
    assert_true(pool.worst_well == 0 || pool.worst_well == 2);
    assert_near_rel(fabs(log1p(pool.worst_change)), log(2.0) / 2, 1e-9);
    uf_arena_free(&work.arena);
}

static void test_few_wells_take_the_spread_within(void **state)
{
    (void)state;
    static const uf_reference_unit one[] = {{0, 1.7, 0.04}}, none[] = {{0, NAN, NAN}, {1, -2, NAN}};
    uf_work work = {0};
    uf_reference_pool pool;
    assert_int_equal(uf_reference_pool_units(&work, one, 1, &pool, NULL), UF_OK);
    assert_true(pool.sd_from_fields && pool.worst_well == -1);
    assert_near_rel(pool.ratio_sd, 1.7 * 0.04, 1e-12);
    assert_int_equal(uf_reference_pool_units(&work, none, 2, &pool, NULL), UF_OK);
    assert_int_equal(pool.wells, 0);
    assert_true(isnan(pool.ratio));
    uf_arena_free(&work.arena);
}

static uf_plane even(uf_work *work, int width, int height, double level)
{
    uf_plane plane;
    assert_int_equal(uf_plane_take(work, width, height, &plane, NULL), UF_OK);
    for (int y = 0; y < height; y++)
        for (int x = 0; x < width; x++)
            uf_plane_row(plane, y)[x] = (float)(level * (1 + 0.001 * x));
    return plane;
}

/* Light that falls alike in both channels leaves no spread; a speck and a saturated corner do not count; blanks come off
 * pixel by pixel. */
static void test_film(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_film_ratio film;
    uf_mask saturated, fine = {0};
    uf_plane near = even(&work, 131, 97, 900), wide = even(&work, 131, 97, 500);
    uf_plane near_blank = even(&work, 131, 97, 100), wide_blank = even(&work, 131, 97, 100);
    assert_int_equal(uf_mask_take(&work, 131, 97, &saturated, NULL), UF_OK);
    for (int y = 0; y < 97; y++)
        for (int x = 0; x < 131; x++)
            uf_mask_row(saturated, y)[x] = x < 3 && y < 3;
    for (int y = 40; y < 50; y++)
        for (int x = 60; x < 72; x++)
            uf_plane_row(near, y)[x] = 50000;
    assert_int_equal(uf_film_ratio_of(&work, near, wide, saturated, fine, near_blank, wide_blank, &film, NULL), UF_OK);
    assert_near_rel(film.ratio, 2, 1e-5);
    assert_true(film.spread < 1e-5);
    assert_int_equal(film.blocks, 5 * 4 - 1);
    assert_near_rel(film.saturated_fraction, 9.0 / (131 * 97), 1e-9);
    assert_int_equal(uf_film_ratio_of(&work, near, wide, fine, fine, near, wide, &film, NULL), UF_OK);
    assert_int_equal(film.blocks, 0);
    uf_arena_free(&work.arena);
}

/* A disc's edges lie around its centre; noise has none. */
static void test_structure_lies_where_the_disc_is(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_random random;
    double x, y;
    uf_random_start(&random, 4, 1);
    uf_plane image = even(&work, 160, 120, 0);
    for (int v = 0; v < 120; v++)
        for (int u = 0; u < 160; u++)
            uf_plane_row(image, v)[u] =
                (float)((hypot(u - 47.5, v - 81.25) < 19 ? 400 : 100) + 8 * uf_random_normal(&random));
    assert_int_equal(uf_structure_centre(&work, image, &x, &y, NULL), UF_OK);
    assert_near_abs(x, 47.5, 1);
    assert_near_abs(y, 81.25, 1);
    image = even(&work, 160, 120, 0);
    assert_int_equal(uf_structure_centre(&work, image, &x, &y, NULL), UF_OK);
    assert_near_abs(x, 79.5, 1e-9);
    assert_near_abs(y, 59.5, 1e-9);
    uf_arena_free(&work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_wells_count_alike), cmocka_unit_test(test_few_wells_take_the_spread_within),
        cmocka_unit_test(test_film), cmocka_unit_test(test_structure_lies_where_the_disc_is)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
