/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Flats from simulated images whose light is known (a Gaussian fall-off from a point beside the centre): what
 * comes back is held to what was put in, and the noise that is reported to the error that is made. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include <string.h>

#include "calibrate/flat.h"
#include "near.h"
#include "scene/random.h"

/* A sample under the microscope. */
typedef struct sample {
    int width, height;
    double offset_adu, level_adu, gain_e_per_adu, read_adu;
    double level_spread; /* relative, uniform */
    double fall_px;      /* sd of the light's fall-off */
    int things;          /* discs a field, and what they do to the light there */
    double thing_px, thing_low, thing_high;
    double full_scale_adu;
} sample;

static const sample film = {.width = 103,
                            .height = 87,
                            .offset_adu = 97.3,
                            .level_adu = 1830,
                            .gain_e_per_adu = 0.47,
                            .read_adu = 2.9,
                            .level_spread = 0.3,
                            .fall_px = 71,
                            .full_scale_adu = 65535};

static double light(const sample *s, int x, int y)
{
    double dx = x - 0.43 * s->width, dy = y - 0.58 * s->height;
    return exp(-(dx * dx + dy * dy) / (2 * s->fall_px * s->fall_px));
}

/* Dust and cells: discs that dim or brighten. */
static void place_things(const sample *s, uf_random *dice, float *times)
{
    for (int k = 0; k < s->width * s->height; k++)
        times[k] = 1;
    for (int k = 0; k < s->things; k++) {
        double cx = uf_random_between(dice, 0, s->width), cy = uf_random_between(dice, 0, s->height);
        double strength = uf_random_between(dice, s->thing_low, s->thing_high);
        for (int y = 0; y < s->height; y++)
            for (int x = 0; x < s->width; x++)
                if (hypot(x - cx, y - cy) < s->thing_px)
                    times[y * s->width + x] = (float)strength;
    }
}

static void shoot(const sample *s, uint64_t seed, uf_plane image)
{
    float times[128 * 128];
    uf_random dice;
    uf_random_start(&dice, seed, 3);
    double level = s->level_adu * (1 + s->level_spread * (uf_random_uniform(&dice) - 0.5));
    place_things(s, &dice, times);
    for (int y = 0; y < s->height; y++)
        for (int x = 0; x < s->width; x++) {
            double electrons = level * light(s, x, y) * (double)times[y * s->width + x] * s->gain_e_per_adu;
            double counts =
                uf_random_poisson(&dice, electrons) / s->gain_e_per_adu + s->read_adu * uf_random_normal(&dice);
            counts = fmax(0, floor(counts + s->offset_adu + 0.5));
            uf_plane_row(image, y)[x] = (float)fmin(counts, s->full_scale_adu);
        }
}

/* A stack, and what was made of it. */
typedef struct bench {
    uf_work work;
    sample sample;
    uf_flat_stack stack;
    uf_flat_request request;
    uf_plane image; /* room for one */
    uf_flat flat;
    uf_error error;
} bench;

static void start(bench *b, const sample *s, int images, uint64_t seed)
{
    *b = (bench){.sample = *s};
    b->request = (uf_flat_request){.offset_adu = s->offset_adu, .full_scale_adu = (double)NAN};
    assert_int_equal(uf_plane_take(&b->work, s->width, s->height, &b->image, NULL), UF_OK);
    for (int k = 0; k < images; k++) {
        shoot(s, seed * 1000 + (uint64_t)k, b->image);
        assert_int_equal(uf_flat_add(&b->stack, b->image, NULL), UF_OK);
    }
}

static uf_status make(bench *b)
{
    return uf_flat_make(&b->work, &b->stack, &b->request, &b->flat, &b->error);
}

static void make_well(bench *b)
{
    if (make(b) != UF_OK)
        fail_msg("%s", b->error.text);
}

