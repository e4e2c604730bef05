/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Outlines of labels. Small shapes have their rings written out by hand. Random labels are checked by what the header
 * promises: even-odd filling gives the pixels back, the shoelace areas add up to their number, every corner turns.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

#include "blank.h"
#include "image/outlines.h"

static uf_work work;

static int tear_down(void **state)
{
    (void)state;
    uf_arena_free(&work.arena);
    return 0;
}

/* Letters a, b .. are labels 1, 2 ..; rows are separated by blanks. */
static uf_labels picture(const char *rows)
{
    int width = (int)strcspn(rows, " "), height = (int)(strlen(rows) + 1) / (width + 1);
    uf_labels labels = blank(&work, width, height);
    for (int y = 0; y < height; y++)
        for (int x = 0; x < width; x++) {
            char c = rows[y * (width + 1) + x];
            int label = c == '.' ? 0 : c - 'a' + 1;
            uf_labels_row(labels, y)[x] = label;
            labels.count = label > labels.count ? label : labels.count;
        }
    return labels;
}

static uf_rings trace(uf_labels labels, int label)
{
    uf_box boxes[64];
    uf_rings rings;
    assert_true(labels.count < 64);
    uf_label_boxes(labels, boxes);
    assert_int_equal(uf_outline_trace(&work, labels, label, boxes[label], &rings, NULL), UF_OK);
    return rings;
}

static size_t first_of(const uf_rings *rings, size_t ring)
{
    return ring ? rings->ends[ring - 1] : 0;
}

/* ---- what the rings promise --------------------------------------------------------------------------- */

/* Twice the signed area; y points down, so that running clockwise as seen is positive. */
static int64_t shoelace(const uf_rings *rings, size_t ring)
{
    size_t from = first_of(rings, ring), to = rings->ends[ring];
    int64_t sum = 0;
    for (size_t k = from; k < to; k++) {
        uf_corner a = rings->corners[k], b = rings->corners[k + 1 < to ? k + 1 : from];
        sum += (int64_t)a.x * b.y - (int64_t)b.x * a.y;
    }
    return sum;
}

/* Even-odd: how many upright edges a ray from the pixel's centre to the left crosses. */
static bool is_inside(const uf_rings *rings, int x, int y)
{
    int crossed = 0;
    for (size_t ring = 0; ring < rings->count; ring++) {
        size_t from = first_of(rings, ring), to = rings->ends[ring];
        for (size_t k = from; k < to; k++) {
            uf_corner a = rings->corners[k], b = rings->corners[k + 1 < to ? k + 1 : from];
            int low = a.y < b.y ? a.y : b.y, high = a.y < b.y ? b.y : a.y;
            crossed += a.x == b.x && a.x <= x && low <= y && y < high;
        }
    }
    return crossed % 2 == 1;
}

/* Edges run along the axes by turns: a corner in the middle of a straight edge would break the turns. */
static void every_corner_turns(const uf_rings *rings, size_t ring)
{
    size_t from = first_of(rings, ring), to = rings->ends[ring];
    assert_true(to - from >= 4 && (to - from) % 2 == 0);
    for (size_t k = from; k < to; k++) {
        uf_corner a = rings->corners[k], b = rings->corners[k + 1 < to ? k + 1 : from];
        bool level = (k - from) % 2 == 0; /* the first edge is an upper edge */
        assert_true(level ? a.y == b.y && a.x != b.x : a.x == b.x && a.y != b.y);
    }
    assert_true(rings->corners[from + 1].x > rings->corners[from].x);
}

static void check_label(uf_labels labels, int label)
{
    uf_rings rings = trace(labels, label);
    int64_t area = 0, pixels = 0;
    for (size_t ring = 0; ring < rings.count; ring++) {
        every_corner_turns(&rings, ring);
        area += shoelace(&rings, ring);
    }
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            bool on = uf_labels_row(labels, y)[x] == label;
            pixels += on;
            assert_int_equal(is_inside(&rings, x, y), on);
        }
    assert_int_equal(area, 2 * pixels);
}

/* ---- shapes ------------------------------------------------------------------------------------------- */

typedef struct expected_rings {
    const char *rows;
    size_t count;
    size_t corners[5];
    int area[5]; /* of each ring, holes negative */
} expected_rings;

