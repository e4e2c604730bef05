/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Halo and slope, on a field whose every part is a closed form: a rectangular cell of even light, blurred by a Gaussian
 * (a product of differences of the error function), on a tilted background, with noise of known spread.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "blank.h"
#include "correct/halo.h"
#include "near.h"
#include "scene/random.h"

enum { WIDTH = 520, HEIGHT = 440, FACTOR = 5, LEFT = 130, RIGHT = 330, TOP = 120, BOTTOM = 300 };
static const double pixel_um = 0.1, light = 4000, level = 500;

typedef struct bench {
    uf_work work;
    uf_cell_map cells;
    uf_channel wide, near;
} bench;

/* Share of a unit step from a to b that a Gaussian of sigma s puts at x. */
static double blurred_step(double x, double a, double b, double s)
{
    return 0.5 * (erf((b - x) / (s * sqrt(2))) - erf((a - x) / (s * sqrt(2))));
}

static double halo_at(int x, int y, double sigma_px)
{
    return blurred_step(x, LEFT - 0.5, RIGHT - 0.5, sigma_px) * blurred_step(y, TOP - 0.5, BOTTOM - 0.5, sigma_px);
}

static int inside(int x, int y)
{
    return x >= LEFT && x < RIGHT && y >= TOP && y < BOTTOM;
}

static uf_channel channel_of(bench *b, double own, double share, double sigma_um, double slope)
{
    static uf_random dice;
    uf_channel channel = {.background_adu = level, .noise = {.gain_e_per_adu = 2, .excess2 = 1}};
    assert_int_equal(uf_plane_take(&b->work, WIDTH, HEIGHT, &channel.image, NULL), UF_OK);
    uf_random_start(&dice, 77, 0);
    for (int y = 0; y < HEIGHT; y++)
        for (int x = 0; x < WIDTH; x++) {
            double value = level * (1 + slope * ((x + 0.5) / WIDTH - 0.5)) + (inside(x, y) ? own : 0) +
                           share * light * halo_at(x, y, sigma_um / pixel_um);
            uf_plane_row(channel.image, y)[x] = (float)(value + 12 * uf_random_normal(&dice));
        }
    return channel;
}

static void map_cells(bench *b)
{
    b->cells.labels = blank(&b->work, WIDTH, HEIGHT);
    b->cells.factor = FACTOR;
    assert_int_equal(uf_plane_take(&b->work, WIDTH / FACTOR, HEIGHT / FACTOR, &b->cells.outside_px, NULL), UF_OK);
    for (int y = 0; y < HEIGHT; y++)
        for (int x = 0; x < WIDTH; x++)
            uf_labels_row(b->cells.labels, y)[x] = inside(x, y);
    for (int v = 0; v < HEIGHT / FACTOR; v++)
        for (int u = 0; u < WIDTH / FACTOR; u++) {
            double x = (u + 0.5) * FACTOR, y = (v + 0.5) * FACTOR;
            double dx = fmax(0, fmax(LEFT - x, x - RIGHT)), dy = fmax(0, fmax(TOP - y, y - BOTTOM));
            uf_plane_row(b->cells.outside_px, v)[u] = (float)hypot(dx, dy);
        }
}

/* Largest distance of the mean over 40 x 40 px from `expected`, the cell's own light taken off. */
static double worst(const uf_channel *channel, double own, double expected)
{
    double most = 0;
    for (int v = 0; v + 40 <= HEIGHT; v += 40)
        for (int u = 0; u + 40 <= WIDTH; u += 40) {
            double sum = 0;
            for (int y = v; y < v + 40; y++)
                for (int x = u; x < u + 40; x++)
                    sum += (double)uf_plane_row(channel->image, y)[x] - (inside(x, y) ? own : 0);
            most = fmax(most, fabs(sum / 1600 - expected));
        }
    return most;
}

