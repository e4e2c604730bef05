/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The demo's scene maker. Nothing here compares it with the measuring code: that is what the scene is for.
 * Random numbers come from fixed seeds, so a test that passes passes always; limits are five standard
 * deviations of the figure tested unless something else is said.
 */
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <setjmp.h>

#include <cmocka.h>

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "scene/edge_distance.h"
#include "scene/exposure.h"
#include "scene/lattice_noise.h"
#include "scene/psf.h"
#include "scene/random.h"
#include "scene/scene.h"

static const double pi = 3.14159265358979323846;

static uf_error error;
static uf_work work;

static int tear_down(void **state)
{
    (void)state;
    uf_arena_free(&work.arena);
    return 0;
}

#define assert_near(value, expected, tolerance) check_near(value, expected, tolerance, #value, __LINE__)

static void check_near(double value, double expected, double tolerance, const char *what, int line)
{
    if (!(fabs(value - expected) <= tolerance))
        fail_msg("line %d: %s is %.12g, expected %.12g within %.3g", line, what, value, expected, tolerance);
}

static uf_scene make(const uf_scene_settings *settings)
{
    uf_scene scene;
    if (uf_scene_make(&work, settings, &scene, &error) != UF_OK)
        fail_msg("%s", error.text);
    return scene;
}

static uf_plane take_plane(int width, int height)
{
    uf_plane plane;
    assert_int_equal(uf_plane_take(&work, width, height, &plane, &error), UF_OK);
    return plane;
}

static uf_plane constant_plane(int width, int height, float value)
{
    uf_plane plane = take_plane(width, height);
    for (ptrdiff_t i = 0; i < (ptrdiff_t)width * height; i++)
        plane.data[i] = value;
    return plane;
}

/* A bench without noise: so many electrons a count that only rounding to whole counts is left. */
static uf_scene_settings quiet_settings(void)
{
    uf_scene_settings s = uf_scene_defaults();
    s.gain_e_per_adu = 1e10;
    s.read_noise_e = 0;
    s.near_peak_adu = 12000;
    s.wide_peak_adu = 9000;
    return s;
}

typedef struct moments {
    double mean, variance, skewness, kurtosis;
} moments;

static moments moments_of(const double *x, int n)
{
    double sum = 0, m2 = 0, m3 = 0, m4 = 0;
    for (int i = 0; i < n; i++)
        sum += x[i];
    double mean = sum / n;
    for (int i = 0; i < n; i++) {
        double d = x[i] - mean;
        m2 += d * d;
        m3 += d * d * d;
        m4 += d * d * d * d;
    }
    m2 /= n;
    return (moments){mean, m2, m3 / n / pow(m2, 1.5), m4 / n / (m2 * m2)};
}

/* ---- random numbers -------------------------------------------------------------------------- */

/* Against the outputs of the authors' own C programs (prng.di.unimi.it) for seed 1234567 and for state
 * 1, 2, 3, 4, as other libraries quote them in their tests; values from memory. */
static void test_generator_gives_published_values(void **state)
{
    (void)state;
    static const uint64_t split[] = {UINT64_C(6457827717110365317), UINT64_C(3203168211198807973),
                                     UINT64_C(9817491932198370423), UINT64_C(4593380528125082431)};
    static const uint64_t shuffled[] = {UINT64_C(11520),
                                        UINT64_C(0),
                                        UINT64_C(1509978240),
                                        UINT64_C(1215971899390074240),
                                        UINT64_C(1216172134540287360),
                                        UINT64_C(607988272756665600)};
    uint64_t seed = 1234567;
    for (int k = 0; k < 4; k++)
        assert_true(uf_splitmix64(&seed) == split[k]);
    uf_random random = {.state = {1, 2, 3, 4}};
    for (int k = 0; k < 6; k++)
        assert_true(uf_random_bits(&random) == shuffled[k]);
}

/* Uniform on (0, 1): mean 1/2, variance 1/12, kurtosis 9/5, neighbours uncorrelated. Closed form. */
static void test_uniform_moments(void **state)
{
    (void)state;
    enum { N = 300000 };
    double *x = malloc(N * sizeof *x), lag = 0;
    assert_non_null(x);
    uf_random random;
    uf_random_start(&random, 2385, 3);
    for (int i = 0; i < N; i++) {
        x[i] = uf_random_uniform(&random);
        assert_true(x[i] > 0 && x[i] < 1);
    }
    moments m = moments_of(x, N);
    for (int i = 1; i < N; i++)
        lag += (x[i] - 0.5) * (x[i - 1] - 0.5);
    assert_near(m.mean, 0.5, 5 * sqrt(1.0 / 12 / N));
    assert_near(m.variance, 1.0 / 12, 5 * sqrt((1.0 / 80 - 1.0 / 144) / N));
    assert_near(m.skewness, 0, 5 * sqrt(6.0 / N));
    assert_near(m.kurtosis, 1.8, 5 * sqrt(24.0 / N));
    assert_near(lag / N, 0, 5 / (12 * sqrt(N)));
    free(x);
}

/* Every whole number of a range comes equally often, both ends included: binomial, closed form. */
static void test_whole_numbers_reach_both_ends(void **state)
{
    (void)state;
    enum { N = 70000 };
    int seen[7] = {0};
    uf_random random;
    uf_random_start(&random, 5, 1);
    for (int i = 0; i < N; i++) {
        int k = uf_random_whole(&random, -3, 3);
        assert_in_range(k + 3, 0, 6);
        seen[k + 3]++;
    }
    for (int k = 0; k < 7; k++)
        assert_near(seen[k], N / 7.0, 5 * sqrt(N * 6.0 / 49));
}