static void end(bench *b)
{
    uf_flat_stack_free(&b->stack);
    uf_flat_stack_free(&b->stack); /* allowed twice */
    uf_arena_free(&b->work.arena);
}

static double mean_light(const sample *s)
{
    double sum = 0;
    for (int y = 0; y < s->height; y++)
        for (int x = 0; x < s->width; x++)
            sum += light(s, x, y);
    return sum / (s->width * s->height);
}

/* Mean and root mean square of flat / truth - 1 where the light is above `least` of its brightest. */
static double error_of(const bench *b, double least, double *mean)
{
    const sample *s = &b->sample;
    double sum = 0, squares = 0, n = 0, scale = mean_light(s);
    for (int y = 0; y < s->height; y++)
        for (int x = 0; x < s->width; x++)
            if (light(s, x, y) > least) {
                double e = (double)uf_plane_row(b->flat.image, y)[x] * scale / light(s, x, y) - 1;
                sum += e;
                squares += e * e;
                n++;
            }
    *mean = sum / n;
    return sqrt(squares / n);
}

/* ---- what comes back ------------------------------------------------------------------------- */

/* Noise in closed form: one value of signal S has S / gain + read^2, the mean of 14 a fourteenth of that. */
static void test_a_film_with_dust(void **state)
{
    (void)state;
    bench b;
    double mean;
    sample s = film;
    s.things = 3;
    s.thing_px = 6;
    s.thing_low = 0.3;
    s.thing_high = 0.7;
    start(&b, &s, 14, 1);
    make_well(&b);
    double rms = error_of(&b, 0.2, &mean);
    double share = 3 * 3.14159 * 36 / (103 * 87), signal = s.level_adu * mean_light(&s);
    double noise = sqrt(signal / s.gain_e_per_adu + s.read_adu * s.read_adu) / signal / sqrt(14 * (1 - share));
    assert_near_rel(rms, noise, 0.1);
    assert_near_rel(b.flat.noise_pixel, noise, 0.1);
    assert_near_rel(b.flat.noise_halves, noise, 0.1);
    assert_near_abs(b.flat.noise_expected, b.flat.noise_pixel, 0);
    assert_near_abs(mean, 0, 4 * noise / sqrt(103 * 87));
    assert_near_abs(b.flat.rejected_share, share, 0.012); /* discs are cut by the edge, and overlap */
    assert_true(b.flat.never_kept_share == 0 && b.flat.images == 14);
    assert_near_abs(b.flat.lowest, light(&s, 102, 0) / mean_light(&s), 0.1);
    double dimmest = (double)uf_plane_row(b.flat.image, b.flat.lowest_y)[b.flat.lowest_x];
    assert_near_abs(b.flat.lowest, dimmest, 0);
    end(&b);
}

/* Levels come back as put in, relative to each other. */
static void test_levels(void **state)
{
    (void)state;
    bench b;
    start(&b, &film, 6, 4);
    make_well(&b);
    double first = 0;
    for (int k = 0; k < 6; k++) {
        uf_random dice;
        uf_random_start(&dice, 4000 + (uint64_t)k, 3);
        double level = film.level_adu * (1 + film.level_spread * (uf_random_uniform(&dice) - 0.5));
        first = k ? first : level / b.flat.level_adu[0];
        assert_near_rel(b.flat.level_adu[k] * first, level, 0.003);
        assert_true(b.flat.unlikeness[k] < 0.02);
    }
    end(&b);
}

/* The noise that is reported is the error that is made, smoothed or not, over 12 stacks of 8 or 3 images: the truth
 * smoothed in the same way is what a smoothed flat stands for, so the light falls off slowly here. */
