/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Photon transfer on frames of a camera whose figures were put in (tests/calibrate/simulated_camera.h): every
 * expected number is one that the simulation was given, or follows from it in closed form beside the check. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <string.h>

#include "calibrate/camera.h"
#include "calibrate/simulated_camera.h"
#include "near.h"

static const simulated_camera usual = {.width = 131,
                                       .height = 97,
                                       .offset_adu = 101.37,
                                       .gain_e_per_adu = 0.465,
                                       .read_e = 1.62,
                                       .step_adu = 1,
                                       .full_scale_adu = 65535,
                                       .pattern_adu = 0.8,
                                       .response_sd = 0.01,
                                       .unevenness = 2.3,
                                       .seed = 77};

/* A session: dark frames, points, fit. */
typedef struct bench {
    uf_work work;
    simulated_camera camera;
    uf_dark_frames frames;
    uf_dark dark;
    uf_response response;
    uf_photon_point points[16];
    uf_point_fit fits[16];
    int count;
    uf_photon_transfer transfer;
    uf_error error;
} bench;

static void add_dark(bench *b, uf_plane frame)
{
    assert_int_equal(uf_dark_add(&b->work, &b->frames, frame, &b->error), UF_OK);
}

static void start(bench *b, const simulated_camera *camera, int darks)
{
    *b = (bench){.camera = *camera};
    assert_int_equal(uf_dark_start(&b->work, camera->width, camera->height, &b->frames, NULL), UF_OK);
    assert_int_equal(uf_response_start(&b->work, camera->width, camera->height, &b->response, NULL), UF_OK);
    for (int k = 0; k < darks; k++) {
        uf_arena_mark mark = uf_arena_now(&b->work.arena);
        add_dark(b, expose(&b->work, &b->camera, 0));
        uf_arena_back(&b->work.arena, mark);
    }
}

static void finish_dark(bench *b)
{
    if (uf_dark_finish(&b->work, &b->frames, &b->dark, &b->error) != UF_OK)
        fail_msg("%s", b->error.text);
}

static uf_status pair_of(bench *b, uf_plane one, uf_plane two, double exposure_ms)
{
    return uf_photon_pair(&b->work, &b->dark, one, two, exposure_ms, (double)NAN, &b->response, &b->points[b->count],
                          &b->error);
}

static void add_pair(bench *b, double light_e, double other_light_e, double exposure_ms)
{
    uf_arena_mark mark = uf_arena_now(&b->work.arena);
    uf_plane one = expose(&b->work, &b->camera, light_e), two = expose(&b->work, &b->camera, other_light_e);
    if (pair_of(b, one, two, exposure_ms) != UF_OK)
        fail_msg("%s", b->error.text);
    b->count++;
    uf_arena_back(&b->work.arena, mark);
}

/* Pairs at `rate` electrons a millisecond. */
static void add_series(bench *b, double rate, const double *exposures_ms, int count)
{
    for (int k = 0; k < count; k++)
        add_pair(b, rate * exposures_ms[k], rate * exposures_ms[k], exposures_ms[k]);
}

static void fit(bench *b)
{
    if (uf_photon_transfer_fit(&b->dark, b->points, b->count, 1, &b->transfer, b->fits, &b->error) != UF_OK)
        fail_msg("%s", b->error.text);
}

static void end(bench *b)
{
    uf_arena_free(&b->work.arena);
}

static const double six_exposures[] = {3.1, 8.7, 21.3, 44.9, 80.2, 120.7};

/* ---- the figures ----------------------------------------------------------------------------- */

static void test_figures_come_back(void **state)
{
    (void)state;
    /* offset, gain, read noise, light a ms: a scientific, a slow-scan and a coarse camera, one 12 bits shifted
     * into 16 */
    static const double cameras[][5] = {{101.37, 0.465, 1.62, 47.3, 1},
                                        {498.2, 2.17, 6.13, 230.9, 1},
                                        {17.9, 11.3, 21.7, 380.1, 1},
                                        {1616.3, 0.144, 5.9, 47.3, 16}};
    for (int k = 0; k < 4; k++) {
        bench b;
        simulated_camera camera = usual;
        camera.width = 257;
        camera.height = 203;
        camera.offset_adu = cameras[k][0];
        camera.gain_e_per_adu = cameras[k][1];
        camera.read_e = cameras[k][2];
        camera.step_adu = cameras[k][4];
        start(&b, &camera, 12);
        finish_dark(&b);
        add_series(&b, cameras[k][3], six_exposures, 6);
        fit(&b);
        assert_near_abs(b.dark.step_adu, cameras[k][4], 0);
        assert_near_abs(b.transfer.offset_adu, camera.offset_adu, 0.02 + 4 * b.transfer.offset_sd_adu);
        assert_near_rel(b.transfer.gain_e_per_adu, camera.gain_e_per_adu, 0.02);
        assert_near_rel(b.transfer.read_noise_e, camera.read_e, 0.02);
        assert_near_rel(b.transfer.read_noise_rms_e, camera.read_e, 0.02);
        assert_near_rel(b.dark.pattern_adu, camera.pattern_adu, k == 3 ? 1 : 0.1); /* less than a step there */
        assert_int_equal(b.transfer.points_used, 6);
        assert_int_equal(b.transfer.notes, 0);
        assert_int_equal(b.transfer.full_scale_from, UF_FULL_SCALE_UNSEEN);
        assert_int_equal(b.transfer.linear_from, UF_LINEAR_BY_EXPOSURE);
        assert_near_abs(b.transfer.linear_to_adu, b.points[5].mean_adu, 0);
        assert_near_rel(b.transfer.rate_adu_per_ms, cameras[k][3] / camera.gain_e_per_adu, 0.005);
        end(&b);
    }
}