/* Standard normal has moments 0, 1, 0, 3, and P(x < 1) = Phi(1): closed form. */
static void test_normal_moments(void **state)
{
    (void)state;
    enum { N = 300000 };
    double *x = malloc(N * sizeof *x), below = 0, expected = 0.5 * erfc(-1 / sqrt(2.0));
    assert_non_null(x);
    uf_random random;
    uf_random_start(&random, 77, 2);
    for (int i = 0; i < N; i++) {
        x[i] = uf_random_normal(&random);
        below += x[i] < 1;
    }
    moments m = moments_of(x, N);
    assert_near(m.mean, 0, 5 / sqrt(N));
    assert_near(m.variance, 1, 5 * sqrt(2.0 / N));
    assert_near(m.skewness, 0, 5 * sqrt(6.0 / N));
    assert_near(m.kurtosis, 3, 5 * sqrt(24.0 / N));
    assert_near(below / N, expected, 5 * sqrt(expected * (1 - expected) / N));
    free(x);
}

static void check_poisson_moments(double mean, uint64_t seed)
{
    enum { N = 100000 };
    double *x = malloc(N * sizeof *x);
    assert_non_null(x);
    uf_random random;
    uf_random_start(&random, seed, 4);
    for (int i = 0; i < N; i++) {
        x[i] = uf_random_poisson(&random, mean);
        assert_true(x[i] >= 0 && x[i] == floor(x[i]));
    }
    moments m = moments_of(x, N);
    assert_near(m.mean, mean, 5 * sqrt(mean / N));
    assert_near(m.variance, mean, 5 * mean * sqrt((2 + 1 / mean) / N));
    free(x);
}

/* Poisson: the variance equals the mean, closed form, on both sides of each switch of method. */
static void test_poisson_variance_is_its_mean(void **state)
{
    (void)state;
    static const double means[] = {0.037, 1.385, 9.96, 10.04, 52.7, 2385.3, 0.97e8, 1.03e8};
    for (size_t k = 0; k < sizeof means / sizeof means[0]; k++)
        check_poisson_moments(means[k], 100 + k);
    uf_random random;
    uf_random_start(&random, 1, 1);
    assert_true(uf_random_poisson(&random, 0) == 0);
    assert_true(uf_random_poisson(&random, -3.5) == 0);
}

/* Chi-square against the Poisson probabilities themselves; both tails are pooled until 25 are expected. */
static void check_poisson_shape(double mean, uint64_t seed)
{
    enum { N = 200000, MOST = 400 };
    static double seen[MOST];
    double chi2 = 0, expected = 0, counted = 0, left = N;
    int bins = 0;
    memset(seen, 0, sizeof seen);
    uf_random random;
    uf_random_start(&random, seed, 4);
    for (int i = 0; i < N; i++) {
        double k = uf_random_poisson(&random, mean);
        assert_true(k < MOST);
        seen[(int)k]++;
    }
    for (int k = 0; k < MOST; k++) {
        expected += N * exp(k * log(mean) - mean - lgamma(k + 1.0));
        counted += seen[k];
        bool last = k == MOST - 1;
        if (!last && (expected < 25 || left - expected < 25))
            continue;
        if (last)
            expected = left;
        chi2 += (counted - expected) * (counted - expected) / expected;
        left -= expected;
        expected = counted = 0;
        bins++;
    }
    assert_true(bins > 5);
    assert_near(chi2, bins - 1, 5 * sqrt(2.0 * (bins - 1)));
}

static void test_poisson_probabilities(void **state)
{
    (void)state;
    check_poisson_shape(3.85, 21);
    check_poisson_shape(10.7, 22);
    check_poisson_shape(137.3, 23);
}

/* Every pixel is standard normal whatever its place between lattice points: closed form, over many draws. */
static void test_lattice_noise_is_standard_normal_everywhere(void **state)
{
    (void)state;
    enum { DRAWS = 4000, WIDTH = 7, HEIGHT = 5 };
    double sum[WIDTH * HEIGHT] = {0}, square[WIDTH * HEIGHT] = {0};
    uf_plane plane = take_plane(WIDTH, HEIGHT);
    uf_random random;
    uf_random_start(&random, 31, 1);
    for (int k = 0; k < DRAWS; k++) {
        assert_int_equal(uf_lattice_noise(&work, &random, 2.7, plane, &error), UF_OK);
        for (int i = 0; i < WIDTH * HEIGHT; i++) {
            sum[i] += (double)plane.data[i];
            square[i] += (double)plane.data[i] * (double)plane.data[i];
        }
    }
    for (int i = 0; i < WIDTH * HEIGHT; i++) {
        assert_near(sum[i] / DRAWS, 0, 5 / sqrt(DRAWS));
        assert_near(square[i] / DRAWS, 1, 5 * sqrt(2.0 / DRAWS));
    }
}

/* One and two lattice points apart the splines share weights (1, 4, 1) / sqrt(18), so that values correlate
 * by 8/18 and 1/18, and not at all from four points on: closed form. */