static void test_noise_is_the_error(void **state)
{
    (void)state;
    static const double smoothings[] = {0, 1.5, 4, 0};
    static const int images[] = {8, 8, 8, 3};
    for (int k = 0; k < 4; k++) {
        double made = 0, halves = 0, expected = 0, mean;
        for (uint64_t seed = 10; seed < 22; seed++) {
            bench b;
            sample s = film;
            s.fall_px = 600;
            start(&b, &s, images[k], seed);
            b.request.smooth_px = smoothings[k];
            make_well(&b);
            made += pow(error_of(&b, 0, &mean), 2) / 12;
            halves += pow(b.flat.noise_halves, 2) / 12;
            expected += pow(b.flat.noise_expected, 2) / 12;
            end(&b);
        }
        printf("%d images smoothed by %.1f: error %.5f, by halves %.5f, expected %.5f\n", images[k], smoothings[k],
               sqrt(made), sqrt(halves), sqrt(expected));
        assert_near_rel(sqrt(halves), sqrt(made), k == 2 ? 0.12 : 0.05);
        assert_near_rel(sqrt(expected), sqrt(made), k == 2 ? 0.12 : 0.05);
    }
}

/* Fields of cells, 3 to 9 times as bright as the background, over some 40 % of each field. */
static void test_cells(void **state)
{
    (void)state;
    bench b;
    double mean;
    sample s = film;
    s.level_adu = 410;
    s.level_spread = 0.1;
    s.things = 15;
    s.thing_px = 10;
    s.thing_low = 3;
    s.thing_high = 9;
    start(&b, &s, 40, 7);
    b.request.sample = UF_FLAT_CELLS;
    b.request.smooth_px = 3;
    make_well(&b);
    double rms = error_of(&b, 0.3, &mean);
    printf("cells: error %.4f, mean %.4f, by halves %.4f, expected %.4f, bias %.4f, rejected %.2f\n", rms, mean,
           b.flat.noise_halves, b.flat.noise_expected, b.flat.smooth_bias, b.flat.rejected_share);
    assert_near_abs(rms, 0, 1.5 * b.flat.noise_halves + b.flat.smooth_bias);
    assert_true(rms < 0.0025); /* smoothing without care for the fall-off at the borders makes it 0.005 */
    assert_near_abs(b.flat.rejected_share, 0.4, 0.07);
    end(&b);
}

/* With three images the median stands: one thing in one image does not show. */
static void test_three_images(void **state)
{
    (void)state;
    bench b;
    double mean;
    start(&b, &film, 2, 8);
    shoot(&film, 8003, b.image);
    for (int y = 30; y < 50; y++)
        for (int x = 20; x < 40; x++)
            uf_plane_row(b.image, y)[x] *= 3;
    assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    make_well(&b);
    double signal = film.level_adu * mean_light(&film);
    double noise = sqrt((signal / film.gain_e_per_adu + 8.41) * 0.4487) / signal; /* variance of a median of three */
    assert_near_rel(error_of(&b, 0.2, &mean), noise, 0.12);
    assert_near_rel(b.flat.noise_pixel, noise, 0.12);
    double here = (double)uf_plane_row(b.flat.image, 40)[30] * mean_light(&film) / light(&film, 30, 40);
    assert_near_abs(here, 1, 6 * noise); /* not 3 */
    end(&b);
}

/* Pixels that the map calls bad take their neighbours' flat; a dark image goes before the offset. */
static void test_defects_and_dark(void **state)
{
    (void)state;
    bench b;
    sample s = film;
    s.offset_adu = 300;
    start(&b, &s, 0, 9);
    assert_int_equal(uf_plane_take(&b.work, s.width, s.height, &b.request.defects, NULL), UF_OK);
    assert_int_equal(uf_plane_take(&b.work, s.width, s.height, &b.request.dark, NULL), UF_OK);
    for (int k = 0; k < s.width * s.height; k++) {
        b.request.defects.data[k] = (float)(k % 97 == 5);
        b.request.dark.data[k] = 300;
    }
    b.request.offset_adu = -1e5; /* not to be used */
    for (uint64_t image = 0; image < 6; image++) {
        shoot(&s, 9000 + image, b.image);
        for (int k = 5; k < s.width * s.height; k += 97)
            b.image.data[k] = 60000;
        assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    }
    b.request.full_scale_adu = 65535;
    make_well(&b);
    double mean, rms = error_of(&b, 0.2, &mean), bad = ceil((103 * 87 - 5) / 97.0);
    assert_true(rms < 0.05);
    assert_near_abs(b.flat.never_kept_share, bad / (103 * 87), 1e-9);
    assert_true(uf_plane_row(b.flat.count, 0)[5] == 0 && isnan(uf_plane_row(b.flat.noise, 0)[5]));
    assert_near_rel((double)uf_plane_row(b.flat.image, 0)[5], light(&s, 5, 0) / mean_light(&s), 0.05);
    end(&b);
}