static void shapes_have_the_rings_counted_by_hand(void **state)
{
    (void)state;
    static const expected_rings shapes[] = {
        {"... .a. ...", 1, {4}, {1}},
        {"a", 1, {4}, {1}},
        {"aaa aaa", 1, {4}, {6}},
        {"aaa a.a aaa", 2, {4, 4}, {9, -1}},
        {"a.. .aa .aa", 2, {4, 4}, {1, 4}},                         /* parts that touch at a corner stay two */
        {"..a aa. aa.", 2, {4, 4}, {1, 4}},
        {"aaaa a.aa aa.a aaaa", 2, {4, 8}, {16, -2}},               /* so holes that do are one */
        {"aaaa aa.a a.aa aaaa", 2, {4, 8}, {16, -2}},
        {"aaaaa a...a a.a.a a...a aaaaa", 3, {4, 4, 4}, {25, 1, -9}}, /* an island in a hole */
        {"a.aa.aaa", 3, {4, 4, 4}, {1, 2, 3}},                      /* one row, both ends cut */
        {"a . a a", 2, {4, 4}, {1, 2}},
        {"aab abb bbb", 1, {6}, {3}},                               /* a neighbour is not a hole */
        {"aaa aba aaa", 2, {4, 4}, {9, -1}},
        {"a.a .a. a.a", 5, {4, 4, 4, 4, 4}, {1, 1, 1, 1, 1}},
    };
    for (size_t s = 0; s < sizeof shapes / sizeof shapes[0]; s++) {
        uf_labels labels = picture(shapes[s].rows);
        uf_rings rings = trace(labels, 1);
        assert_int_equal(rings.count, shapes[s].count);
        for (size_t k = 0; k < rings.count; k++) {
            assert_int_equal(rings.ends[k] - first_of(&rings, k), shapes[s].corners[k]);
            assert_int_equal(shoelace(&rings, k), 2 * shapes[s].area[k]);
        }
        for (int label = 1; label <= labels.count; label++)
            check_label(labels, label);
    }
}

static void corners_are_where_they_are_said_to_be(void **state)
{
    (void)state;
    /* An L from its upper left corner, clockwise as seen. */
    static const uf_corner corner[] = {{1, 0}, {2, 0}, {2, 2}, {4, 2}, {4, 3}, {1, 3}};
    uf_rings rings = trace(picture(".a.. .a.. .aaa"), 1);
    assert_int_equal(rings.count, 1);
    assert_int_equal(rings.ends[0], 6);
    for (int k = 0; k < 6; k++) {
        assert_int_equal(rings.corners[k].x, corner[k].x);
        assert_int_equal(rings.corners[k].y, corner[k].y);
    }
}

static void a_label_that_does_not_occur_has_no_rings(void **state)
{
    (void)state;
    assert_int_equal(trace(picture("a.c ccc"), 2).count, 0);
}

/* ---- random labels ------------------------------------------------------------------------------------ */

static uint32_t next_random(uint32_t *state)
{
    *state = *state * 1664525u + 1013904223u;
    return *state >> 16;
}

static void random_labels_come_back(void **state)
{
    (void)state;
    static const int size[][2] = {{1, 1}, {1, 23}, {23, 1}, {2, 2}, {7, 5}, {16, 16}, {31, 19}};
    uint32_t random = 1;
    for (size_t s = 0; s < sizeof size / sizeof size[0]; s++)
        for (int round = 0; round < 24; round++) {
            uf_arena_mark mark = uf_arena_now(&work.arena);
            uf_labels labels = blank(&work, size[s][0], size[s][1]);
            labels.count = 3;
            uint32_t kinds = round % 2 ? 2 : 4; /* crowded, or with background */
            for (int y = 0; y < labels.height; y++)
                for (int x = 0; x < labels.width; x++)
                    uf_labels_row(labels, y)[x] = (int32_t)(next_random(&random) % kinds);
            for (int label = 1; label <= labels.count; label++)
                check_label(labels, label);
            uf_arena_back(&work.arena, mark);
        }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(shapes_have_the_rings_counted_by_hand),
        cmocka_unit_test(corners_are_where_they_are_said_to_be),
        cmocka_unit_test(a_label_that_does_not_occur_has_no_rings),
        cmocka_unit_test(random_labels_come_back),
    };
    return cmocka_run_group_tests(tests, NULL, tear_down);
}