static void test_lattice_noise_is_smooth(void **state)
{
    (void)state;
    enum { DRAWS = 40000 };
    static const double expected[5] = {1, 8.0 / 18, 1.0 / 18, 0, 0};
    double product[5] = {0};
    uf_plane plane = take_plane(13, 2);
    uf_random random;
    uf_random_start(&random, 32, 1);
    for (int k = 0; k < DRAWS; k++) {
        assert_int_equal(uf_lattice_noise(&work, &random, 3, plane, &error), UF_OK);
        for (int i = 0; i < 5; i++)
            product[i] += (double)plane.data[0] * (double)plane.data[3 * i];
    }
    for (int i = 0; i < 5; i++)
        assert_near(product[i] / DRAWS, expected[i], 5 * sqrt((1 + expected[i] * expected[i]) / DRAWS));
}

/* ---- blur -------------------------------------------------------------------------------------- */

/* One tap, the slow way: light spread over the pixel at 0, blurred, collected by the pixel at `k`. The
 * integral over the camera pixel is exact (erf), the one over the light by midpoints. */
static double slow_tap(double k, double sigma)
{
    enum { PARTS = 2000 };
    double sum = 0;
    for (int i = 0; i < PARTS; i++) {
        double from = (i + 0.5) / PARTS - 0.5;
        sum += 0.5 * (erf((k + 0.5 - from) / sigma / sqrt(2.0)) - erf((k - 0.5 - from) / sigma / sqrt(2.0)));
    }
    return sum / PARTS;
}

/* A single bright pixel, blurred and moved, against the slow twin. 1e-4 is the light beyond 4 sigma. */
static void test_blur_of_a_point_matches_slow_integration(void **state)
{
    (void)state;
    const double sigma = 1.385, dx = 1.37, dy = -2.62;
    uf_plane in = constant_plane(41, 37, 0), out = take_plane(41, 37);
    uf_plane_row(in, 17)[22] = 1000;
    assert_int_equal(uf_psf_blur(&work, in, sigma, dx, dy, out, &error), UF_OK);
    double across[41];
    for (int x = 0; x < 41; x++)
        across[x] = slow_tap(x - 22 - dx, sigma);
    for (int y = 0; y < 37; y++) {
        double down = 1000 * slow_tap(y - 17 - dy, sigma);
        for (int x = 0; x < 41; x++)
            assert_near((double)uf_plane_row(out, y)[x], down * across[x], 0.02);
    }
}

/* Without blur and shift nothing changes; half a pixel is the mean of two neighbours; a whole one is exact;
 * in place gives the same: closed form. */
static void test_blur_of_nothing_is_a_shift(void **state)
{
    (void)state;
    enum { WIDTH = 13, HEIGHT = 7 };
    uf_plane in = take_plane(WIDTH, HEIGHT), out = take_plane(WIDTH, HEIGHT);
    uf_random random;
    uf_random_start(&random, 9, 1);
    for (int i = 0; i < WIDTH * HEIGHT; i++)
        in.data[i] = (float)uf_random_between(&random, 100, 900);
    assert_int_equal(uf_psf_blur(&work, in, 0, 0, 0, out, &error), UF_OK);
    assert_memory_equal(in.data, out.data, WIDTH * HEIGHT * sizeof(float));
    assert_int_equal(uf_psf_blur(&work, in, 0, 2, -1, out, &error), UF_OK);
    assert_near((double)uf_plane_row(out, 3)[6], (double)uf_plane_row(in, 4)[4], 0);
    assert_int_equal(uf_psf_blur(&work, in, 0, 0.5, 0, out, &error), UF_OK);
    double pair = ((double)uf_plane_row(in, 3)[5] + (double)uf_plane_row(in, 3)[6]) / 2;
    assert_near((double)uf_plane_row(out, 3)[6], pair, 1e-3);
    assert_int_equal(uf_psf_blur(&work, in, 0, 0.5, 0, in, &error), UF_OK);
    assert_memory_equal(in.data, out.data, WIDTH * HEIGHT * sizeof(float));
}

/* Mirrored edges lose no light, however wide the blur against the plane, down to a single pixel. */
static void test_blur_keeps_the_light(void **state)
{
    (void)state;
    static const int sizes[][2] = {{1, 1}, {1, 29}, {31, 1}, {23, 17}};
    for (int k = 0; k < 4; k++) {
        int pixels = sizes[k][0] * sizes[k][1];
        uf_plane plane = take_plane(sizes[k][0], sizes[k][1]);
        double before = 0, after = 0;
        for (int i = 0; i < pixels; i++)
            before += (double)(plane.data[i] = (float)(i * i % 97));
        assert_int_equal(uf_psf_blur(&work, plane, 11.3, 0, 0, plane, &error), UF_OK);
        for (int i = 0; i < pixels; i++)
            after += (double)plane.data[i];
        assert_near(after, before, 1e-5 * before);
    }
}

/* ---- bench ------------------------------------------------------------------------------------- */

static double mean_of(uf_plane plane)
{
    double sum = 0;
    for (int y = 0; y < plane.height; y++)
        for (int x = 0; x < plane.width; x++)
            sum += (double)uf_plane_row(plane, y)[x];
    return sum / ((double)plane.width * plane.height);
}