/* Floats, and whole counts beyond 16 bits, are kept as they are: ten times the counts make the same flat. */
static void test_other_kinds_of_counts(void **state)
{
    (void)state;
    bench a, b;
    start(&a, &film, 5, 11);
    make_well(&a);
    start(&b, &film, 0, 11);
    for (uint64_t k = 0; k < 5; k++) {
        shoot(&film, 11000 + k, b.image);
        for (int i = 0; i < film.width * film.height; i++)
            b.image.data[i] = k % 2 ? b.image.data[i] * 64 + 0.5f : b.image.data[i] * 64;
        assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    }
    b.request.offset_adu *= 64;
    make_well(&b);
    for (int i = 0; i < film.width * film.height; i += 13)
        assert_near_rel((double)b.flat.image.data[i], (double)a.flat.image.data[i], 1e-3);
    end(&a);
    end(&b);
}

/* Few counts, each of many electrons: many pixels share the highest count, and more the next lower one, which is no
 * ceiling. */
static void test_coarse_counts(void **state)
{
    (void)state;
    bench b;
    sample s = film;
    s.level_adu = 38;
    s.gain_e_per_adu = 150;
    s.read_adu = 0.1;
    s.fall_px = 600;
    start(&b, &s, 9, 16);
    make_well(&b);
    assert_near_rel(b.flat.highest, 1.05, 0.05);
    end(&b);
}

/* The same bits by one hand and by three. */
static void test_any_number_of_hands(void **state)
{
    (void)state;
    bench b[2];
    for (int k = 0; k < 2; k++) {
        start(&b[k], &film, 7, 12);
        b[k].request.smooth_px = 2.3;
        if (k)
            assert_int_equal(uf_pool_new(&b[k].work.pool, 3, NULL), UF_OK);
        make_well(&b[k]);
    }
    size_t bytes = (size_t)film.width * (size_t)film.height * sizeof(float);
    assert_memory_equal(b[0].flat.image.data, b[1].flat.image.data, bytes);
    assert_memory_equal(b[0].flat.noise.data, b[1].flat.noise.data, bytes);
    assert_memory_equal(b[0].flat.level_adu, b[1].flat.level_adu, 7 * sizeof(double));
    assert_true(b[0].flat.noise_halves == b[1].flat.noise_halves);
    uf_pool_free(&b[1].work.pool);
    end(&b[0]);
    end(&b[1]);
}

/* ---- too noisy, and what would mend it ------------------------------------------------------- */

static void test_the_mend_mends(void **state)
{
    (void)state;
    bench b, more;
    sample s = film;
    s.level_adu = 900;
    start(&b, &s, 4, 13);
    make_well(&b);
    assert_true(b.flat.too_noisy && b.flat.noise_halves > UF_FLAT_NOISE_MOST);
    int wanted = b.flat.images_wanted;
    assert_true(wanted > 10 && wanted < 60);
    double smooth = b.flat.smooth_wanted_px;
    start(&more, &s, wanted, 14);
    make_well(&more);
    assert_near_rel(more.flat.noise_halves, UF_FLAT_NOISE_MOST, 0.2); /* a median of four is worse than a mean */
    end(&more);
    b.request.smooth_px = smooth;
    make_well(&b);
    assert_false(b.flat.too_noisy);
    assert_near_rel(b.flat.noise_halves, UF_FLAT_NOISE_MOST, 0.15);
    assert_true(b.flat.images_wanted == 0 && b.flat.smooth_wanted_px == 0);
    end(&b);
}