/* The figures' sds are what they miss by: over 40 cameras of other noise the mean of ((estimate - truth) / sd)^2
 * is 1 within chance (chi-square of 40 over 40: 0.44 to 1.83 with probability 0.999); so is chi-square over its
 * degrees, of 5 x 40 (0.71 to 1.36). */
static void test_sds_are_true(void **state)
{
    (void)state;
    double gain = 0, read = 0, noise = 0, offset = 0, line_offset = 0, chi_square = 0;
    for (int k = 0; k < 40; k++) {
        bench b;
        simulated_camera camera = usual;
        camera.seed = 100 + (uint64_t)k;
        camera.pattern_adu = 0; /* the offset is then one number */
        start(&b, &camera, 5);
        finish_dark(&b);
        add_series(&b, 47.3, six_exposures, 6);
        fit(&b);
        const uf_photon_transfer *t = &b.transfer;
        assert_int_equal(t->notes, UF_CAMERA_FEW_DARKS);
        gain += pow((t->gain_e_per_adu - camera.gain_e_per_adu) / t->gain_sd_e_per_adu, 2) / 40;
        read += pow((t->read_noise_e - camera.read_e) / t->read_noise_sd_e, 2) / 40;
        noise += pow((b.dark.noise_adu - camera.read_e / camera.gain_e_per_adu) / b.dark.noise_sd_adu, 2) / 40;
        offset += pow((t->offset_adu - camera.offset_adu) / t->offset_sd_adu, 2) / 40;
        line_offset += pow((t->line_offset_adu - camera.offset_adu) / t->line_offset_sd_adu, 2) / 40;
        chi_square += t->chi_square / 5 / 40;
        end(&b);
    }
    printf("mean squares of errors in sds: gain %.2f, read noise %.2f (in the dark %.2f), offset %.2f, of the line "
           "%.2f; chi-square %.2f\n",
           gain, read, noise, offset, line_offset, chi_square);
    assert_near_abs(gain, 1.135, 0.695);
    assert_near_abs(read, 1.135, 0.695);
    assert_near_abs(noise, 1.135, 0.695);
    assert_near_abs(line_offset, 1.135, 0.695);
    assert_near_abs(chi_square, 1.035, 0.325);
    assert_near_abs(offset, 1.135, 0.695);
}

/* The point itself: mean and variance of evenly lit pixels in closed form, light / gain + (read / gain)^2 + 1 /
 * 12. */
static void test_a_point(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.response_sd = camera.unevenness = 0;
    start(&b, &camera, 6);
    finish_dark(&b);
    add_pair(&b, 913.7, 913.7, 20.5);
    const uf_photon_point *p = b.points;
    double variance = 913.7 / pow(0.465, 2) + pow(1.62 / 0.465, 2) + 1.0 / 12;
    assert_near_abs(p->signal_adu, 913.7 / 0.465, 4 * sqrt(variance / 2 / (131 * 97)));
    assert_near_abs(p->mean_adu - p->signal_adu, 101.37, 0.05);
    assert_near_abs(p->variance_adu2, variance, 4 * p->variance_sd_adu2);
    assert_near_rel(p->variance_sd_adu2, variance * sqrt(2.0 / (131 * 97 - 12)), 0.05);
    assert_near_abs(p->correlation_x, 0, 4 / sqrt(131 * 97));
    assert_near_abs(p->correlation_y, 0, 4 / sqrt(131 * 97));
    assert_near_abs(p->exposure_ms, 20.5, 0);
    assert_true(isnan(p->saturation_adu) && p->saturated_fraction == 0 && p->rejected_fraction < 1e-4);
    end(&b);
}

/* ---- what must not matter -------------------------------------------------------------------- */

/* A lamp that gives a sixth less in every other frame leaves the fixed pattern of response and light in the
 * difference; scaled, it does not matter. */
static void test_a_lamp_that_flickers(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.response_sd = 0.05;
    start(&b, &camera, 8);
    finish_dark(&b);
    for (int k = 0; k < 6; k++)
        add_pair(&b, 47.3 * six_exposures[k], 47.3 * six_exposures[k] / 1.18, six_exposures[k]);
    fit(&b);
    assert_near_abs(b.points[5].flicker, 0.18, 0.002);
    assert_near_rel(b.transfer.gain_e_per_adu, camera.gain_e_per_adu, 0.02);
    assert_near_abs(b.transfer.gain_e_per_adu, camera.gain_e_per_adu, 4 * b.transfer.gain_sd_e_per_adu);
    assert_int_equal(b.transfer.notes, UF_CAMERA_FLICKER);
    end(&b);
}

/* A lamp a quarter brighter in one frame: without the correction of what scaling does to shot noise, the variance
 * of 12 points would be 1.25 % too large ((1 + 1.25)^2 / (4 x 1.25)), six sds of their mean. */