/* Mean 1, and for a centred lamp the corner is `fall` darker than the middle: closed form. */
static void test_flats_have_mean_one(void **state)
{
    (void)state;
    uf_plane flat = take_plane(101, 67);
    uf_scene_illuminate(flat, 0.237, 0, 0);
    assert_near(mean_of(flat), 1, 1e-6);
    double middle = (double)uf_plane_row(flat, 33)[50];
    assert_near((double)uf_plane_row(flat, 0)[0] / middle, 1 - 0.237, 1e-6);
    assert_near((double)uf_plane_row(flat, 66)[100] / middle, 1 - 0.237, 1e-6);
    uf_scene_illuminate(flat, 0.237, 0.07, -0.04);
    assert_near(mean_of(flat), 1, 1e-6);
    assert_true(uf_plane_row(flat, 30)[57] > uf_plane_row(flat, 33)[50]);

    uf_scene_settings s = uf_scene_defaults();
    s.width = 211;
    s.height = 157;
    uf_scene scene = make(&s);
    assert_near(mean_of(scene.near_flat), 1, 1e-6);
    assert_near(mean_of(scene.wide_flat), 1, 1e-6);
    float corner = uf_plane_row(scene.wide_flat, 0)[0];
    s.seed++;
    assert_true(corner == uf_plane_row(make(&s).wide_flat, 0)[0]);
}

/* Photon transfer (Janesick 2007): variance = (mean - offset) / gain + (read noise / gain)^2, and 1/12 for
 * the rounding. Closed form. */
static void test_camera_follows_photon_transfer(void **state)
{
    (void)state;
    enum { SIDE = 300, N = SIDE * SIDE };
    static const float levels[] = {0, 23.85f, 517.3f, 4096.7f, 21385.2f};
    const uf_scene_camera camera = {.offset_adu = 100.4, .gain_e_per_adu = 0.713, .read_noise_e = 2.385};
    double *x = malloc(N * sizeof *x);
    assert_non_null(x);
    uf_random random;
    uf_random_start(&random, 12, 1);
    for (size_t k = 0; k < sizeof levels / sizeof levels[0]; k++) {
        uf_plane plane = constant_plane(SIDE, SIDE, levels[k]);
        uf_scene_expose(plane, &camera, &random);
        for (int i = 0; i < N; i++)
            x[i] = (double)plane.data[i];
        moments m = moments_of(x, N);
        double level = (double)levels[k], read = camera.read_noise_e / camera.gain_e_per_adu;
        double variance = level / camera.gain_e_per_adu + read * read + 1.0 / 12;
        assert_near(m.mean, 100.4 + level, 5 * sqrt(variance / N));
        assert_near(m.variance, variance, 5 * variance * sqrt(2.0 / N));
    }
    free(x);
}

/* Whole counts in 0 .. 65535: both ends are reached and not passed. */
static void test_camera_writes_whole_counts_in_range(void **state)
{
    (void)state;
    const uf_scene_camera camera = {.offset_adu = 2, .gain_e_per_adu = 1.1, .read_noise_e = 6};
    static const float levels[] = {0, 65533};
    static const double ends[] = {0, 65535};
    uf_random random;
    uf_random_start(&random, 13, 1);
    for (int k = 0; k < 2; k++) {
        uf_plane plane = constant_plane(97, 31, levels[k]);
        int at_end = 0;
        uf_scene_expose(plane, &camera, &random);
        for (int i = 0; i < 97 * 31; i++) {
            double adu = (double)plane.data[i];
            assert_true(adu >= 0 && adu <= 65535 && adu == floor(adu));
            at_end += adu == ends[k];
        }
        assert_in_range(at_end, 200, 97 * 31 - 200);
    }
}

/* ---- optics of the scene -------------------------------------------------------------------------- */

/* Closed form: 488 nm, 1.518 over 1.33, 70 degrees give 488 / (4 pi sqrt((1.518 sin 70)^2 - 1.33^2)) =
 * 75.314026 nm. The same figure is quoted from a published grid of depths; that source was not seen. */
static void test_depth_has_the_closed_form(void **state)
{
    (void)state;
    uf_scene_settings s = uf_scene_defaults();
    s.width = s.height = 8;
    s.wavelength_nm = 488;
    s.substrate_n = 1.518;
    s.medium_n = 1.33;
    s.angle_deg = 70;
    assert_near(make(&s).depth_nm, 75.314026, 1e-6);
    s.wavelength_nm = 561;
    assert_near(make(&s).depth_nm, 75.314026 * 561 / 488, 1.2e-6);
}

/* Flat-fielded light above background, ADU. */
static double corrected(uf_plane image, uf_plane flat, int x, int y, double offset, double background)
{
    return ((double)uf_plane_row(image, y)[x] - offset) / (double)uf_plane_row(flat, y)[x] - background;
}

/* near = reference_ratio x wide x decay(gap) in every pixel of every cell, closed form, in a scene without
 * noise or blur: pixels are so large that even the dorsal membrane's blur is nothing. What is left is half a
 * count of rounding in each channel. */
