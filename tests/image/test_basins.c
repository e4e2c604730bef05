/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Parting two discs at their neck, whose width is known, and tidying labels. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "blank.h"
#include "image/basins.h"
#include "image/distance.h"
#include "near.h"

static uf_work work;

static int tear_down(void **state)
{
    (void)state;
    uf_arena_free(&work.arena);
    return 0;
}

/* Two discs of radius 40 whose centres are `apart` away: the neck's half width is sqrt(40^2 - (apart / 2)^2). */
static int parts_of_two_discs(int apart, double neck)
{
    uf_labels labels = blank(&work, 90 + apart, 90);
    for (int y = 0; y < 90; y++)
        for (int x = 0; x < labels.width; x++)
            if (hypot(x - 45, y - 45) <= 40 || hypot(x - 45 - apart, y - 45) <= 40)
                uf_labels_row(labels, y)[x] = 1;
    uf_plane depth;
    assert_int_equal(uf_plane_take(&work, labels.width, 90, &depth, NULL), UF_OK);
    assert_int_equal(uf_distance_inside(&work, labels, depth, NULL), UF_OK);
    assert_int_equal(uf_basins(&work, depth, neck, &labels, NULL), UF_OK);
    assert_int_equal(uf_labels_tidy(&work, 1, 1e9, &labels, NULL), UF_OK);
    if (labels.count == 2) { /* the border runs halfway, as far as a quarter of a pixel of depth can tell */
        assert_int_equal(uf_labels_row(labels, 45)[45 + apart / 2 - 6], 1);
        assert_int_equal(uf_labels_row(labels, 45)[45 + apart / 2 + 6], 2);
    }
    return labels.count;
}

/* Closed form: the half width over the radius is 0.661 at a distance of 60, 0.866 at 40, and parting flips there. */
static void test_neck(void **state)
{
    (void)state;
    static const int apart[] = {60, 40, 72};
    for (int k = 0; k < 3; k++) {
        double ratio = sqrt(1600.0 - apart[k] * apart[k] / 4.0) / 40;
        assert_int_equal(parts_of_two_discs(apart[k], ratio + 0.06), 2);
        assert_int_equal(parts_of_two_discs(apart[k], ratio - 0.06), 1);
    }
    assert_int_equal(parts_of_two_discs(60, 0), 1);
}

static void test_tidy(void **state)
{
    (void)state;
    static const char picture[6][13] = {"aaaa..bbbb.e", "aaaa..bbbb..", "aacc..bbbb..", "............", "dddddddddddd", "dddddddddddd"};
    uf_labels labels = blank(&work, 12, 6);
    for (int y = 0; y < 6; y++)
        for (int x = 0; x < 12; x++)
            uf_labels_row(labels, y)[x] = picture[y][x] == '.' ? 0 : 9 - (picture[y][x] - 'a');
    labels.count = 9;
    /* c (2 px) joins a, which it borders; e (1 px) stands alone and goes; d (24 px) is too large */
    assert_int_equal(uf_labels_tidy(&work, 3, 20, &labels, NULL), UF_OK);
    assert_int_equal(labels.count, 2);
    for (int y = 0; y < 6; y++)
        for (int x = 0; x < 12; x++) {
            char c = picture[y][x];
            assert_int_equal(uf_labels_row(labels, y)[x], c == 'a' || c == 'c' ? 1 : c == 'b' ? 2 : 0);
        }
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_neck), cmocka_unit_test(test_tidy)};
    return cmocka_run_group_tests(tests, NULL, tear_down);
}
