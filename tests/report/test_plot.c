/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Plots, read back: what is drawn where the axes say, and nowhere else. Expected places are worked out here from the
 * definitions in the headers. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "near.h"
#include "report/plot_parts.h"
#include "report/plot_scale.h"

enum { WIDTH = 640, HEIGHT = 420 };
static const double none = (double)NAN;

static int is_ink(uint8_t index, uf_plot_ink ink)
{
    return index >= plot_shades(ink) && index < plot_shades(ink) + PLOT_SHADES;
}

static int ink_in(const uf_indexed *picture, uf_box box, uf_plot_ink ink)
{
    int count = 0;
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            count += is_ink(picture->data[y * picture->width + x], ink);
    return count;
}

static uf_box around(double x, double y, int reach)
{
    int u = (int)floor(x + 0.5), v = (int)floor(y + 0.5);
    return (uf_box){u - reach, v - reach, u + reach + 1, v + reach + 1};
}

/* 1, 2 or 5 times a power of ten, the smallest that gives at most so many pieces (by hand). */
static void test_steps(void **state)
{
    (void)state;
    static const double cases[][3] = {{10, 5, 2}, {10, 10, 1}, {97, 10, 10}, {0.3, 7, 0.05}, {1, 3, 0.5}, {6e5, 4, 2e5}};
    for (size_t k = 0; k < sizeof cases / sizeof cases[0]; k++)
        assert_near_rel(uf_plot_step(cases[k][0], (int)cases[k][1]), cases[k][2], 1e-12);
}

static void test_ranges_are_never_empty(void **state)
{
    (void)state;
    static const double data[][2] = {{3, 3}, {0, 0}, {-2, -2}, {(double)NAN, (double)NAN}, {1e-9, 1e-9}};
    for (int log10 = 0; log10 < 2; log10++)
        for (size_t k = 0; k < sizeof data / sizeof data[0]; k++) {
            uf_plot_axis axis = {"x", none, none, log10};
            double from, to;
            plot_range(&axis, data[k][0], data[k][1], 5, &from, &to);
            assert_true(isfinite(from) && isfinite(to) && to > from);
            assert_true(!log10 || from > 0);
        }
    uf_plot_axis axis = {"x", none, none, 0};
    double from, to;
    plot_range(&axis, 13, 87, 5, &from, &to); /* widened to whole steps of 20 */
    assert_near_abs(from, 0, 0);
    assert_near_abs(to, 100, 0);
}

static void test_log_ticks(void **state)
{
    (void)state;
    plot_tick ticks[PLOT_TICKS];
    int labelled = 0, count = plot_ticks(0.1, 1000, 1, 5, ticks);
    assert_int_equal(count, 4 * 9 + 1);
    for (int k = 0; k < count; k++)
        labelled += ticks[k].labelled;
    assert_int_equal(labelled, 5);
    assert_string_equal(ticks[0].label, "0.1");
    assert_int_equal(plot_ticks(1, 10, 1, 5, ticks), 10);
    assert_true(ticks[1].labelled && ticks[4].labelled && !ticks[2].labelled);
}

/* Marks lie where the frame maps their values; a line joins points and breaks at NaN; nothing spills out. */
static void test_points_lie_where_the_axes_say(void **state)
{
    (void)state;
    static const double x[] = {0, 2.385, 5, 7, 10}, y[] = {1, 3, (double)NAN, 8, 400};
    const uf_plot_series series[] = {{"marks", 5, x, y, NULL, NULL, UF_PLOT_BLUE, UF_LINE_SOLID, UF_MARK_SQUARE, UF_SPREAD_NONE}};
    const uf_plot_panel panel = {"title", {"x (um)", 0, 10, 0}, {"y (nm)", 0, 10, 0}, series, 1, NULL, 0, NULL, 0};
    uf_work work = {0};
    uf_indexed picture;
    uf_plot_frame f;
    assert_int_equal(uf_plot_draw(&work, &panel, 1, WIDTH, HEIGHT, &picture, &f, NULL), UF_OK);
    assert_near_abs(uf_plot_x(&f, 2.5), f.box.x0 + 0.25 * (f.box.x1 - 1 - f.box.x0), 1e-9);
    for (int k = 0; k < 5; k++)
        if (k == 0 || k == 1 || k == 3)
            assert_true(ink_in(&picture, around(uf_plot_x(&f, x[k]), uf_plot_y(&f, y[k]), 3), UF_PLOT_BLUE) >= 28);
    double middle_x = (uf_plot_x(&f, 0) + uf_plot_x(&f, 2.385)) / 2, middle_y = (uf_plot_y(&f, 1) + uf_plot_y(&f, 3)) / 2;
    assert_true(ink_in(&picture, around(middle_x, middle_y, 1), UF_PLOT_BLUE) > 0);
    int gap_from = (int)uf_plot_x(&f, 3), gap_to = (int)uf_plot_x(&f, 6.5);
    assert_int_equal(ink_in(&picture, (uf_box){gap_from, f.box.y0, gap_to, f.box.y1}, UF_PLOT_BLUE), 0);
    assert_int_equal(ink_in(&picture, (uf_box){0, 0, WIDTH, f.box.y0}, UF_PLOT_BLUE), 0);
    assert_int_equal(ink_in(&picture, (uf_box){f.box.x1, 0, WIDTH, f.box.y1}, UF_PLOT_BLUE), 0);
    uf_arena_free(&work.arena);
}