static void check_decay_law(double stray, double stray_depth_nm)
{
    uf_scene_settings s = quiet_settings();
    s.width = 251;
    s.height = 241;
    s.pixel_size_um = 1e6;
    s.radius_min_um = 23e6;
    s.radius_max_um = 37e6;
    s.psf_sigma_um = 0;
    s.lifted = 0.3;
    s.scattered_fraction = stray;
    s.scattered_depth_nm = stray_depth_nm;
    uf_scene scene = make(&s);
    int pixels = 0;
    double least = INFINITY, most = 0;
    assert_near(scene.reference_ratio, 12000.0 / 9000.0, 1e-12);
    for (int y = 0; y < s.height; y++)
        for (int x = 0; x < s.width; x++) {
            if (!uf_labels_row(scene.labels, y)[x])
                continue;
            double gap = (double)uf_plane_row(scene.gap_nm, y)[x];
            double decay = (1 - stray) * exp(-gap / scene.depth_nm) + stray * exp(-gap / stray_depth_nm);
            double near =
                corrected(scene.near_adu, scene.near_flat, x, y, s.offset_adu, s.near_background_adu);
            double wide =
                corrected(scene.wide_adu, scene.wide_flat, x, y, s.offset_adu, s.wide_background_adu);
            double share = scene.reference_ratio * decay;
            double rounding = 0.5 / (double)uf_plane_row(scene.near_flat, y)[x] +
                              0.5 / (double)uf_plane_row(scene.wide_flat, y)[x] * share;
            assert_near(near, share * wide, rounding + 0.1);
            least = fmin(least, gap);
            most = fmax(most, gap);
            pixels++;
        }
    assert_true(pixels > 5000 && least < 40 && most > 180);
}

static void test_ratio_follows_the_gap(void **state)
{
    (void)state;
    check_decay_law(0, 1200);
    check_decay_law(0.137, 923.5);
}

/* In the flat middle of focal spots the ratio is reference_ratio exp(-gap / depth): closed form. Deeper in
 * the cell than 4 sigma of the dorsal blur only the dye's own 8 % unevenness is blurred, which moves the
 * ratio by 0.2 % (one standard deviation, from half sigma^2 times the curvature of the dye). */
static void test_ratio_in_focal_spots(void **state)
{
    (void)state;
    uf_scene_settings s = quiet_settings();
    s.psf_sigma_um = 0;
    s.touching = 0;
    uf_scene scene = make(&s);
    uf_plane edge_um = take_plane(s.width, s.height);
    uf_scene_edge_distance(scene.labels, s.pixel_size_um, edge_um);
    int checked = 0;
    double sum = 0;
    for (int k = 0; k < scene.spots; k++) {
        int x = (int)floor((double)scene.spot_x_px[k] + 0.5),
            y = (int)floor((double)scene.spot_y_px[k] + 0.5);
        double gap = (double)uf_plane_row(scene.gap_nm, y)[x];
        assert_near(gap, s.spot_gap_nm + 2.5, 2.5);
        if ((double)uf_plane_row(edge_um, y)[x] < 2.1)
            continue;
        double near = corrected(scene.near_adu, scene.near_flat, x, y, s.offset_adu, s.near_background_adu);
        double wide = corrected(scene.wide_adu, scene.wide_flat, x, y, s.offset_adu, s.wide_background_adu);
        double relative = near / wide / (scene.reference_ratio * exp(-gap / scene.depth_nm));
        assert_near(relative, 1, 0.01);
        sum += relative;
        checked++;
    }
    assert_true(checked >= 20);
    assert_near(sum / checked, 1, 0.002);
}

/* ---- cells and gap -------------------------------------------------------------------------------- */

/* Pixels 4-connected to (x, y), taken out of `left` on the way. */
static int flood(int32_t *left, int width, int height, int x, int y, int32_t cell, int32_t *stack)
{
    int size = 0, waiting = 0;
    stack[waiting++] = y * width + x;
    left[y * width + x] = 0;
    while (waiting) {
        int at = stack[--waiting], ax = at % width, ay = at / width;
        size++;
        for (int k = 0; k < 4; k++) {
            int bx = ax + (k == 0) - (k == 1), by = ay + (k == 2) - (k == 3);
            if (bx < 0 || by < 0 || bx >= width || by >= height || left[by * width + bx] != cell)
                continue;
            left[by * width + bx] = 0;
            stack[waiting++] = by * width + bx;
        }
    }
    return size;
}

/* Each label 1 .. count is one piece, against a flood written here. Areas come back in `areas`, from 1. */
static void check_connected(uf_labels labels, int *areas)
{
    size_t pixels = (size_t)labels.width * (size_t)labels.height;
    int32_t *left = malloc(pixels * sizeof *left), *stack = malloc(pixels * sizeof *stack);
    assert_true(left && stack);
    for (int y = 0; y < labels.height; y++)
        memcpy(left + (size_t)y * (size_t)labels.width, uf_labels_row(labels, y),
               (size_t)labels.width * sizeof *left);
    memset(areas, 0, ((size_t)labels.count + 1) * sizeof *areas);
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            int32_t cell = left[y * labels.width + x];
            if (!cell)
                continue;
            assert_in_range(cell, 1, labels.count);
            assert_int_equal(areas[cell], 0);
            areas[cell] = flood(left, labels.width, labels.height, x, y, cell, stack);
        }
    for (int k = 1; k <= labels.count; k++)
        assert_true(areas[k] > 0);
    free(left);
    free(stack);
}

/* Pixels outside cells with the same cell on all four sides. */
static int count_pinholes(uf_labels labels)
{
    int holes = 0;
    for (int y = 1; y < labels.height - 1; y++)
        for (int x = 1; x < labels.width - 1; x++) {
            const int32_t *row = uf_labels_row(labels, y);
            int32_t above = uf_labels_row(labels, y - 1)[x], below = uf_labels_row(labels, y + 1)[x];
            holes +=
                !row[x] && row[x - 1] && row[x - 1] == row[x + 1] && above == below && above == row[x - 1];
        }
    return holes;
}

