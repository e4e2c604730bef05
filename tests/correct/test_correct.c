/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Correction, background and shift on images whose answer is known: closed forms, and noise of known spread. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "correct/correct.h"
#include "correct/shift.h"
#include "near.h"
#include "scene/random.h"

static uf_work work;
static uf_random dice;

static int tear_down(void **state)
{
    (void)state;
    uf_arena_free(&work.arena);
    return 0;
}

static uf_plane plane(int width, int height, float value)
{
    uf_plane p;
    assert_int_equal(uf_plane_take(&work, width, height, &p, NULL), UF_OK);
    for (int k = 0; k < width * height; k++)
        p.data[k] = value;
    return p;
}

static uf_raw_channel raw_of(uf_plane counts, const uf_camera_settings *camera)
{
    uf_raw_channel raw = {.counts = counts, .full_scale_adu = 65535, .camera = camera, .name = "near"};
    assert_int_equal(uf_mask_take(&work, counts.width, counts.height, &raw.saturated, NULL), UF_OK);
    return raw;
}

static const uf_camera_settings camera = {.offset_adu = 100, .gain_e_per_adu = 2.17, .read_noise_e = 1.6,
                                          .full_scale_adu = 65535, .excess_noise = 1};

/* (counts - offset) mean(flat) / flat, by hand. */
static void test_flat_and_offset(void **state)
{
    (void)state;
    uf_plane counts = plane(37, 23, 0), flat = plane(37, 23, 0);
    double mean = 0;
    for (int k = 0; k < 37 * 23; k++) {
        counts.data[k] = (float)(300 + k % 101);
        flat.data[k] = 0.7f + 0.013f * (float)(k % 53);
        mean += (double)flat.data[k] / (37 * 23);
    }
    uf_raw_channel raw = raw_of(counts, &camera);
    raw.flat = flat;
    raw.full_scale_adu = 400;
    uf_channel channel;
    assert_int_equal(uf_correct_channel(&work, &raw, &channel, NULL), UF_OK);
    int saturated = 0;
    for (int k = 0; k < 37 * 23; k++) {
        double was = 300 + k % 101;
        saturated += was >= 400;
        assert_near_rel((double)channel.image.data[k], (was - 100) * mean / (double)flat.data[k], 1e-6);
    }
    assert_near_abs(channel.saturated_fraction, saturated / (37.0 * 23.0), 1e-12);
    flat.data[40] = 0;
    uf_error error;
    assert_int_equal(uf_correct_channel(&work, &raw, &channel, &error), UF_INPUT);
    assert_non_null(strstr(error.text, "x 3, y 1"));
}

/* A mapped pixel takes the median of its good neighbours; a map that leaves none is refused. */
static void test_defect_map(void **state)
{
    (void)state;
    uf_plane counts = plane(20, 20, 500), defects = plane(20, 20, 0);
    counts.data[5 * 20 + 7] = 60000;
    counts.data[5 * 20 + 8] = 60000;
    defects.data[5 * 20 + 7] = defects.data[5 * 20 + 8] = 1;
    uf_raw_channel raw = raw_of(counts, &camera);
    raw.defects = defects;
    uf_channel channel;
    assert_int_equal(uf_correct_channel(&work, &raw, &channel, NULL), UF_OK);
    assert_true(channel.replaced == 2);
    for (int k = 0; k < 400; k++)
        assert_true(channel.image.data[k] == 400);
    raw.defects = plane(20, 20, 1);
    assert_int_equal(uf_correct_channel(&work, &raw, &channel, NULL), UF_INPUT);
}

static void add_noise(uf_plane p, double sd)
{
    for (int k = 0; k < p.width * p.height; k++)
        p.data[k] += (float)(sd * uf_random_normal(&dice));
}

/* A lone pixel is hot; a point as narrow as sigma 0.6 px (already undersampled) is not. */
static void test_hot_pixels_and_points(void **state)
{
    (void)state;
    uf_random_start(&dice, 5, 1);
    uf_plane counts = plane(64, 64, 350);
    add_noise(counts, 11);
    for (int y = 0; y < 64; y++)
        for (int x = 0; x < 64; x++)
            counts.data[y * 64 + x] += (float)(5000 * exp(-((x - 40) * (x - 40) + (y - 40) * (y - 40)) / (2 * 0.36)));
    counts.data[20 * 64 + 20] = 20000;
    float point = counts.data[40 * 64 + 40] - 100;
    uf_raw_channel raw = raw_of(counts, &camera);
    uf_channel channel;
    assert_int_equal(uf_correct_channel(&work, &raw, &channel, NULL), UF_OK);
    assert_int_equal(uf_background_first(&work, &channel, NULL), UF_OK);
    assert_true(channel.replaced == 1);
    assert_true(channel.image.data[20 * 64 + 20] < 400);
    assert_true(channel.image.data[40 * 64 + 40] == point);
}

