/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Noise from one image, on images whose camera is known: Poisson electrons, Gaussian read noise. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "correct/noise.h"
#include "near.h"
#include "scene/random.h"

enum { SIDE = 400 };

/* Smooth light from `low` to `high` counts, one way across and one down. */
static uf_channel lit(uf_work *work, double low, double high, double gain, double read_e)
{
    uf_random dice;
    uf_channel channel = {.noise = {.gain_e_per_adu = (double)NAN}};
    assert_int_equal(uf_plane_take(work, SIDE, SIDE, &channel.image, NULL), UF_OK);
    uf_random_start(&dice, 19, 0);
    for (int y = 0; y < SIDE; y++)
        for (int x = 0; x < SIDE; x++) {
            double light = low + (high - low) * (x + 0.5 * y) / (1.5 * SIDE);
            double electrons = uf_random_poisson(&dice, light * gain) + read_e * uf_random_normal(&dice);
            uf_plane_row(channel.image, y)[x] = (float)(electrons / gain);
        }
    return channel;
}

static void test_gain_and_read_noise(void **state)
{
    (void)state;
    static const double cameras[][2] = {{2.17, 1.6}, {0.385, 4.1}, {11.3, 9.7}};
    for (int k = 0; k < 3; k++) {
        uf_work work = {0};
        uf_status status;
        uf_channel channel = lit(&work, 30, 4000, cameras[k][0], cameras[k][1]);
        assert_true(uf_noise_from_image(&work, &channel, &status, NULL));
        assert_int_equal(status, UF_OK);
        assert_near_rel(channel.noise.gain_e_per_adu, cameras[k][0], 0.05);
        /* at the level of a background the whole of the noise is what matters */
        double true_sd = sqrt(150 / cameras[k][0] + pow(cameras[k][1] / cameras[k][0], 2));
        assert_near_rel(sqrt(uf_noise_variance(&channel.noise, 150)), true_sd, 0.1);
        uf_arena_free(&work.arena);
    }
}

/* The same noise everywhere has no slope: nothing is told, and nothing changed. */
static void test_no_line_no_answer(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_status status;
    uf_channel channel = lit(&work, 500, 500, 1, 0);
    assert_false(uf_noise_from_image(&work, &channel, &status, NULL));
    assert_int_equal(status, UF_OK);
    assert_true(isnan(channel.noise.gain_e_per_adu));
    uf_arena_free(&work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_gain_and_read_noise),
                                       cmocka_unit_test(test_no_line_no_answer)};
    return cmocka_run_group_tests_name("noise from an image", tests, NULL, NULL);
}