static void test_scaling_adds_no_variance(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    double ratio = 0, sd = 0;
    camera.response_sd = camera.unevenness = 0;
    camera.width = 257;
    camera.height = 203;
    start(&b, &camera, 4);
    finish_dark(&b);
    for (int k = 0; k < 12; k++) {
        add_pair(&b, 800, 1000, (double)NAN);
        double variance = 900 / pow(0.465, 2) + pow(1.62 / 0.465, 2) + 1.0 / 12;
        ratio += b.points[k].variance_adu2 / variance / 12;
        sd = b.points[k].variance_sd_adu2 / variance / sqrt(12);
    }
    assert_near_abs(ratio, 1, 3.5 * sd);
    assert_true(sd < 0.0125 / 6);
    end(&b);
}

static void spoil(uf_plane plane, int every, double add, double noise, uf_random *dice)
{
    for (int k = 3; k < plane.width * plane.height; k += every)
        uf_plane_row(plane, k / plane.width)[k % plane.width] += (float)floor(add + noise * uf_random_normal(dice));
}

/* One pixel in 151 is hot, one in 173 noisy (50 times), and particles hit one in 400 in some flats: gain and read
 * noise stay. */
static void test_bad_pixels_do_not_count(void **state)
{
    (void)state;
    bench b;
    uf_random dice;
    uf_random_start(&dice, 5, 0);
    start(&b, &usual, 0);
    for (int k = 0; k < 10; k++) {
        uf_plane frame = expose(&b.work, &b.camera, 0);
        spoil(frame, 151, 3000, 60, &dice);
        spoil(frame, 173, 0, 170, &dice);
        add_dark(&b, frame);
    }
    finish_dark(&b);
    for (int k = 0; k < 6; k++) {
        uf_plane one = expose(&b.work, &b.camera, 47.3 * six_exposures[k]);
        uf_plane two = expose(&b.work, &b.camera, 47.3 * six_exposures[k]);
        spoil(one, 151, 3000, 60, &dice);
        spoil(two, 151, 3000, 60, &dice);
        spoil(one, 173, 0, 170, &dice);
        spoil(two, 173, 0, 170, &dice);
        spoil(two, 401, 20000, 9000, &dice);
        assert_int_equal(pair_of(&b, one, two, six_exposures[k]), UF_OK);
        b.count++;
    }
    fit(&b);
    assert_near_rel(b.transfer.gain_e_per_adu, usual.gain_e_per_adu, 0.02);
    assert_near_rel(b.transfer.read_noise_e, usual.read_e, 0.02);
    assert_near_rel(b.dark.hot_share, 1 / 151.0, 0.02);
    assert_near_rel(b.dark.noisy_share, 1 / 151.0 + 1 / 173.0, 0.1);
    assert_near_rel(b.points[2].rejected_fraction, 1 / 401.0, 0.15);
    end(&b);
}

/* Offsets that wander from frame to frame are drift, not noise of the pixels. */
static void test_drift_of_the_offset(void **state)
{
    (void)state;
    static const double drift[] = {0, 2.5, -1.75, 3.25, 0.5, -2, 1.25, -3.5};
    bench b;
    double mean = 0, squares = 0;
    start(&b, &usual, 0);
    for (int k = 0; k < 8; k++) {
        b.camera.offset_adu = usual.offset_adu + drift[k];
        add_dark(&b, expose(&b.work, &b.camera, 0));
        mean += drift[k] / 8;
    }
    for (int k = 0; k < 8; k++)
        squares += pow(drift[k] - mean, 2);
    finish_dark(&b);
    assert_near_rel(b.dark.drift_adu, sqrt(squares / 7), 0.05);
    assert_near_rel(b.dark.offset_sd_adu, sqrt(squares / 7 / 8), 0.05);
    assert_near_abs(b.dark.offset_adu, usual.offset_adu + mean, 0.1);
    assert_near_rel(b.dark.noise_adu, usual.read_e / usual.gain_e_per_adu, 0.02);
    end(&b);
}

/* The dark image is the plain mean of the frames, whatever is done to them for the variance. */
static void test_the_dark_image(void **state)
{
    (void)state;
    bench b;
    uf_plane frames[3], image;
    start(&b, &usual, 0);
    for (int k = 0; k < 3; k++)
        add_dark(&b, frames[k] = expose(&b.work, &b.camera, 40.0 * k));
    assert_int_equal(uf_plane_take(&b.work, usual.width, usual.height, &image, NULL), UF_OK);
    uf_dark_image(&b.frames, image);
    for (int k = 0; k < usual.width * usual.height; k += 7) {
        double sum = (double)frames[0].data[k] + (double)frames[1].data[k] + (double)frames[2].data[k];
        assert_near_rel((double)image.data[k], sum / 3, 1e-6);
    }
    end(&b);
}

/* The same bits by one hand and by three. */
static void test_any_number_of_hands(void **state)
{
    (void)state;
    bench b[2];
    for (int k = 0; k < 2; k++) {
        start(&b[k], &usual, 0);
        if (k)
            assert_int_equal(uf_pool_new(&b[k].work.pool, 3, NULL), UF_OK);
        for (int n = 0; n < 4; n++)
            add_dark(&b[k], expose(&b[k].work, &b[k].camera, 0));
        finish_dark(&b[k]);
        add_series(&b[k], 47.3, six_exposures, 6);
        fit(&b[k]);
    }
    assert_memory_equal(b[0].points, b[1].points, sizeof b[0].points);
    assert_memory_equal(&b[0].transfer.gain_e_per_adu, &b[1].transfer.gain_e_per_adu, sizeof(double));
    uf_pool_free(&b[1].work.pool);
    end(&b[0]);
    end(&b[1]);
}

