/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shift, scale and rotation against the similarity that made the shifts (closed form). */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "base/constants.h"
#include "calibrate/similarity.h"
#include "near.h"

enum { SIDE = 4, COUNT = SIDE * SIDE };

/* wide = (1 + s) R(angle) near + t, told at a lattice of places. */
static void make(uf_local_shift *shifts, double tx, double ty, double s, double angle_deg)
{
    double c = (1 + s) * cos(angle_deg * UF_PI / 180), r = (1 + s) * sin(angle_deg * UF_PI / 180);
    for (int k = 0; k < COUNT; k++) {
        double x = (k % SIDE - 1.5) * 117, y = (k / SIDE - 1.5) * 93;
        shifts[k] = (uf_local_shift){x, y, tx + c * x - r * y - x, ty + r * x + c * y - y, 0};
    }
}

static void test_similarity_comes_back(void **state)
{
    (void)state;
    uf_local_shift shifts[COUNT];
    uf_similarity fit;
    make(shifts, 2.385, -1.27, 0.0011, 0.137);
    assert_true(uf_similarity_fit(shifts, COUNT, 300, &fit));
    assert_int_equal(fit.used, COUNT);
    assert_near_abs(fit.dx_px, 2.385, 1e-9);
    assert_near_abs(fit.dy_px, -1.27, 1e-9);
    /* To first order: cos is 1 and sin its angle. */
    assert_near_abs(fit.scale, 0.0011, 5e-6);
    assert_near_abs(fit.rotation_deg, 0.137, 3e-4);
    assert_near_abs(uf_similarity_departure(&fit, 300), 300 * hypot(0.0011, 0.137 * UF_PI / 180), 2e-3);
}

static void test_one_wild_place_does_not_count(void **state)
{
    (void)state;
    uf_local_shift shifts[COUNT];
    uf_similarity fit;
    make(shifts, -0.6, 3.1, 0, 0);
    shifts[5].dx_px += 9;
    shifts[11].dy_px -= 4;
    assert_true(uf_similarity_fit(shifts, COUNT, 300, &fit));
    assert_int_equal(fit.used, COUNT - 2);
    assert_true(shifts[5].is_outlier && shifts[11].is_outlier);
    assert_near_abs(fit.dx_px, -0.6, 1e-9);
    assert_near_abs(fit.scale, 0, 1e-12);
}

static void test_too_few_places(void **state)
{
    (void)state;
    uf_local_shift shifts[COUNT];
    uf_similarity fit;
    make(shifts, 1, 1, 0, 0);
    assert_false(uf_similarity_fit(shifts, 3, 300, &fit));
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_similarity_comes_back),
                                       cmocka_unit_test(test_one_wild_place_does_not_count),
                                       cmocka_unit_test(test_too_few_places)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