static void test_haze_is_found_and_taken_out(void **state)
{
    (void)state;
    bench b = {0};
    uf_halo halo;
    map_cells(&b);
    b.wide = channel_of(&b, light, 0.083, 2.3, 0);
    assert_int_equal(uf_halo_remove(&b.work, &b.wide, &b.cells, pixel_um, &b.wide, &halo, NULL), UF_OK);
    assert_near_abs(halo.share, 0.083, 0.008); /* a tenth: share and blur trade off in the tail that is seen */
    assert_near_rel(halo.blur_um, 2.3, 0.1);
    assert_true(halo.share_sd > 0 && halo.share_sd < 0.02);
    assert_near_abs(halo.slope, 0, 0.01);
    /* a pixel's noise of 12 is 0.3 in a mean of 1600; the light of the halo was 330 */
    assert_true(worst(&b.wide, light, b.wide.background_adu) < 33);
    assert_near_abs(b.wide.background_adu, level, 2);
    uf_arena_free(&b.work.arena);
}

static void test_pedestal_under_the_near_image(void **state)
{
    (void)state;
    bench b = {0};
    uf_halo halo;
    map_cells(&b);
    b.wide = channel_of(&b, light, 0, 1, 0);
    b.near = channel_of(&b, 700, 0.041, 4.6, 0);
    assert_int_equal(uf_halo_remove(&b.work, &b.wide, &b.cells, pixel_um, &b.near, &halo, NULL), UF_OK);
    assert_near_abs(halo.share, 0.041, 0.003);
    assert_true(worst(&b.near, 700, b.near.background_adu) < 8);
    uf_arena_free(&b.work.arena);
}

static void test_slope_is_flattened(void **state)
{
    (void)state;
    bench b = {0};
    uf_halo halo;
    map_cells(&b);
    b.wide = channel_of(&b, light, 0, 1, 0.37);
    assert_int_equal(uf_halo_remove(&b.work, &b.wide, &b.cells, pixel_um, &b.wide, &halo, NULL), UF_OK);
    assert_near_abs(halo.share, 0, 0);
    assert_near_abs(halo.slope, 0.37, 0.005);
    assert_true(worst(&b.wide, light, level) < 2);
    uf_arena_free(&b.work.arena);
}

/* An even field is left as it is, to the bit. */
static void test_nothing_to_take_out(void **state)
{
    (void)state;
    bench b = {0};
    uf_halo halo;
    map_cells(&b);
    b.wide = channel_of(&b, light, 0, 1, 0);
    uf_channel before = channel_of(&b, light, 0, 1, 0);
    assert_int_equal(uf_halo_remove(&b.work, &b.wide, &b.cells, pixel_um, &b.wide, &halo, NULL), UF_OK);
    assert_near_abs(halo.share, 0, 0);
    assert_near_abs(halo.slope, 0, 0);
    assert_memory_equal(b.wide.image.data, before.image.data, WIDTH * HEIGHT * sizeof(float));
    assert_near_abs(b.wide.background_adu, level, 0);
    uf_arena_free(&b.work.arena);
}

/* Half of the light a micrometre out of focus is the dorsal membrane's: it belongs to the cell and stays. */
static void test_dorsal_light_is_no_halo(void **state)
{
    (void)state;
    bench b = {0};
    uf_halo halo;
    map_cells(&b);
    b.wide = channel_of(&b, 0.55 * light, 0.45, 0.95, 0);
    uf_channel before = channel_of(&b, 0.55 * light, 0.45, 0.95, 0);
    assert_int_equal(uf_halo_remove(&b.work, &b.wide, &b.cells, pixel_um, &b.wide, &halo, NULL), UF_OK);
    assert_near_abs(halo.share, 0, 0);
    assert_memory_equal(b.wide.image.data, before.image.data, WIDTH * HEIGHT * sizeof(float));
    uf_arena_free(&b.work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_haze_is_found_and_taken_out),
                                       cmocka_unit_test(test_pedestal_under_the_near_image),
                                       cmocka_unit_test(test_slope_is_flattened),
                                       cmocka_unit_test(test_nothing_to_take_out),
                                       cmocka_unit_test(test_dorsal_light_is_no_halo)};
    return cmocka_run_group_tests_name("halo", tests, NULL, NULL);
}