/* ---- the upper end --------------------------------------------------------------------------- */

/* A converter that ends at 4095: pixels pile up there, and points that do not reach it are enough. */
static void test_a_ceiling(void **state)
{
    (void)state;
    static const double exposures[] = {2.1, 5.2, 11.7, 18.3, 26.9, 35.1, 60.3};
    bench b;
    simulated_camera camera = usual;
    camera.full_scale_adu = 4095;
    camera.unevenness = 1.2;
    start(&b, &camera, 6);
    finish_dark(&b);
    add_series(&b, 47.3, exposures, 7);
    fit(&b);
    assert_int_equal(b.transfer.full_scale_from, UF_FULL_SCALE_PILED_UP);
    assert_near_abs(b.transfer.full_scale_adu, 4095, 0);
    assert_near_rel(b.transfer.full_scale_e, (4095 - 101.37) * 0.465, 0.02);
    assert_near_rel(b.transfer.gain_e_per_adu, 0.465, 0.03);
    assert_int_equal(b.fits[4].use, UF_POINT_NEAR_FULL);
    assert_int_equal(b.fits[5].use, UF_POINT_SATURATED);
    assert_int_equal(b.fits[6].use, UF_POINT_SATURATED);
    assert_true(b.points[6].saturated_fraction == 1);
    assert_near_abs(b.transfer.linear_to_adu, b.points[4].mean_adu, 0); /* the next is partly cut off */
    end(&b);
}

/* Pixels that fill at 1800 electrons, below the converter's end: no pile-up is given away by the counts, as read
 * noise spreads them, but the variance falls. */
static void test_a_full_well(void **state)
{
    (void)state;
    static const double exposures[] = {2.1, 5.2, 11.7, 18.3, 26.9, 34.1, 38.1, 60.3};
    bench b;
    simulated_camera camera = usual;
    camera.well_e = 1800;
    camera.unevenness = 0;
    start(&b, &camera, 6);
    finish_dark(&b);
    add_series(&b, 47.3, exposures, 8);
    fit(&b);
    assert_int_equal(b.transfer.full_scale_from, UF_FULL_SCALE_TOP);
    assert_near_abs(b.transfer.full_scale_adu, b.points[5].mean_adu, 0);
    assert_near_rel(b.transfer.gain_e_per_adu, 0.465, 0.03);
    assert_int_equal(b.fits[5].use, UF_POINT_NEAR_FULL);
    assert_int_equal(b.fits[6].use, UF_POINT_PAST_THE_TOP);
    assert_int_equal(b.fits[7].use, UF_POINT_PAST_THE_TOP);
    assert_near_abs(b.transfer.linear_to_adu, b.points[5].mean_adu, 0);
    end(&b);
}

/* Counts that go on at 0.85 of their slope above a knee of 2400: the last point below it ends the linear range (the
 * next is off the line of the others by 0.15 (s - 2400) / s, 4 %, the last by 6 %). Without exposures the variance,
 * which goes on at 0.72 of its slope, tells the same. */
static void test_a_bent_response(void **state)
{
    (void)state;
    static const double exposures[] = {1.2, 2.3, 4.1, 7.9, 14.7, 30.3, 50.7, 61.7};
    bench b;
    start(&b, &usual, 6);
    finish_dark(&b);
    b.camera.unevenness = 0;
    for (int k = 0; k < 8; k++) {
        uf_plane flats[2];
        for (int n = 0; n < 2; n++) {
            flats[n] = expose(&b.work, &b.camera, 30 * exposures[k]);
            for (int i = 0; i < flats[n].width * flats[n].height; i++) {
                double signal = (double)flats[n].data[i] - usual.offset_adu;
                signal = signal > 2400 ? 2400 + 0.85 * (signal - 2400) : signal;
                flats[n].data[i] = (float)floor(usual.offset_adu + signal + 0.5);
            }
        }
        assert_int_equal(pair_of(&b, flats[0], flats[1], exposures[k]), UF_OK);
        b.count++;
    }
    fit(&b);
    assert_int_equal(b.transfer.linear_from, UF_LINEAR_BY_EXPOSURE);
    assert_near_abs(b.transfer.linear_to_adu, b.points[5].mean_adu, 0);
    double off = 30 * 61.7 / usual.gain_e_per_adu;
    assert_near_abs(b.fits[7].linearity, (2400 + 0.85 * (off - 2400)) / off - 1, 0.005);
    assert_true(b.transfer.notes & UF_CAMERA_LINE_BENDS);
    assert_true(b.transfer.chi_square_p < 1e-6);
    for (int k = 0; k < 8; k++)
        b.points[k].exposure_ms = (double)NAN;
    fit(&b);
    assert_int_equal(b.transfer.linear_from, UF_LINEAR_BY_VARIANCE);
    assert_true(!(b.transfer.linear_to_adu > b.points[5].mean_adu));
    assert_true(isnan(b.transfer.rate_adu_per_ms));
    end(&b);
}

