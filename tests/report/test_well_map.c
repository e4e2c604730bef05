/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Plate maps by value, read back. Expected places and steps are worked out here from the definitions in the headers; the order
 * of the ramp is checked by relative luminance (WCAG 2.1). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "near.h"
#include "report/well_map.h"

static const char *const letters[] = {"A", "B", "C", "D", "E", "F", "G", "H", "I", "J", "K", "L", "M", "N", "O", "P",
                                      "Q", "R", "S", "T", "U", "V", "W", "X", "Y", "Z", "AA", "AB", "AC", "AD", "AE", "AF"};
static const double none = (double)NAN;

static void test_steps(void **state)
{
    (void)state;
    assert_int_equal(uf_well_map_step(10, 10, 60), 0);
    assert_int_equal(uf_well_map_step(60, 10, 60), UF_WELL_MAP_STEPS - 1);
    assert_int_equal(uf_well_map_step(9, 10, 60), 0);
    assert_int_equal(uf_well_map_step(61, 10, 60), UF_WELL_MAP_STEPS - 1);
    assert_int_equal(uf_well_map_step(11.99, 10, 60), 0); /* a step is 2 wide */
    assert_int_equal(uf_well_map_step(12.01, 10, 60), 1);
    assert_int_equal(uf_well_map_step(35, 10, 60), 12);
}

/* By hand: 0.75 and 1.25 of the middle are held; at most eight steps of 1, 2 or 5. */
static void test_ranges(void **state)
{
    (void)state;
    static const double cases[][4] = {{100, 104, 70, 130}, {0, 0.5, 0, 0.5}, {3, 97, 0, 100}, {-20, 20, -20, 20}};
    for (size_t k = 0; k < sizeof cases / sizeof *cases; k++) {
        double from, to;
        uf_well_map_range(cases[k][0], cases[k][1], &from, &to);
        assert_near_abs(from, cases[k][2], 1e-9);
        assert_near_abs(to, cases[k][3], 1e-9);
    }
    double from, to;
    uf_well_map_range(none, none, &from, &to);
    assert_true(isfinite(from) && to > from);
}

typedef struct drawn {
    uf_work work;
    uf_indexed picture;
    uf_plate_grid grid;
    uf_value_well *wells;
} drawn;

static drawn draw(int rows, int columns, const uf_value_well *first, int count)
{
    drawn d = {0};
    d.wells = calloc((size_t)(rows * columns), sizeof *d.wells);
    for (int k = 0; k < rows * columns; k++)
        d.wells[k] = k < count ? first[k] : (uf_value_well){UF_WELL_ABSENT, none, UF_MAP_THIN, "", ""};
    uf_well_map map = {"P", "gap (nm)", rows, columns, letters, d.wells, 20, 80};
    assert_int_equal(uf_well_map_draw(&d.work, &map, &d.picture, &d.grid, NULL), UF_OK);
    return d;
}

static void drop(drawn *d)
{
    uf_arena_free(&d->work.arena);
    free(d->wells);
}

/* Pixels of an index in the lower quarter of a well, within its frame. */
static int count_in(const drawn *d, int row, int column, int index, int *all)
{
    uf_box box = uf_plate_grid_well(&d->grid, row, column);
    int count = 0;
    *all = 0;
    for (int y = box.y1 - 1 - d->grid.cell_height / 4; y < box.y1 - 5; y++)
        for (int x = box.x0 + 5; x < box.x1 - 5; x++) {
            (*all)++;
            count += d->picture.data[y * d->picture.width + x] == index;
        }
    return count;
}