static void test_log_axis_halves_decades(void **state)
{
    (void)state;
    static const double x[] = {1, 10, 100, -5, 0}, y[] = {1, 2, 3, 2, 2};
    const uf_plot_series series[] = {{NULL, 5, x, y, y, y, UF_PLOT_DARK, UF_LINE_NONE, UF_MARK_RING, UF_SPREAD_BARS}};
    const uf_plot_panel panel = {NULL, {"dose (uM)", none, none, 1}, {"y", none, none, 0}, series, 1, NULL, 0, NULL, 0};
    uf_work work = {0};
    uf_indexed picture;
    uf_plot_frame f;
    assert_int_equal(uf_plot_draw(&work, &panel, 1, WIDTH, HEIGHT, &picture, &f, NULL), UF_OK);
    assert_near_abs(f.x_from, 1, 0);
    assert_near_abs(f.x_to, 100, 1e-9);
    assert_near_abs(uf_plot_x(&f, 10), (f.box.x0 + f.box.x1 - 1) / 2.0, 1e-9);
    uf_arena_free(&work.arena);
}

/* A quarter turn to the left takes (right, down) to (down, -right): pixel by pixel. */
static void test_text_turned_is_text(void **state)
{
    (void)state;
    static uint8_t level[200 * 200], upright[200 * 200];
    uf_canvas a = {level, 200, 200, 200}, b = {upright, 200, 200, 200};
    assert_int_equal(uf_font_draw(a, UF_FONT_SMALL, 60, 100, "1/e depth (nm)", 1) - 60,
                     100 - uf_font_draw_up(b, UF_FONT_SMALL, 100, 100, "1/e depth (nm)", 1));
    int inked = 0;
    for (int y = 80; y < 120; y++)
        for (int x = 50; x < 190; x++) {
            int right = x - 60, down = y - 100, up_x = 100 + down, up_y = 100 - right;
            if (up_y < 0 || up_y >= 200)
                continue;
            assert_int_equal(level[y * 200 + x], upright[up_y * 200 + up_x]);
            inked += level[y * 200 + x] != 0;
        }
    assert_true(inked > 100);
}

/* Inks fall apart in grey print: luminance (IEC 61966-2-1, ITU-R BT.709 weights) differs by at least 0.04 from each
 * other; bands stay lighter than any ink. */
static double luminance(const uint8_t colour[3])
{
    static const double weights[] = {0.2126, 0.7152, 0.0722};
    double sum = 0;
    for (int k = 0; k < 3; k++) {
        double v = colour[k] / 255.0;
        sum += weights[k] * (v <= 0.04045 ? v / 12.92 : pow((v + 0.055) / 1.055, 2.4));
    }
    return sum;
}

static void test_inks_differ_in_grey(void **state)
{
    (void)state;
    uf_indexed picture;
    plot_palette(&picture);
    for (int a = 0; a < UF_PLOT_INKS; a++)
        for (int b = 0; b < a; b++) {
            double la = luminance(picture.palette[plot_shades((uf_plot_ink)a) + PLOT_SHADES - 1]);
            double lb = luminance(picture.palette[plot_shades((uf_plot_ink)b) + PLOT_SHADES - 1]);
            assert_true(fabs(la - lb) > 0.04);
            assert_true(luminance(picture.palette[PLOT_BAND + a]) > fmax(la, lb) + 0.2);
        }
}

static void test_nothing_to_draw(void **state)
{
    (void)state;
    const uf_plot_panel empty[] = {{"none", {"x", none, none, 0}, {"y", none, none, 1}, NULL, 0, NULL, 0, NULL, 0},
                                   {NULL, {"x", 5, 5, 0}, {"y", none, none, 0}, NULL, 0, NULL, 0, NULL, 0}};
    uf_work work = {0};
    uf_indexed picture;
    uf_plot_frame frames[2];
    assert_int_equal(uf_plot_draw(&work, empty, 2, WIDTH, HEIGHT, &picture, frames, NULL), UF_OK);
    assert_true(frames[1].x_to > frames[1].x_from);
    assert_int_equal(uf_plot_draw(&work, empty, 2, 90, 60, &picture, frames, NULL), UF_OK);
    uf_arena_free(&work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_steps), cmocka_unit_test(test_ranges_are_never_empty), cmocka_unit_test(test_log_ticks),
        cmocka_unit_test(test_points_lie_where_the_axes_say), cmocka_unit_test(test_log_axis_halves_decades),
        cmocka_unit_test(test_text_turned_is_text), cmocka_unit_test(test_inks_differ_in_grey),
        cmocka_unit_test(test_nothing_to_draw)};
    return cmocka_run_group_tests_name("plots", tests, NULL, NULL);
}