/* A shutter that takes 0.9 ms to open: the line of signal against exposure does not begin at 0, and is straight. */
static void test_a_slow_shutter(void **state)
{
    (void)state;
    bench b;
    start(&b, &usual, 8);
    finish_dark(&b);
    for (int k = 0; k < 6; k++)
        add_pair(&b, 47.3 * (six_exposures[k] - 0.9), 47.3 * (six_exposures[k] - 0.9), six_exposures[k]);
    fit(&b);
    assert_near_abs(b.transfer.linear_to_adu, b.points[5].mean_adu, 0);
    assert_near_rel(b.transfer.rate_adu_per_ms, 47.3 / usual.gain_e_per_adu, 0.003);
    assert_int_equal(b.transfer.notes, 0);
    end(&b);
}

/* ---- multiplication -------------------------------------------------------------------------- */

/* An excess noise of sqrt 2 and a hundredfold multiplication: with the factor given, and from a set without it. */
static void test_excess_noise(void **state)
{
    (void)state;
    static const double short_ms[] = {2.2, 5.1, 9.7, 16.3, 23.9}, long_ms[] = {210.3, 460.9, 905.2, 1733.8};
    bench with, without;
    simulated_camera camera = usual, plain = usual;
    camera.gain_e_per_adu = 0.0617; /* input electrons a count */
    camera.read_e = 0.31;
    camera.excess_noise = sqrt(2);
    camera.width = plain.width = camera.height = plain.height = 200;
    plain.gain_e_per_adu = 6.17;
    plain.read_e = 17.3;
    start(&with, &camera, 8);
    finish_dark(&with);
    add_series(&with, 11.9, short_ms, 5);
    fit(&with);
    start(&without, &plain, 8);
    finish_dark(&without);
    add_series(&without, 11.9, long_ms, 4);
    fit(&without);
    uf_excess excess;
    assert_int_equal(uf_excess_noise(&with.transfer, &without.transfer, &excess, NULL), UF_OK);
    assert_near_rel(excess.noise, sqrt(2), 0.02);
    assert_near_abs(excess.noise, sqrt(2), 4 * excess.noise_sd);
    assert_near_rel(excess.multiplication, 100, 0.01);
    assert_near_rel(excess.gain_e_per_adu, 0.0617, 0.02);
    assert_near_abs(excess.gain_e_per_adu, 0.0617, 4 * excess.gain_sd_e_per_adu);
    assert_near_rel(with.transfer.gain_e_per_adu, 0.0617 / 2, 0.02); /* without the factor: half */
    uf_photon_transfer_set_excess(&with.transfer, &with.dark, sqrt(2), 0);
    assert_near_rel(with.transfer.gain_e_per_adu, 0.0617, 0.02);
    assert_near_rel(with.transfer.read_noise_e, 0.31, 0.03);
    double share = with.transfer.slope_sd_adu / with.transfer.slope_adu;
    uf_photon_transfer_set_excess(&with.transfer, &with.dark, 1.4, 0.035); /* squared: twice the share, 0.05 */
    assert_near_rel(with.transfer.gain_sd_e_per_adu / with.transfer.gain_e_per_adu, hypot(share, 0.05), 1e-12);
    assert_int_equal(uf_excess_noise(&without.transfer, &with.transfer, &excess, &without.error), UF_INPUT);
    assert_non_null(strstr(without.error.text, "below 1"));
    end(&with);
    end(&without);
}

/* ---- rounding, clipping, smoothing ----------------------------------------------------------- */

/* A dark noise of a quarter of a step is only known to be below 0.40 steps; one of 1.1 steps comes back without
 * the rounding's twelfth, which would have made it 1.137 (sqrt(1.21 + 1 / 12)). */
static void test_rounding(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.width = camera.height = 300;
    camera.pattern_adu = 0; /* all pixels round alike, and the dark variance is not that of rounding */
    camera.offset_adu = 101;
    camera.gain_e_per_adu = 4.31;
    camera.read_e = 0.25 * 4.31;
    start(&b, &camera, 10);
    finish_dark(&b);
    add_series(&b, 5, six_exposures, 6);
    fit(&b);
    assert_true(b.dark.noise_is_bound && (b.transfer.notes & UF_CAMERA_ROUNDING));
    assert_near_abs(b.dark.noise_adu, 0.40, 1e-12);
    assert_near_rel(b.transfer.gain_e_per_adu, 4.31, 0.02); /* the foot of the line is the points' own then */
    assert_near_abs(b.transfer.gain_e_per_adu, 4.31, 4 * b.transfer.gain_sd_e_per_adu);
    assert_true(b.transfer.chi_square_p > 0.001 && !(b.transfer.notes & UF_CAMERA_OFFSETS_DISAGREE));
    for (int k = 0; k < 6; k++) /* dozens of pixels at the highest count, hundreds one below: no ceiling */
        assert_true(isnan(b.points[k].saturation_adu));
    end(&b);
    camera.read_e = 1.1 * 4.31;
    start(&b, &camera, 10);
    finish_dark(&b);
    assert_false(b.dark.noise_is_bound);
    assert_near_rel(b.dark.noise_rms_adu, 1.1, 0.01);
    assert_near_rel(b.dark.noise_adu, 1.1, 0.02);
    end(&b);
}

/* An offset of 3 counts cuts a noise of 3.48 off at 0: some 16 % of the counts (normal distribution, (0.5 - 3) /
 * 3.48). */