/* Neighbouring pixels of two different cells, and cell pixels on the image's frame. */
static void count_contacts(uf_labels labels, int *between, int *on_frame)
{
    *between = *on_frame = 0;
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            int32_t cell = uf_labels_row(labels, y)[x];
            int32_t right = x + 1 < labels.width ? uf_labels_row(labels, y)[x + 1] : 0;
            int32_t below = y + 1 < labels.height ? uf_labels_row(labels, y + 1)[x] : 0;
            *between += cell && ((right && right != cell) || (below && below != cell));
            *on_frame += cell && (!x || !y || x == labels.width - 1 || y == labels.height - 1);
        }
}

/* What the header promises of cells: one piece each, of the asked size (0.5 % for drawing; a touching cell
 * may give up 15 %, one across the edge 80 %), and touching or cut only where that was asked for. */
static void check_cells(double touching, double border)
{
    int areas[64], between, on_frame, seen_between = 0, seen_frame = 0, cells = 0;
    for (uint64_t seed = 41; seed < 45; seed++) {
        uf_scene_settings s = uf_scene_defaults();
        s.seed = seed;
        s.touching = touching;
        s.border = border;
        uf_scene scene = make(&s);
        double px2 = s.pixel_size_um * s.pixel_size_um, keep = border > 0 ? 0.2 : touching > 0 ? 0.85 : 1;
        check_connected(scene.labels, areas);
        for (int k = 1; k <= scene.labels.count; k++) {
            assert_true(areas[k] * px2 > 0.99 * keep * pi * s.radius_min_um * s.radius_min_um);
            assert_true(areas[k] * px2 < 1.01 * pi * s.radius_max_um * s.radius_max_um);
        }
        assert_int_equal(count_pinholes(scene.labels), 0);
        count_contacts(scene.labels, &between, &on_frame);
        seen_between += between;
        seen_frame += on_frame;
        cells += scene.labels.count;
    }
    assert_true(cells >= 20);
    assert_true(touching > 0 ? seen_between > 100 : seen_between == 0);
    assert_true(border > 0 ? seen_frame > 100 : seen_frame == 0);
}

static void test_cells_are_whole_and_apart(void **state)
{
    (void)state;
    check_cells(0, 0);
}

static void test_cells_touch_when_asked(void **state)
{
    (void)state;
    check_cells(1, 0);
}

static void test_cells_cross_the_edge_when_asked(void **state)
{
    (void)state;
    check_cells(0, 1);
}

/* Returns 1 when the least gap of all (5 nm) occurs, plus 2 when the greatest (600 nm) does. */
static int check_gap_plane(const uf_scene *scene)
{
    int ends = 0;
    for (int y = 0; y < scene->labels.height; y++)
        for (int x = 0; x < scene->labels.width; x++) {
            float gap = uf_plane_row(scene->gap_nm, y)[x];
            assert_int_equal(isnan(gap) != 0, uf_labels_row(scene->labels, y)[x] == 0);
            assert_true(isnan(gap) || (gap >= 5 && gap <= 600));
            ends |= (gap == 5) | (gap == 600) << 1;
        }
    return ends;
}

/* NaN exactly outside cells and 5 to 600 nm in them, also for a wild membrane, in images smaller than a
 * cell and in one a cell covers altogether. */
static void test_gap_is_missing_exactly_outside(void **state)
{
    (void)state;
    static const int sizes[][2] = {{512, 512}, {1, 1}, {1, 37}, {41, 1}, {29, 31}, {97, 211}};
    int covered = 0, clipped = 0;
    for (int k = 0; k < 6; k++)
        for (uint64_t seed = 0; seed < 4; seed++) {
            uf_scene_settings s = uf_scene_defaults();
            s.seed = seed;
            s.width = sizes[k][0];
            s.height = sizes[k][1];
            s.border = k ? 1 : 0;
            s.touching = 0.5;
            s.lifted = 0.2;
            s.gap_sd_nm = seed == 3 ? 200 : 20;
            uf_arena_mark mark = uf_arena_now(&work.arena);
            uf_scene scene = make(&s);
            clipped |= check_gap_plane(&scene);
            covered += k && scene.labels.count && !isnan(uf_plane_row(scene.gap_nm, 0)[0]);
            uf_arena_back(&work.arena, mark);
        }
    assert_true(covered > 0 && clipped == 3);
}

/* Without spots, the share of the cells closer than half way between membrane and patch is patch_fraction;
 * the membrane's arch (22 nm) blurs the half way point, hence 3 %. */
static void test_patches_cover_the_asked_share(void **state)
{
    (void)state;
    static const double shares[] = {0.137, 0.52};
    for (int k = 0; k < 2; k++) {
        uf_scene_settings s = uf_scene_defaults();
        s.gap_sd_nm = 0;
        s.spots_min = s.spots_max = 0;
        s.patch_fraction = shares[k];
        uf_scene scene = make(&s);
        double close = 0, pixels = 0, half_way = (s.patch_gap_nm + s.base_gap_nm + 8) / 2;
        for (int i = 0; i < s.width * s.height; i++) {
            pixels += scene.labels.data[i] > 0;
            close += scene.labels.data[i] > 0 && (double)scene.gap_nm.data[i] < half_way;
        }
        assert_int_equal(scene.spots, 0);
        assert_near(close / pixels, shares[k], 0.03);
    }
}