/* A lamp that wanders moves all pixels together: the halves see it, the scatter of single pixels smoothed does
 * not. */
static void test_a_lamp_that_wanders(void **state)
{
    (void)state;
    bench b;
    start(&b, &film, 0, 15);
    for (uint64_t k = 0; k < 10; k++) {
        shoot(&film, 15000 + k, b.image);
        for (int y = 0; y < film.height; y++)
            for (int x = 0; x < film.width; x++) {
                double tilt = 0.04 * ((double)x / film.width - 0.5) * (k % 2 ? 1 : -1);
                uf_plane_row(b.image, y)[x] +=
                    (float)floor(tilt * ((double)uf_plane_row(b.image, y)[x] - film.offset_adu));
            }
        assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    }
    b.request.smooth_px = 6;
    make_well(&b);
    assert_near_rel(b.flat.noise_halves, 1.4826 * 0.02 / 2, 0.2); /* robust sd of half a ramp of +-0.02 */
    assert_true(b.flat.noise_expected < 0.002);
    end(&b);
}

/* ---- what cannot be used --------------------------------------------------------------------- */

static void expect(const bench *b, uf_status status, const char *words)
{
    assert_int_equal(status, UF_INPUT);
    if (!strstr(b->error.text, words))
        fail_msg("\"%s\" does not say \"%s\"", b->error.text, words);
}

static void test_stacks_that_cannot_be_used(void **state)
{
    (void)state;
    bench b;
    start(&b, &film, 2, 20);
    expect(&b, make(&b), "2 images; a flat needs at least 3");
    expect(&b, uf_flat_add(&b.stack, b.image, &b.error), "image 3 is the same as image 2");
    uf_plane cut = b.image;
    cut.width--;
    expect(&b, uf_flat_add(&b.stack, cut, &b.error), "image 3 is 102 x 87 pixels, those before it 103 x 87");
    shoot(&film, 20009, b.image);
    assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    b.request.smooth_px = 101;
    expect(&b, make(&b), "smoothing by 101 pixels");
    b.request.smooth_px = 0;
    b.request.dark = cut;
    expect(&b, make(&b), "the dark image is 102 x 87 pixels");
    b.request.dark.data = NULL;
    b.request.defects = cut;
    expect(&b, make(&b), "the defect map is 102 x 87 pixels");
    b.request.defects.data = NULL;
    b.request.offset_adu = 3000;
    expect(&b, make(&b), "image 1 is hardly brighter than the dark");
    assert_null(b.flat.image.data);
    end(&b);
}

static void test_images_that_do_not_belong(void **state)
{
    (void)state;
    bench b;
    sample bright = film, dim = film, other = film;
    bright.level_adu = 9000;
    bright.full_scale_adu = 4095;
    start(&b, &film, 4, 21);
    shoot(&bright, 21050, b.image);
    assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    expect(&b, make(&b), "image 5 is saturated");
    assert_non_null(strstr(b.error.text, "at 4095 ADU"));
    end(&b);
    start(&b, &film, 4, 22); /* the same below a full scale that is given */
    b.request.full_scale_adu = 1400;
    expect(&b, make(&b), "image 1 is saturated");
    end(&b);
    dim.level_adu = 60;
    start(&b, &film, 4, 23);
    shoot(&dim, 23050, b.image);
    assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    expect(&b, make(&b), "image 5 is hardly brighter than the dark");
    end(&b);
    other.fall_px = 35; /* the lamp was focused */
    start(&b, &film, 2, 24);
    shoot(&other, 24050, b.image);
    assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    for (uint64_t k = 2; k < 5; k++) {
        shoot(&film, 24000 + k, b.image);
        assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    }
    expect(&b, make(&b), "image 3 is unlike the rest");
    end(&b);
}

