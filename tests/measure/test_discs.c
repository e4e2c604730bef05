/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Areas and perimeters of rasterised discs, exact distances, and shapes with closed forms. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>
#include <cmocka.h>

#include "blank.h"
#include "image/distance.h"
#include "measure/shape.h"
#include "near.h"

static uf_work work;

static int tear_down(void **state)
{
    (void)state;
    uf_arena_free(&work.arena);
    return 0;
}

static uf_labels disc(int r)
{
    uf_labels labels = blank(&work, 2 * r + 5, 2 * r + 3);
    for (int y = -r; y <= r; y++)
        for (int x = -r; x <= r; x++)
            if (x * x + y * y <= r * r)
                uf_labels_row(labels, y + r + 1)[x + r + 2] = 1;
    return labels;
}

static uf_shape shape_of(uf_labels labels)
{
    uf_box boxes[2];
    uf_shape shape;
    uf_error error;
    uf_label_boxes(labels, boxes);
    assert_int_equal(uf_shape_of(&work, labels, 1, boxes[1], &shape, &error), UF_OK);
    return shape;
}

/* Lattice points in a disc: OEIS A000328. */
static void test_disc_areas(void **state)
{
    (void)state;
    static const int radii[] = {0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 20, 50, 100};
    static const int areas[] = {1, 5, 13, 29, 49, 81, 113, 149, 197, 253, 317, 1257, 7845, 31417};
    for (int k = 0; k < 14; k++) {
        uf_shape s = shape_of(disc(radii[k]));
        assert_true(s.area_px == areas[k]);
        assert_near_abs(s.x_px, radii[k] + 2, 1e-9);
        assert_near_abs(s.y_px, radii[k] + 1, 1e-9);
    }
}

/* Crofton's formula over four directions by hand from its transition counts: 42 42 58 58, 202 202 282 282, 402 402 566
 * 566 for r 10, 50, 100; and the true circumference within the bias of the formula. */
static void test_crofton(void **state)
{
    (void)state;
    static const double rows[][2] = {{10, 65.197624}, {50, 315.262053}, {100, 630.064030}};
    for (int k = 0; k < 3; k++) {
        double perimeter = shape_of(disc((int)rows[k][0])).perimeter_px;
        assert_near_abs(perimeter, rows[k][1], 1e-6);
        assert_near_rel(perimeter, 2 * 3.14159265358979 * rows[k][0], 0.04);
    }
}

/* Rectangles: moments a^2/12 give axes 4 sqrt(a^2/12); hull and calipers in closed form up to the midpoints of the
 * pixels' edges, which cut the four corner triangles of 1/8 off. */
static void test_rectangles(void **state)
{
    (void)state;
    static const int sides[][2] = {{1, 1}, {1, 9}, {13, 1}, {7, 8}, {31, 17}};
    for (int k = 0; k < 5; k++) {
        int w = sides[k][0], h = sides[k][1];
        uf_labels labels = blank(&work, w, h); /* fills the image: every side is the border */
        for (int y = 0; y < h; y++)
            for (int x = 0; x < w; x++)
                uf_labels_row(labels, y)[x] = 1;
        uf_shape s = shape_of(labels);
        assert_near_abs(s.axis_long_px, 4 * (w > h ? w : h) / sqrt(12), 1e-9);
        assert_near_abs(s.axis_short_px, 4 * (w > h ? h : w) / sqrt(12), 1e-9);
        assert_near_abs(s.hull_area_px, w * h - 0.5, 1e-9);
        assert_near_abs(fabs(s.orientation_deg), w >= h ? 0 : 90, 1e-9);
        assert_true(s.caliper_max_px >= (w > h ? w : h) && s.caliper_max_px <= hypot(w, h));
        assert_near_abs(s.caliper_min_px, w > h ? h : w, w == h ? 0.3 : 1e-9);
    }
}

/* A line that rises to the right on the screen (y falls) leans by a positive angle. */
static void test_orientation_is_counter_clockwise_as_seen(void **state)
{
    (void)state;
    uf_labels labels = blank(&work, 40, 40);
    for (int k = 3; k < 37; k++)
        for (int t = -1; t <= 1; t++)
            uf_labels_row(labels, 39 - k)[k + t] = 1;
    assert_near_abs(shape_of(labels).orientation_deg, 45, 2);
}

/* Squared distances to two sites in a 5 x 7 grid, and a rectangle in a frame: from the definition. */
static void test_distances(void **state)
{
    (void)state;
    static const int squared[5][7] = {{5, 4, 5, 8, 4, 1, 0}, {2, 1, 2, 5, 5, 2, 1}, {1, 0, 1, 4, 8, 5, 4},
                                      {2, 1, 2, 5, 10, 10, 9}, {5, 4, 5, 8, 13, 17, 16}};
    uf_labels labels = blank(&work, 7, 5);
    uf_labels_row(labels, 2)[1] = uf_labels_row(labels, 0)[6] = 1;
    uf_plane distance;
    uf_error error;
    assert_int_equal(uf_plane_take(&work, 7, 5, &distance, &error), UF_OK);
    assert_int_equal(uf_distance(&work, labels, NULL, distance, &error), UF_OK);
    for (int y = 0; y < 5; y++)
        for (int x = 0; x < 7; x++)
            if (squared[y][x]) {
                double d = (double)uf_plane_row(distance, y)[x];
                assert_near_abs(d * d, squared[y][x], 1e-5);
            }
    uf_labels frame = blank(&work, 11, 9);
    for (int y = 1; y < 8; y++)
        for (int x = 1; x < 9; x++)
            uf_labels_row(frame, y)[x] = 1;
    double sum = 0, most = 0;
    assert_int_equal(uf_plane_take(&work, 11, 9, &distance, &error), UF_OK);
    assert_int_equal(uf_distance_inside(&work, frame, distance, &error), UF_OK);
    for (int y = 0; y < 9; y++)
        for (int x = 0; x < 11; x++) {
            double d = (double)uf_plane_row(distance, y)[x];
            sum += d;
            most = d > most ? d : most;
        }
    assert_near_abs(most, 4, 1e-6);
    assert_near_abs(sum, 100, 1e-4);
    uf_labels round = disc(10);
    assert_int_equal(uf_plane_take(&work, round.width, round.height, &distance, &error), UF_OK);
    assert_int_equal(uf_distance_inside(&work, round, distance, &error), UF_OK);
    double centre = (double)uf_plane_row(distance, 11)[12];
    assert_near_abs(centre * centre, 101, 1e-4); /* 10^2 + 1^2 */
}

static void test_one_label_is_far_from_everything(void **state)
{
    (void)state;
    uf_labels labels = blank(&work, 6, 4);
    uf_plane distance;
    uf_error error;
    assert_int_equal(uf_plane_take(&work, 6, 4, &distance, &error), UF_OK);
    assert_int_equal(uf_distance(&work, labels, NULL, distance, &error), UF_OK);
    for (int k = 0; k < 24; k++)
        assert_true(distance.data[k] == UF_FAR);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_disc_areas), cmocka_unit_test(test_crofton), cmocka_unit_test(test_rectangles),
        cmocka_unit_test(test_orientation_is_counter_clockwise_as_seen), cmocka_unit_test(test_distances),
        cmocka_unit_test(test_one_label_is_far_from_everything)};
    return cmocka_run_group_tests(tests, NULL, tear_down);
}