/* Spots lie in the cell they name, no more of them than asked; lifted cells have none and ride high. */
static void test_spots_belong_to_cells_that_hold_on(void **state)
{
    (void)state;
    uf_scene_settings s = uf_scene_defaults();
    uf_scene scene = make(&s);
    int count[64] = {0};
    for (int k = 0; k < scene.spots; k++) {
        int x = (int)scene.spot_x_px[k], y = (int)scene.spot_y_px[k];
        assert_int_equal(uf_labels_row(scene.labels, y)[x], scene.spot_cell[k]);
        count[scene.spot_cell[k]]++;
    }
    for (int k = 1; k <= scene.labels.count; k++)
        assert_in_range(count[k], 1, s.spots_max);
    s.lifted = 1;
    scene = make(&s);
    double sum = 0, pixels = 0;
    for (int i = 0; i < s.width * s.height; i++)
        if (scene.labels.data[i]) {
            sum += (double)scene.gap_nm.data[i];
            pixels++;
        }
    assert_int_equal(scene.spots, 0);
    assert_near(sum / pixels, 180, 20);
}

/* Against the distance to every pixel outside, the slow way; the stated 4.5 % and not more. */
static void test_edge_distance_matches_slow_search(void **state)
{
    (void)state;
    uf_scene_settings s = uf_scene_defaults();
    s.width = 83;
    s.height = 71;
    s.radius_min_um = s.radius_max_um = 2.3;
    s.cells = 2;
    uf_scene scene = make(&s);
    uf_plane edge_um = take_plane(s.width, s.height);
    uf_scene_edge_distance(scene.labels, s.pixel_size_um, edge_um);
    assert_true(scene.labels.count > 0);
    for (int y = 0; y < s.height; y++)
        for (int x = 0; x < s.width; x++) {
            int32_t cell = uf_labels_row(scene.labels, y)[x];
            double best2 = INFINITY;
            for (int j = 0; cell && j < s.height; j++)
                for (int i = 0; i < s.width; i++)
                    if (uf_labels_row(scene.labels, j)[i] != cell)
                        best2 = fmin(best2, (i - x) * (i - x) + (j - y) * (j - y));
            double expected = cell ? sqrt(best2) * s.pixel_size_um : 0;
            assert_near((double)uf_plane_row(edge_um, y)[x], expected, 0.0451 * expected);
        }
}

/* ---- the whole -------------------------------------------------------------------------------------- */

static bool same_pixels(uf_plane a, uf_plane b)
{
    return !memcmp(a.data, b.data, (size_t)a.width * (size_t)a.height * sizeof(float));
}

/* The same settings give the same bytes, in fresh and in used memory; another seed gives other cells, and
 * another camera the same cells under other noise. */
static void test_same_settings_same_bytes(void **state)
{
    (void)state;
    uf_scene_settings s = uf_scene_defaults();
    s.width = 307;
    s.height = 283;
    s.cells = 4;
    s.border = 0.3;
    s.haze = 0.07;
    uf_scene a = make(&s);
    memset(take_plane(701, 503).data, 0x5a, (size_t)701 * 503 * sizeof(float));
    uf_scene b = make(&s);
    size_t label_bytes = (size_t)s.width * (size_t)s.height * sizeof(int32_t);
    assert_true(same_pixels(a.near_adu, b.near_adu) && same_pixels(a.wide_adu, b.wide_adu));
    assert_true(same_pixels(a.near_flat, b.near_flat) && same_pixels(a.wide_flat, b.wide_flat));
    assert_true(same_pixels(a.gap_nm, b.gap_nm));
    assert_memory_equal(a.labels.data, b.labels.data, label_bytes);
    assert_int_equal(a.spots, b.spots);
    assert_true(a.spots > 0);
    assert_memory_equal(a.spot_x_px, b.spot_x_px, (size_t)a.spots * sizeof(float));
    assert_memory_equal(a.spot_y_px, b.spot_y_px, (size_t)a.spots * sizeof(float));
    assert_memory_equal(a.spot_cell, b.spot_cell, (size_t)a.spots * sizeof(int32_t));

    s.read_noise_e = 3.7;
    b = make(&s);
    assert_memory_equal(a.labels.data, b.labels.data, label_bytes);
    assert_true(same_pixels(a.gap_nm, b.gap_nm) && !same_pixels(a.near_adu, b.near_adu));
    s.seed++;
    b = make(&s);
    assert_memory_not_equal(a.labels.data, b.labels.data, label_bytes);
}

static double wide_light(const uf_scene *scene, const uf_scene_settings *s)
{
    double sum = 0;
    for (int y = 0; y < s->height; y++)
        for (int x = 0; x < s->width; x++)
            sum += corrected(scene->wide_adu, scene->wide_flat, x, y, s->offset_adu, s->wide_background_adu);
    return sum;
}

/* Haze adds its share to the wide light of the field, spread so widely that single pixels outside cells
 * brighten too, and nothing to the near light: closed form. */
static void test_haze_adds_its_share(void **state)
{
    (void)state;
    uf_scene_settings s = quiet_settings();
    s.width = 301;
    s.height = 311;
    uf_scene clear = make(&s);
    s.haze = 0.137;
    uf_scene hazy = make(&s);
    double before = wide_light(&clear, &s), after = wide_light(&hazy, &s);
    int brighter = 0;
    for (int i = 0; i < s.width * s.height; i++)
        brighter += !clear.labels.data[i] && hazy.wide_adu.data[i] > clear.wide_adu.data[i] + 20;
    assert_near(after / before, 1.137, 1e-4);
    assert_true(brighter > 1000);
    assert_true(same_pixels(clear.near_adu, hazy.near_adu));
}