/* Normal noise of known mean, with a share of the field bright: the background is the noise's mean. */
static void test_background_of_a_crowded_field(void **state)
{
    (void)state;
    static const double shares[] = {0, 0.05, 0.6};
    for (int j = 0; j < 3; j++) {
        uf_random_start(&dice, 9, (uint64_t)j);
        uf_plane counts = plane(300, 280, 350);
        add_noise(counts, 11);
        for (int y = 0; y < (int)(280 * shares[j]); y++)
            for (int x = 0; x < 300; x++)
                uf_plane_row(counts, y)[x] += (float)(1500 + 900 * uf_random_uniform(&dice));
        uf_raw_channel raw = raw_of(counts, &camera);
        uf_channel channel;
        assert_int_equal(uf_correct_channel(&work, &raw, &channel, NULL), UF_OK);
        assert_int_equal(uf_background_first(&work, &channel, NULL), UF_OK);
        assert_near_abs(channel.background_adu, 250, 1.5);
        /* closed form: sqrt(250 / gain + (read / gain)^2) */
        assert_near_abs(channel.noise_adu, sqrt(channel.background_adu / 2.17 + 1.6 * 1.6 / (2.17 * 2.17)), 1e-9);
    }
}

/* Smooth-edged discs of two different brightnesses, the second image moved exactly. */
static void put_discs(uf_plane p, double dx, double dy, double level)
{
    uf_random places;
    uf_random_start(&places, 77, 1);
    for (int k = 0; k < 14; k++) {
        double x0 = uf_random_between(&places, 20, p.width - 20.0) + dx, y0 = uf_random_between(&places, 20, p.height - 20.0) + dy;
        double r = uf_random_between(&places, 8, 22);
        for (int y = 0; y < p.height; y++)
            for (int x = 0; x < p.width; x++)
                uf_plane_row(p, y)[x] += (float)(level / (1 + exp(hypot(x - x0, y - y0) - r)));
    }
}

static void find(uf_plane near, uf_plane wide, uf_shift_estimate *found)
{
    uf_channel a = {.image = near, .noise_adu = 11}, b = {.image = wide, .noise_adu = 11};
    assert_int_equal(uf_shift_find(&work, &a, &b, found, NULL), UF_OK);
}

static void test_shift(void **state)
{
    (void)state;
    static const double shifts[][2] = {{0, 0}, {3.27, -5.61}, {-2.6, 1.7}, {0.4, 0.5}};
    uf_random_start(&dice, 3, 3);
    for (int k = 0; k < 4; k++) {
        uf_plane near = plane(256, 230, 0), wide = plane(256, 230, 0);
        put_discs(near, 0, 0, 900);
        put_discs(wide, shifts[k][0], shifts[k][1], 2400);
        add_noise(near, 11);
        add_noise(wide, 11);
        uf_shift_estimate found;
        find(near, wide, &found);
        assert_true(found.trusted);
        assert_near_abs(found.dx_px, shifts[k][0], 0.1);
        assert_near_abs(found.dy_px, shifts[k][1], 0.1);
    }
}

static void test_shift_of_noise_is_not_trusted(void **state)
{
    (void)state;
    uf_plane near = plane(200, 200, 300), wide = plane(200, 200, 300);
    uf_random_start(&dice, 4, 4);
    add_noise(near, 11);
    add_noise(wide, 11);
    uf_shift_estimate found;
    find(near, wide, &found);
    assert_false(found.trusted);
    find(plane(5, 5, 1), plane(5, 5, 1), &found);
    assert_false(found.trusted);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_flat_and_offset), cmocka_unit_test(test_defect_map),
        cmocka_unit_test(test_hot_pixels_and_points), cmocka_unit_test(test_background_of_a_crowded_field),
        cmocka_unit_test(test_shift), cmocka_unit_test(test_shift_of_noise_is_not_trusted)};
    return cmocka_run_group_tests(tests, NULL, tear_down);
}
