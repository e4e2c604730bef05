/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Thumbnails and contact sheets, read back. Expected values are closed forms from the definitions in the headers. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <cmocka.h>

#include "near.h"
#include "report/contact_sheet.h"
#include "report/palette.h"
#include "report/thumbnail.h"

/* A field whose left half is at 100, the right half at 400 and one pixel in a hundred at 1600. */
static void make_field(uf_work *work, int width, int height, uf_plane *near, uf_labels *labels)
{
    assert_int_equal(uf_plane_take(work, width, height, near, NULL), UF_OK);
    assert_int_equal(uf_labels_take(work, width, height, labels, NULL), UF_OK);
    labels->count = 1;
    for (int y = 0; y < height; y++)
        for (int x = 0; x < width; x++) {
            uf_plane_row(*near, y)[x] = x < width / 2 ? 100 : y < height / 20 ? 1600 : 400;
            uf_labels_row(*labels, y)[x] = x >= width / 2;
        }
}

static void test_sizes(void **state)
{
    (void)state;
    static const int sizes[][4] = {{256, 256, 256, 256}, {257, 100, 129, 50}, {2048, 1024, 256, 128},
                                   {1, 700, 1, 234},     {600, 599, 200, 200}};
    for (size_t k = 0; k < sizeof sizes / sizeof *sizes; k++) {
        uf_work work = {0};
        uf_thumbnail_input in = {.near_background_adu = 0};
        uf_indexed picture;
        double white;
        make_field(&work, sizes[k][0], sizes[k][1], &in.near_adu, &in.labels);
        assert_int_equal(uf_thumbnail_draw(&work, &in, &picture, &white, NULL), UF_OK);
        assert_int_equal(picture.width, sizes[k][2]);
        assert_int_equal(picture.height, sizes[k][3]);
        uf_arena_free(&work.arena);
    }
}

/* White is the 99.7th percentile, here the 1600 of 2.5 % of the field; grey is the square root: 100 is a quarter, 400 half. */
static void test_levels_and_outlines(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_thumbnail_input in = {.near_background_adu = 0};
    uf_indexed picture;
    double white;
    make_field(&work, 400, 400, &in.near_adu, &in.labels);
    assert_int_equal(uf_thumbnail_draw(&work, &in, &picture, &white, NULL), UF_OK);
    assert_near_rel(white, 1600, 0.005);
    int top = UF_NEAR_LEVELS - 1;
    assert_near_abs(picture.data[150 * 200 + 40], UF_INK_NEAR + top / 4.0, 0.6);
    assert_near_abs(picture.data[150 * 200 + 160], UF_INK_NEAR + top / 2.0, 0.6);
    for (int y = 0; y < 200; y++)
        for (int x = 0; x < 200; x++) /* open at the image's edge, one pixel along the cell's left border */
            assert_int_equal(picture.data[y * 200 + x] == UF_INK_OUTLINE, x == 100);
    uf_arena_free(&work.arena);
}

static uf_contact_tile tile(uf_indexed thumbnail, double white)
{
    return (uf_contact_tile){thumbnail, white, "P/A01/1", "3 cells", "", ""};
}

/* Another white is another factor under the root; outlines and what is clipped stay what they are. */
static void test_one_white(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_indexed stamp = {.width = 4, .height = 1}, picture;
    uint8_t data[] = {UF_INK_NEAR, UF_INK_NEAR + 40, UF_INK_NEAR + 70, UF_INK_OUTLINE};
    stamp.data = data;
    uf_palette_fill(&stamp);
    const uf_contact_tile tiles[] = {tile(stamp, 1000), tile(stamp, 250), tile(stamp, 4000)};
    uf_contact_sheet sheet = {"P A01", "note", tiles, 3, 1000};
    uf_contact_layout at;
    assert_int_equal(uf_contact_sheet_draw(&work, &sheet, &picture, &at, NULL), UF_OK);
    assert_int_equal(at.columns, 2);
    static const int expected[3][4] = {{0, 40, 70, UF_INK_OUTLINE}, {0, 20, 35, UF_INK_OUTLINE}, {0, 75, 75, UF_INK_OUTLINE}};
    for (int k = 0; k < 3; k++)
        for (int x = 0; x < 4; x++) {
            int px = at.x + k % 2 * at.step_x + x, py = at.y + k / 2 * at.step_y;
            assert_int_equal(picture.data[py * picture.width + px], expected[k][x]);
        }
    uf_arena_free(&work.arena);
}

static void test_missing_and_flagged(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_indexed picture;
    uf_contact_tile tiles[] = {{.name = "a", .numbers = "failed", .flags = "", .why = "a long reason why it failed"},
                               {.name = "b", .numbers = "0 cells", .flags = "empty", .why = ""}};
    uf_contact_sheet sheet = {"t", "", tiles, 2, (double)NAN};
    uf_contact_layout at;
    assert_int_equal(uf_contact_sheet_draw(&work, &sheet, &picture, &at, NULL), UF_OK);
    const uint8_t *above = picture.data + (at.y - 2) * picture.width; /* the second of three lines of a heavy frame */
    assert_int_equal(above[at.x + 50], UF_INK_PAGE);
    assert_int_equal(above[at.x + at.step_x + 50], UF_INK_CUTOFF);
    uf_arena_free(&work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_sizes), cmocka_unit_test(test_levels_and_outlines),
                                       cmocka_unit_test(test_one_white), cmocka_unit_test(test_missing_and_flagged)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