/* Cells over three quarters of each field, or fields too few, leave no background to be sure of; discs over two
 * fifths of a "film" make it none. */
static void test_too_much_in_the_way(void **state)
{
    (void)state;
    bench b;
    sample s = film;
    s.level_spread = 0;
    s.things = 40;
    s.thing_px = 10;
    s.thing_low = 3;
    s.thing_high = 9;
    start(&b, &s, 40, 31);
    b.request.sample = UF_FLAT_CELLS;
    expect(&b, make(&b), "take more fields, sparser ones, or a film");
    end(&b);
    s.things = 12;
    start(&b, &s, 6, 32);
    b.request.sample = UF_FLAT_CELLS;
    expect(&b, make(&b), "of the 6 fields");
    end(&b);
    s.things = 16;
    start(&b, &s, 30, 33);
    b.request.full_scale_adu = 65535;
    expect(&b, make(&b), "fields of cells are another kind of sample");
    end(&b);
}

/* A vignetted corner, and a dead pixel: what is wrong is told apart. */
static void test_places_without_light(void **state)
{
    (void)state;
    bench b;
    sample s = film;
    s.fall_px = 22;
    s.level_adu = 20000;
    start(&b, &s, 6, 25);
    expect(&b, make(&b), "at x 102, y 0");
    assert_non_null(strstr(b.error.text, "crop the images"));
    end(&b);
    start(&b, &film, 0, 26);
    for (uint64_t k = 0; k < 6; k++) {
        shoot(&film, 26000 + k, b.image);
        uf_plane_row(b.image, 31)[17] = (float)(97 + k % 2);
        assert_int_equal(uf_flat_add(&b.stack, b.image, NULL), UF_OK);
    }
    expect(&b, make(&b), "at x 17, y 31 (1 pixels are at or below 0.05); these look like dead pixels");
    end(&b);
}

/* A defect map that leaves a hole wider than the filling reaches. */
static void test_a_hole_too_wide(void **state)
{
    (void)state;
    bench b;
    start(&b, &film, 5, 27);
    assert_int_equal(uf_plane_take(&b.work, film.width, film.height, &b.request.defects, NULL), UF_OK);
    for (int k = 0; k < film.width * film.height; k++) {
        int x = k % film.width, y = k / film.width;
        b.request.defects.data[k] = (float)(x > 30 && x < 60 && y > 30 && y < 60);
    }
    expect(&b, make(&b), "there is no good pixel around");
    b.request.smooth_px = 9;
    make_well(&b); /* smoothing reaches across */
    end(&b);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_a_film_with_dust),
                                       cmocka_unit_test(test_levels),
                                       cmocka_unit_test(test_noise_is_the_error),
                                       cmocka_unit_test(test_cells),
                                       cmocka_unit_test(test_three_images),
                                       cmocka_unit_test(test_defects_and_dark),
                                       cmocka_unit_test(test_other_kinds_of_counts),
                                       cmocka_unit_test(test_coarse_counts),
                                       cmocka_unit_test(test_any_number_of_hands),
                                       cmocka_unit_test(test_the_mend_mends),
                                       cmocka_unit_test(test_a_lamp_that_wanders),
                                       cmocka_unit_test(test_stacks_that_cannot_be_used),
                                       cmocka_unit_test(test_images_that_do_not_belong),
                                       cmocka_unit_test(test_too_much_in_the_way),
                                       cmocka_unit_test(test_places_without_light),
                                       cmocka_unit_test(test_a_hole_too_wide)};
    return cmocka_run_group_tests_name("flat calibration", tests, NULL, NULL);
}
