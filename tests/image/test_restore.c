/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Restoring, against its closed forms. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "image/restore.h"
#include "image/smooth.h"
#include "near.h"

enum { SIDE = 97 };

static uf_plane restored_of(uf_work *work, uf_plane in, double sigma_px, double gain)
{
    uf_plane smooth, out;
    assert_int_equal(uf_plane_take(work, in.width, in.height, &smooth, NULL), UF_OK);
    assert_int_equal(uf_plane_take(work, in.width, in.height, &out, NULL), UF_OK);
    assert_int_equal(uf_smooth(work, in, sigma_px, smooth, NULL), UF_OK);
    assert_int_equal(uf_restore(work, smooth, sigma_px, gain, out, NULL), UF_OK);
    return out;
}

/* Convolution adds second moments: smoothing has s^2, so the filter has s^2 (1 - gain) = -b^2, and a Gaussian of sd a
 * comes out with a^2 - b^2 (closed form). Its sum stays. */
static void test_second_moment(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_plane blob;
    const double a = 4.37, s = 0.73, b = 0.91;
    assert_int_equal(uf_plane_take(&work, SIDE, SIDE, &blob, NULL), UF_OK);
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++)
            uf_plane_row(blob, y)[x] = (float)exp(-0.5 * (pow(x - 48, 2) + pow(y - 48, 2)) / (a * a));
    uf_plane out = restored_of(&work, blob, s, 1 + b * b / (s * s));
    double sum = 0, moment = 0, before = 0;
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            sum += (double)uf_plane_row(out, y)[x];
            before += (double)uf_plane_row(blob, y)[x];
            moment += (double)uf_plane_row(out, y)[x] * (x - 48) * (x - 48);
        }
    assert_near_rel(sum, before, 1e-5);
    assert_near_abs(moment / sum, a * a - b * b, 0.02); /* the cut at 4 sigma costs the Gaussian a hundredth */
    uf_arena_free(&work.arena);
}

/* The variance factor is the sum of squares of the response to one pixel (definition of a linear filter). */
static void test_variance_is_that_of_the_taps(void **state)
{
    (void)state;
    static const double cases[][2] = {{0.46, 2.44}, {0.73, 2.44}, {1.12, 2.44}, {2.385, 1.7}, {0.73, 0}};
    for (size_t k = 0; k < sizeof cases / sizeof cases[0]; k++) {
        uf_work work = {0};
        uf_plane impulse;
        assert_int_equal(uf_plane_take(&work, SIDE, SIDE, &impulse, NULL), UF_OK);
        for (int y = 0; y < SIDE; y++)
            for (int x = 0; x < SIDE; x++)
                uf_plane_row(impulse, y)[x] = x == 48 && y == 48;
        uf_plane out = restored_of(&work, impulse, cases[k][0], cases[k][1]);
        double squares = 0;
        for (int y = 0; y < SIDE; y++)
            for (int x = 0; x < SIDE; x++)
                squares += pow((double)uf_plane_row(out, y)[x], 2);
        assert_near_rel(uf_restore_variance(cases[k][0], cases[k][1]), squares, 1e-4);
        uf_arena_free(&work.arena);
    }
    assert_near_abs(uf_restore_variance(0, 2), 1, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_second_moment),
                                       cmocka_unit_test(test_variance_is_that_of_the_taps)};
    return cmocka_run_group_tests_name("restoring", tests, NULL, NULL);
}