static void test_darks_cut_off(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.offset_adu = 3;
    camera.pattern_adu = 0;
    start(&b, &camera, 6);
    finish_dark(&b);
    add_series(&b, 47.3, six_exposures, 6);
    fit(&b);
    assert_near_abs(b.dark.clipped_share, 0.236, 0.01);
    assert_true(b.transfer.notes & UF_CAMERA_DARK_CLIPPED);
    end(&b);
}

/* Frames smoothed by (1 2 1) / 4 along rows: neighbours are correlated by (2 x 1 x 2) / (1 + 4 + 1) = 2 / 3, and
 * a note says so. */
static void test_smoothed_frames(void **state)
{
    (void)state;
    bench b;
    start(&b, &usual, 6);
    finish_dark(&b);
    for (int k = 0; k < 6; k++) {
        uf_plane flats[2];
        for (int n = 0; n < 2; n++) {
            flats[n] = expose(&b.work, &b.camera, 47.3 * six_exposures[k]);
            for (int y = 0; y < flats[n].height; y++) {
                float *row = uf_plane_row(flats[n], y), before = row[0];
                for (int x = 1; x + 1 < flats[n].width; x++) {
                    float here = row[x];
                    row[x] = (before + 2 * here + row[x + 1]) / 4;
                    before = here;
                }
            }
        }
        assert_int_equal(pair_of(&b, flats[0], flats[1], six_exposures[k]), UF_OK);
        b.count++;
    }
    fit(&b);
    assert_near_abs(b.points[5].correlation_x, 2.0 / 3, 0.03);
    assert_near_abs(b.points[5].correlation_y, 0, 0.05);
    assert_true(b.transfer.notes & UF_CAMERA_CORRELATED);
    end(&b);
}

/* Flats taken where stray light adds 30 counts that the dark frames do not have: the line does not point at their
 * offset. */
static void test_offsets_that_disagree(void **state)
{
    (void)state;
    bench b;
    start(&b, &usual, 6);
    finish_dark(&b);
    b.camera.offset_adu += 30;
    add_series(&b, 47.3, six_exposures, 6);
    fit(&b);
    assert_near_abs(b.transfer.line_offset_adu, usual.offset_adu + 30, 4 * b.transfer.line_offset_sd_adu);
    assert_true(b.transfer.notes & UF_CAMERA_OFFSETS_DISAGREE);
    end(&b);
}

/* Two close levels, both below the dark variance, are fitted with a remark on each weakness; the sd is honest. */
static void test_weak_series(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.read_e = 30;
    camera.offset_adu = 800;
    start(&b, &camera, 8);
    finish_dark(&b);
    for (int k = 0; k < 2; k++)
        add_pair(&b, 400 * (k + 1), 400 * (k + 1), (double)NAN);
    fit(&b);
    assert_int_equal(b.transfer.notes, UF_CAMERA_NARROW_RANGE | UF_CAMERA_LOW_SIGNAL);
    assert_near_abs(b.transfer.gain_e_per_adu, usual.gain_e_per_adu, 4 * b.transfer.gain_sd_e_per_adu);
    assert_true(b.transfer.gain_sd_e_per_adu > 0.01 * b.transfer.gain_e_per_adu);
    assert_true(isnan(b.transfer.line_offset_adu));
    end(&b);
}

/* Counts stretched by 4.4 and rounded (steps of 4 and 5): the highest counts are no ceiling, though the count one
 * lower never occurs. */
static void test_stretched_counts(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.gain_e_per_adu = 8; /* little noise: the highest counts are taken by several pixels */
    camera.unevenness = 0;
    start(&b, &camera, 4);
    finish_dark(&b);
    for (int k = 0; k < 12; k++) {
        uf_plane flats[2];
        for (int n = 0; n < 2; n++) {
            flats[n] = expose(&b.work, &b.camera, 300 + 100 * k);
            for (int i = 0; i < flats[n].width * flats[n].height; i++)
                flats[n].data[i] = (float)floor(4.4 * (double)flats[n].data[i] + 0.5);
        }
        assert_int_equal(pair_of(&b, flats[0], flats[1], (double)NAN), UF_OK);
        assert_true(isnan(b.points[k].saturation_adu));
        b.count++;
    }
    end(&b);
}

/* ---- defects --------------------------------------------------------------------------------- */