/* Formats of ANSI/SLAS: every well is there, square, within the picture. */
static void test_all_formats_fit(void **state)
{
    (void)state;
    static const int formats[][2] = {{2, 3}, {3, 4}, {4, 6}, {6, 8}, {8, 12}, {16, 24}, {32, 48}};
    const uf_value_well corner = {UF_WELL_MEASURED, 50, UF_MAP_THIN, "", ""};
    for (size_t k = 0; k < sizeof formats / sizeof *formats; k++) {
        drawn d = draw(formats[k][0], formats[k][1], &corner, 1);
        uf_box last = uf_plate_grid_well(&d.grid, formats[k][0] - 1, formats[k][1] - 1);
        assert_int_equal(d.grid.cell_width, d.grid.cell_height);
        assert_true(last.x1 <= d.picture.width && last.y1 <= d.picture.height);
        uf_box first = uf_plate_grid_well(&d.grid, 0, 0);
        int x = (first.x0 + first.x1) / 2, y = first.y1 - 5;
        /* 20 .. 80 is drawn from 20 to 80 in steps of 10: 50 is in the middle. */
        assert_int_equal(d.picture.data[y * d.picture.width + x], 12 * UF_WELL_MAP_STEP);
        drop(&d);
    }
}

static void test_states_look_different(void **state)
{
    (void)state;
    const uf_value_well wells[] = {{UF_WELL_MEASURED, 20, UF_MAP_THIN, "", ""},
                                   {UF_WELL_MEASURED, 80, UF_MAP_THIN, "", ""},
                                   {UF_WELL_MEASURED, none, UF_MAP_THIN, "", ""},
                                   {UF_WELL_EMPTY, none, UF_MAP_THIN, "", ""},
                                   {UF_WELL_FAILED, none, UF_MAP_THIN, "", ""},
                                   {UF_WELL_NOT_IMAGED, none, UF_MAP_THIN, "", ""}};
    drawn d = draw(8, 12, wells, 6);
    int all, shares[12];
    int low = count_in(&d, 0, 0, 0, &all), high = count_in(&d, 0, 1, (UF_WELL_MAP_STEPS - 1) * UF_WELL_MAP_STEP, &all);
    assert_int_equal(low, all);
    assert_int_equal(high, all);
    for (int c = 2; c < 7; c++)
        shares[c] = count_in(&d, 0, c, UF_WELL_MAP_PAGE, &all);
    assert_int_equal(shares[6], all); /* not on the sheet: bare */
    for (int a = 2; a < 6; a++) {
        assert_true(shares[a] < all && shares[a] > all / 2);
        for (int b = 2; b < a; b++)
            assert_int_not_equal(shares[a], shares[b]);
    }
    drop(&d);
}

static double luminance(const uint8_t c[3])
{
    static const double weights[] = {0.2126, 0.7152, 0.0722};
    double sum = 0;
    for (int k = 0; k < 3; k++) {
        double v = c[k] / 255.0;
        sum += weights[k] * (v <= 0.04045 ? v / 12.92 : pow((v + 0.055) / 1.055, 2.4));
    }
    return sum;
}

/* Words on every step have the contrast that WCAG 2.1 asks for at least of large words, 3 to 1. */
static void test_ramp_and_words(void **state)
{
    (void)state;
    const uf_value_well well = {UF_WELL_MEASURED, 50, UF_MAP_THIN, "", ""};
    drawn d = draw(2, 3, &well, 1);
    for (int step = 0; step < UF_WELL_MAP_STEPS; step++) {
        double ground = luminance(d.picture.palette[step * UF_WELL_MAP_STEP]);
        double words = luminance(d.picture.palette[step * UF_WELL_MAP_STEP + UF_FONT_LEVELS]);
        double contrast = (fmax(ground, words) + 0.05) / (fmin(ground, words) + 0.05);
        assert_true(contrast >= 3);
        assert_true(!step || ground < luminance(d.picture.palette[(step - 1) * UF_WELL_MAP_STEP]));
    }
    drop(&d);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_steps), cmocka_unit_test(test_ranges),
                                       cmocka_unit_test(test_all_formats_fit),
                                       cmocka_unit_test(test_states_look_different),
                                       cmocka_unit_test(test_ramp_and_words)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
