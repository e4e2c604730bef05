/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Focus against closed forms. An ideal edge has energy in a band proportional to the band's scale, so the finer of two
 * bands an octave apart has half of the coarser's: sqrt((16 / 2 - 1) / 15) = 0.683. Blurred far beyond the bands, both see
 * the second derivative times their scale squared: C = 16 F, and the figure is 0. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "blank.h"
#include "correct/quality.h"
#include "image/smooth.h"
#include "near.h"
#include "scene/random.h"

enum { WIDTH = 400, HEIGHT = 300 };

typedef struct field {
    uf_work work;
    uf_labels labels;
    uf_channel channel;
} field;

/* A step of 1000 counts along a slanted line, blurred by `sigma`, with noise of `noise` counts that the channel knows of. */
static void make(field *f, double sigma, double noise)
{
    uf_random dice;
    *f = (field){.channel = {.noise = {.gain_e_per_adu = 1e12, .excess2 = 1, .read_adu = noise}}};
    f->labels = blank(&f->work, WIDTH, HEIGHT);
    assert_int_equal(uf_plane_take(&f->work, WIDTH, HEIGHT, &f->channel.image, NULL), UF_OK);
    for (int y = 0; y < HEIGHT; y++)
        for (int x = 0; x < WIDTH; x++) {
            uf_labels_row(f->labels, y)[x] = 1;
            uf_plane_row(f->channel.image, y)[x] = x > 190 + 0.13 * y ? 1500.0f : 500.0f;
        }
    assert_int_equal(uf_smooth(&f->work, f->channel.image, sigma, f->channel.image, NULL), UF_OK);
    uf_random_start(&dice, 4, 0);
    for (int k = 0; k < WIDTH * HEIGHT; k++)
        f->channel.image.data[k] += (float)(noise * uf_random_normal(&dice));
}

static double focus_of(double sigma, double noise, double psf_px)
{
    field f;
    double focus;
    make(&f, sigma, noise);
    assert_int_equal(uf_focus_of(&f.work, &f.channel, f.labels, psf_px, &focus, NULL), UF_OK);
    uf_arena_free(&f.work.arena);
    return focus;
}

static void test_sharp_edge(void **state)
{
    (void)state;
    assert_near_abs(focus_of(0, 0, 2), sqrt(7.0 / 15), 0.02);
    assert_near_abs(focus_of(0, 0, 1.3), sqrt(7.0 / 15), 0.02);
}

static void test_falls_with_blur(void **state)
{
    (void)state;
    double before = 1;
    for (double sigma = 0.5; sigma < 30; sigma *= 1.7) {
        double focus = focus_of(sigma, 0, 1.2);
        assert_true(focus < before);
        before = focus;
    }
    assert_true(before < 0.12);
}

/* Noise that the channel knows of is taken off: the figure stays within what its own scatter does. */
static void test_noise_is_taken_off(void **state)
{
    (void)state;
    assert_near_abs(focus_of(1.5, 20, 1.2), focus_of(1.5, 0, 1.2), 0.03);
}

static void test_nothing_to_judge(void **state)
{
    (void)state;
    field f;
    double focus;
    make(&f, 0, 0);
    f.labels.count = 0;
    assert_int_equal(uf_focus_of(&f.work, &f.channel, f.labels, 1, &focus, NULL), UF_OK);
    assert_true(isnan(focus));
    uf_arena_free(&f.work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_sharp_edge), cmocka_unit_test(test_falls_with_blur),
                                       cmocka_unit_test(test_noise_is_taken_off),
                                       cmocka_unit_test(test_nothing_to_judge)};
    return cmocka_run_group_tests_name("focus", tests, NULL, NULL);
}