static void test_defects_are_found(void **state)
{
    (void)state;
    bench b;
    uf_plane map;
    uf_defect_counts counts;
    uf_random dice;
    uf_random_start(&dice, 9, 0);
    start(&b, &usual, 0);
    for (int k = 0; k < 10; k++) {
        uf_plane frame = expose(&b.work, &b.camera, 0);
        uf_plane_row(frame, 40)[17] += 90; /* hot: 26 times the noise of a pixel */
        uf_plane_row(frame, 8)[101] += (float)floor(40 * uf_random_normal(&dice)); /* noisy */
        add_dark(&b, frame);
    }
    finish_dark(&b);
    for (int k = 0; k < 4; k++) {
        uf_plane flats[2];
        for (int n = 0; n < 2; n++) {
            flats[n] = expose(&b.work, &b.camera, 47.3 * six_exposures[k]);
            float *row = uf_plane_row(flats[n], 71);
            row[33] = (float)(101 + 0.4 * ((double)row[33] - 101)); /* answers 0.4 of the light */
            row[34] = (float)(101 + 0.9 * ((double)row[34] - 101)); /* 0.9: the flat's business */
        }
        assert_int_equal(pair_of(&b, flats[0], flats[1], (double)NAN), UF_OK);
    }
    assert_int_equal(b.response.pairs, 4);
    assert_int_equal(uf_plane_take(&b.work, usual.width, usual.height, &map, NULL), UF_OK);
    assert_int_equal(uf_camera_defects(&b.work, &b.dark, &b.response, map, &counts, NULL), UF_OK);
    assert_int_equal(uf_plane_row(map, 40)[17], UF_DEFECT_DARK);
    assert_true((int)uf_plane_row(map, 8)[101] & UF_DEFECT_NOISE);
    assert_int_equal(uf_plane_row(map, 71)[33], UF_DEFECT_RESPONSE);
    assert_int_equal(uf_plane_row(map, 71)[34], 0);
    assert_int_equal(counts.any, 3); /* and none of the 12704 good ones */
    assert_int_equal(counts.noise, 1);
    assert_int_equal(counts.response, 1);
    end(&b);
}

/* A good pixel among defects is not held to them. */
static void test_a_good_pixel_among_defects(void **state)
{
    (void)state;
    bench b;
    uf_plane map;
    uf_defect_counts counts;
    start(&b, &usual, 0);
    for (int k = 0; k < 6; k++) {
        uf_plane frame = expose(&b.work, &b.camera, 0);
        for (int i = 0; i < 25; i++)
            uf_plane_row(frame, 50 + i / 5)[60 + i % 5] += i == 12 ? 0 : 200;
        add_dark(&b, frame);
    }
    finish_dark(&b);
    uf_plane flats[2];
    for (int n = 0; n < 2; n++) {
        flats[n] = expose(&b.work, &b.camera, 3000);
        for (int i = 0; i < 25; i++)
            if (i != 12)
                uf_plane_row(flats[n], 50 + i / 5)[60 + i % 5] = (float)(2000 + i + n); /* a third of the light */
    }
    assert_int_equal(pair_of(&b, flats[0], flats[1], (double)NAN), UF_OK);
    assert_int_equal(uf_plane_take(&b.work, usual.width, usual.height, &map, NULL), UF_OK);
    assert_int_equal(uf_camera_defects(&b.work, &b.dark, &b.response, map, &counts, NULL), UF_OK);
    assert_int_equal(uf_plane_row(map, 52)[62], 0);
    assert_true((int)uf_plane_row(map, 50)[60] & UF_DEFECT_RESPONSE);
    assert_int_equal(counts.any, 24);
    map.width--;
    assert_int_equal(uf_camera_defects(&b.work, &b.dark, NULL, map, &counts, &b.error), UF_INPUT);
    assert_non_null(strstr(b.error.text, "130 x 97 pixels, the dark frames 131 x 97"));
    end(&b);
}

/* ---- what cannot be used --------------------------------------------------------------------- */

static void expect(const bench *b, uf_status status, const char *words)
{
    assert_int_equal(status, UF_INPUT);
    if (!strstr(b->error.text, words))
        fail_msg("\"%s\" does not say \"%s\"", b->error.text, words);
}

static void test_dark_frames_that_cannot_be_used(void **state)
{
    (void)state;
    bench b;
    start(&b, &usual, 1);
    expect(&b, uf_dark_finish(&b.work, &b.frames, &b.dark, &b.error), "1 dark frame;");
    uf_plane frame = expose(&b.work, &b.camera, 0), cut = frame;
    add_dark(&b, frame);
    expect(&b, uf_dark_add(&b.work, &b.frames, frame, &b.error), "dark frame 3 is the same as dark frame 2");
    cut.height--;
    expect(&b, uf_dark_add(&b.work, &b.frames, cut, &b.error), "is 131 x 96 pixels, those before it 131 x 97");
    assert_int_equal(b.frames.count, 2);
    add_dark(&b, expose(&b.work, &b.camera, 300)); /* somebody opened the door */
    add_dark(&b, expose(&b.work, &b.camera, 0));
    expect(&b, uf_dark_finish(&b.work, &b.frames, &b.dark, &b.error), "dark frame 3 is 64");
    assert_non_null(strstr(b.error.text, "brighter than the others"));
    end(&b);
    start(&b, &usual, 1);
    add_dark(&b, expose(&b.work, &b.camera, 300));
    expect(&b, uf_dark_finish(&b.work, &b.frames, &b.dark, &b.error), "brighter than the other,");
    end(&b);
}

static void test_darks_without_noise(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.offset_adu = -40; /* everything is cut off at 0 */
    start(&b, &camera, 1);
    expect(&b, uf_dark_add(&b.work, &b.frames, expose(&b.work, &b.camera, 0), &b.error), "hold nothing but 0");
    uf_plane frame = expose(&b.work, &b.camera, 0);
    uf_plane_row(frame, 2)[2] = 5;
    add_dark(&b, frame);
    expect(&b, uf_dark_finish(&b.work, &b.frames, &b.dark, &b.error), "do not differ");
    end(&b);
}