static void wide_centroid(const uf_scene *scene, const uf_scene_settings *s, double *cx, double *cy)
{
    double sum = 0, sum_x = 0, sum_y = 0;
    for (int y = 0; y < s->height; y++)
        for (int x = 0; x < s->width; x++) {
            double light =
                corrected(scene->wide_adu, scene->wide_flat, x, y, s->offset_adu, s->wide_background_adu);
            sum += light;
            sum_x += light * x;
            sum_y += light * y;
        }
    *cx = sum_x / sum;
    *cy = sum_y / sum;
}

/* A shift of (dx, dy) moves the centroid of the wide light by (dx, dy) and leaves the near image alone:
 * closed form. A thousandth of a pixel is allowed for rounding, five for light mirrored at the edges. */
static void test_shift_moves_the_wide_image(void **state)
{
    (void)state;
    uf_scene_settings s = quiet_settings();
    s.cells = 4;
    uf_scene still = make(&s);
    s.shift_dx_px = 2.385;
    s.shift_dy_px = -1.37;
    uf_scene moved = make(&s);
    double x0, y0, x1, y1;
    wide_centroid(&still, &s, &x0, &y0);
    wide_centroid(&moved, &s, &x1, &y1);
    assert_near(x1 - x0, 2.385, 0.006);
    assert_near(y1 - y0, -1.37, 0.006);
    assert_true(same_pixels(still.near_adu, moved.near_adu));
}

/* Glass 1.518 | water 1.335 | cytoplasm 1.37, s polarized, 488 nm, 70 deg, at the cytoplasm's boundary: thin-film matrix,
 * computed outside. */
static void test_layered_field_is_the_thin_film_s(void **state)
{
    (void)state;
    static const double rows[][2] = {{0, 2.522598}, {10, 2.225201}, {30, 1.727614}, {100, 0.704103}, {300, 0.053076}};
    uf_scene_settings s = uf_scene_defaults();
    s.medium_n = 1.335;
    for (size_t k = 0; k < sizeof rows / sizeof rows[0]; k++)
        assert_near(uf_scene_layered(&s, rows[k][0]), rows[k][1], 1e-6);
}

/* Specks change their own place and no other; on an empty field dark ones have only the background to hide. */
static void test_dust_shines_and_hides_where_it_falls(void **state)
{
    (void)state;
    uf_scene_settings s = uf_scene_defaults();
    s.width = s.height = 384;
    s.cells = 0;
    uf_scene clean = make(&s);
    s.dust = 6;
    uf_scene dusty = make(&s);
    int changed = 0, brighter = 0;
    for (int k = 0; k < 384 * 384; k++) {
        float difference = dusty.wide_adu.data[k] - clean.wide_adu.data[k];
        changed += fabsf(difference) > 100.0f;
        brighter += difference > 100.0f;
    }
    assert_true(changed > 100 && changed < 384 * 384 / 2);
    assert_true(brighter > changed / 2);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(test_generator_gives_published_values),
        cmocka_unit_test(test_uniform_moments),
        cmocka_unit_test(test_whole_numbers_reach_both_ends),
        cmocka_unit_test(test_normal_moments),
        cmocka_unit_test(test_poisson_variance_is_its_mean),
        cmocka_unit_test(test_poisson_probabilities),
        cmocka_unit_test_teardown(test_lattice_noise_is_standard_normal_everywhere, tear_down),
        cmocka_unit_test_teardown(test_lattice_noise_is_smooth, tear_down),
        cmocka_unit_test_teardown(test_blur_of_a_point_matches_slow_integration, tear_down),
        cmocka_unit_test_teardown(test_blur_of_nothing_is_a_shift, tear_down),
        cmocka_unit_test_teardown(test_blur_keeps_the_light, tear_down),
        cmocka_unit_test_teardown(test_flats_have_mean_one, tear_down),
        cmocka_unit_test_teardown(test_camera_follows_photon_transfer, tear_down),
        cmocka_unit_test_teardown(test_camera_writes_whole_counts_in_range, tear_down),
        cmocka_unit_test_teardown(test_depth_has_the_closed_form, tear_down),
        cmocka_unit_test_teardown(test_ratio_follows_the_gap, tear_down),
        cmocka_unit_test_teardown(test_ratio_in_focal_spots, tear_down),
        cmocka_unit_test_teardown(test_cells_are_whole_and_apart, tear_down),
        cmocka_unit_test_teardown(test_cells_touch_when_asked, tear_down),
        cmocka_unit_test_teardown(test_cells_cross_the_edge_when_asked, tear_down),
        cmocka_unit_test_teardown(test_gap_is_missing_exactly_outside, tear_down),
        cmocka_unit_test_teardown(test_patches_cover_the_asked_share, tear_down),
        cmocka_unit_test_teardown(test_spots_belong_to_cells_that_hold_on, tear_down),
        cmocka_unit_test_teardown(test_edge_distance_matches_slow_search, tear_down),
        cmocka_unit_test_teardown(test_same_settings_same_bytes, tear_down),
        cmocka_unit_test_teardown(test_layered_field_is_the_thin_film_s, tear_down),
        cmocka_unit_test_teardown(test_dust_shines_and_hides_where_it_falls, tear_down),
        cmocka_unit_test_teardown(test_haze_adds_its_share, tear_down),
        cmocka_unit_test_teardown(test_shift_moves_the_wide_image, tear_down),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