static void test_pairs_that_cannot_be_used(void **state)
{
    (void)state;
    bench b;
    start(&b, &usual, 4);
    finish_dark(&b);
    uf_plane one = expose(&b.work, &b.camera, 900), two = expose(&b.work, &b.camera, 900), cut = two;
    expect(&b, pair_of(&b, one, one, 5), "are the same, pixel for pixel");
    cut.width -= 2;
    expect(&b, pair_of(&b, one, cut, 5), "a flat is 129 x 97 pixels, the dark frames 131 x 97");
    expect(&b, pair_of(&b, one, two, -5), "an exposure of -5 ms");
    expect(&b, pair_of(&b, one, expose(&b.work, &b.camera, 600), 5), "the same light and exposure twice");
    b.camera.offset_adu -= 20;
    expect(&b, pair_of(&b, expose(&b.work, &b.camera, 0), expose(&b.work, &b.camera, 0), 5),
           "ADU darker than the dark frames");
    assert_int_equal(b.response.pairs, 0);
    end(&b);
}

static void test_series_that_cannot_be_used(void **state)
{
    (void)state;
    bench b;
    simulated_camera camera = usual;
    camera.full_scale_adu = 4095;
    start(&b, &camera, 4);
    finish_dark(&b);
    for (int k = 0; k < 3; k++)
        add_pair(&b, 0, 0, 5.0 + k);
    uf_photon_transfer t;
    expect(&b, uf_photon_transfer_fit(&b.dark, b.points, 3, 1, &t, NULL, &b.error), "no light in any of the 3 pairs");
    b.count = 0;
    for (int k = 0; k < 2; k++)
        add_pair(&b, 9000, 9000, 50.0 + k);
    expect(&b, uf_photon_transfer_fit(&b.dark, b.points, 2, 1, &t, NULL, &b.error),
           "all 2 pairs of flats are saturated (at 4095 ADU)");
    add_pair(&b, 0, 0, (double)NAN);
    expect(&b, uf_photon_transfer_fit(&b.dark, b.points, 3, 1, &t, NULL, &b.error), "add exposures in between");
    b.count = 0;
    for (int k = 0; k < 3; k++)
        add_pair(&b, 700 + 30 * k, 700 + 30 * k, 20);
    expect(&b, uf_photon_transfer_fit(&b.dark, b.points, 3, 1, &t, NULL, &b.error), "add exposures, from");
    uf_excess excess;
    for (int k = 0; k < 3; k++)
        add_pair(&b, 300 * (k + 1), 300 * (k + 1), (double)NAN);
    assert_int_equal(uf_photon_transfer_fit(&b.dark, b.points, 6, 1, &t, NULL, &b.error), UF_OK);
    b.transfer = t;
    b.points[5].exposure_ms = 40;
    assert_int_equal(uf_photon_transfer_fit(&b.dark, b.points, 6, 1, &t, NULL, &b.error), UF_OK);
    expect(&b, uf_excess_noise(&t, &b.transfer, &excess, &b.error),
           "without multiplication has fewer than 2 exposures");
    expect(&b, uf_photon_transfer_fit(&b.dark, b.points, 0, 1, &t, NULL, &b.error), "0 pairs of flats");
    expect(&b, uf_photon_transfer_fit(&b.dark, b.points, 3, 0.9, &t, NULL, &b.error), "excess noise factor of 0.9");
    end(&b);
}

/* Memory that is not there is an error and no crash: more bytes than there are addresses. */
static void test_no_memory(void **state)
{
    (void)state;
    uf_work work = {0};
    uf_dark_frames frames;
    uf_error error;
    assert_int_equal(uf_dark_start(&work, 1 << 30, 1 << 30, &frames, &error), UF_MEMORY);
    uf_arena_free(&work.arena);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_figures_come_back),
                                       cmocka_unit_test(test_sds_are_true),
                                       cmocka_unit_test(test_a_point),
                                       cmocka_unit_test(test_a_lamp_that_flickers),
                                       cmocka_unit_test(test_scaling_adds_no_variance),
                                       cmocka_unit_test(test_bad_pixels_do_not_count),
                                       cmocka_unit_test(test_drift_of_the_offset),
                                       cmocka_unit_test(test_the_dark_image),
                                       cmocka_unit_test(test_any_number_of_hands),
                                       cmocka_unit_test(test_a_ceiling),
                                       cmocka_unit_test(test_a_full_well),
                                       cmocka_unit_test(test_a_bent_response),
                                       cmocka_unit_test(test_a_slow_shutter),
                                       cmocka_unit_test(test_excess_noise),
                                       cmocka_unit_test(test_rounding),
                                       cmocka_unit_test(test_darks_cut_off),
                                       cmocka_unit_test(test_smoothed_frames),
                                       cmocka_unit_test(test_offsets_that_disagree),
                                       cmocka_unit_test(test_weak_series),
                                       cmocka_unit_test(test_stretched_counts),
                                       cmocka_unit_test(test_defects_are_found),
                                       cmocka_unit_test(test_a_good_pixel_among_defects),
                                       cmocka_unit_test(test_dark_frames_that_cannot_be_used),
                                       cmocka_unit_test(test_darks_without_noise),
                                       cmocka_unit_test(test_pairs_that_cannot_be_used),
                                       cmocka_unit_test(test_series_that_cannot_be_used),
                                       cmocka_unit_test(test_no_memory)};
    return cmocka_run_group_tests_name("camera calibration", tests, NULL, NULL);
}
