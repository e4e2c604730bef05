/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/demo_bench.h"

#include <math.h>
#include <stdio.h>

#include "base/random.h"
#include "io/image_encode.h"
#include "scene/beads.h"
#include "scene/exposure.h"
#include "scene/psf.h"
#include "scene/scene.h"

/* ---- the bench's truth --------------------------------------------------------------------------- */

enum { SIDE = 384, HOT_PIXELS = 24, DARKS = 12, FILMS = 24, BEAD_IMAGES = 4 };

static const double pixel_um = 0.11, psf_um = 0.075;
static const double depth_nm = 80.3, stray_share = 0.08, stray_depth_nm = 1300;
static const double offset_adu = 100, gain_e_per_adu = 2.17, read_noise_e = 2.6, full_scale_adu = 62000;
static const double near_fall = 0.22, wide_fall = 0.28;
static const double film_near_adu = 5200, film_wide_adu = 2600, film_gap_nm = 15;
static const int exposures_ms[] = {2, 4, 8, 15, 30, 60, 120, 200, 300};

static const char bench_ini[] =
    "# Facts about the (simulated) bench that need no calibration.\n"
    "[light]\nwavelength_nm = 488\npolarization = s\n\n"
    "[interface]\ngeometry = objective\nsubstrate_n = 1.518\nmedium_n = 1.337\ncell_n = 1.37\n"
    "angle_deg = 69.5\nangle_sd_deg = 0.4\nobjective_na = 1.49\n\n"
    "[pixel]\nsize_um = 0.11\n";

static const char read_me[] =
    "Simulated data made by `underfoot demo`. Invented; they stand for no measurement.\n\n"
    "An afternoon of calibration at one bench. truth.txt says what was put in.\n\n"
    "bench.ini                        what is known without calibrating\n"
    "beads_1.tif ..                   near images of beads of 2500 nm radius, dye on their surface\n"
    "dark_01.tif ..                   near camera, no light\n"
    "light_002ms_1.tif, _2.tif ..     near camera, pairs of even light at rising exposures\n"
    "film_near_01.tif, film_wide_..   an even dye film, the stage moved between images\n"
    "shift_near.tif, shift_wide.tif   one field in both channels\n"
    "spacer_near.tif, spacer_wide.tif a film of one layer on a spacer of 15 nm\n\n"
    "docs/calibration.md goes through them.\n";

typedef struct bench_job {
    uf_work *work;
    const uf_output *output;
    uf_random random;
    int images;
} bench_job;

/* ---- files ----------------------------------------------------------------------------------------- */

static uf_status write_counts(bench_job *job, const char *name, uf_plane counts, uf_error *error)
{
    uf_text bytes = {0};
    uf_status status = uf_encode_count_tiff(&bytes, counts, pixel_um, "simulated by underfoot demo", error);
    if (status == UF_OK)
        status = uf_output_write(job->output, NULL, name, bytes.bytes, bytes.length, error);
    uf_text_free(&bytes);
    job->images++;
    return status;
}

static uf_status write_words(const bench_job *job, const char *name, const char *words, size_t length,
                             uf_error *error)
{
    return uf_output_write(job->output, NULL, name, words, length, error);
}

/* ---- beads ----------------------------------------------------------------------------------------- */

static uf_status write_beads(bench_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    for (int k = 1; status == UF_OK && k <= BEAD_IMAGES; k++) {
        uf_arena_mark mark = uf_arena_now(&job->work->arena);
        uf_bead_scene scene = {.seed = 500u + (unsigned)k,
                               .width = SIDE,
                               .height = SIDE,
                               .pixel_size_um = pixel_um,
                               .beads = 8,
                               .radius_um = 2.5,
                               .radius_spread = 0.01,
                               .depth_nm = depth_nm,
                               .scattered_fraction = stray_share,
                               .scattered_depth_nm = stray_depth_nm,
                               .psf_sigma_um = psf_um,
                               .peak_adu = 3200,
                               .label_spread = 0.12,
                               .floating = 0.12,
                               .floating_nm = 140,
                               .background_adu = 55,
                               .offset_adu = offset_adu,
                               .full_scale_adu = full_scale_adu,
                               .gain_e_per_adu = gain_e_per_adu,
                               .read_noise_e = read_noise_e};
        uf_plane counts;
        uf_bead_truth truth;
        char name[32];
        (void)snprintf(name, sizeof name, "beads_%d.tif", k);
        status = uf_scene_beads(job->work, &scene, &counts, &truth, error);
        if (status == UF_OK)
            status = write_counts(job, name, counts, error);
        uf_arena_back(&job->work->arena, mark);
    }
    return status;
}

/* ---- camera ---------------------------------------------------------------------------------------- */

/* The sensor's own: hot pixels, always the same ones. */
static void add_hot_pixels(uf_plane light)
{
    uf_random where;
    uf_random_start(&where, 77, 1);
    for (int k = 0; k < HOT_PIXELS; k++) {
        int x = uf_random_whole(&where, 0, SIDE - 1), y = uf_random_whole(&where, 0, SIDE - 1);
        uf_plane_row(light, y)[x] += (float)uf_random_between(&where, 150, 1500);
    }
}

static void expose(bench_job *job, uf_plane light)
{
    const uf_scene_camera camera = {offset_adu, gain_e_per_adu, read_noise_e};
    add_hot_pixels(light);
    uf_scene_expose(light, &camera, &job->random);
    for (int y = 0; y < light.height; y++)
        for (int x = 0; x < light.width; x++)
            uf_plane_row(light, y)[x] = fminf(uf_plane_row(light, y)[x], (float)full_scale_adu);
}

/* Light of one level that falls towards the corners. */
static uf_status write_even(bench_job *job, const char *name, double level_adu, double fall, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&job->work->arena);
    uf_plane light;
    uf_status status = uf_plane_take(job->work, SIDE, SIDE, &light, error);
    if (status == UF_OK) {
        uf_scene_illuminate(light, fall, 0.04, -0.06);
        for (int y = 0; y < SIDE; y++)
            for (int x = 0; x < SIDE; x++)
                uf_plane_row(light, y)[x] *= (float)level_adu;
        expose(job, light);
        status = write_counts(job, name, light, error);
    }
    uf_arena_back(&job->work->arena, mark);
    return status;
}

static uf_status write_camera(bench_job *job, uf_error *error)
{
    static const double rate_adu_per_ms = 240;
    uf_status status = UF_OK;
    char name[48];
    for (int k = 1; status == UF_OK && k <= DARKS; k++) {
        (void)snprintf(name, sizeof name, "dark_%02d.tif", k);
        status = write_even(job, name, 0, 0, error);
    }
    for (size_t k = 0; status == UF_OK && k < 2 * sizeof exposures_ms / sizeof *exposures_ms; k++) {
        double lamp = 1 + 0.004 * uf_random_normal(&job->random);
        (void)snprintf(name, sizeof name, "light_%03dms_%d.tif", exposures_ms[k / 2], (int)(k % 2) + 1);
        status = write_even(job, name, rate_adu_per_ms * exposures_ms[k / 2] * lamp, near_fall / 2, error);
    }
    return status;
}

/* ---- films ----------------------------------------------------------------------------------------- */

/* Specks of dye and bubbles lie elsewhere in each image, the light does not. */
static void add_specks(bench_job *job, uf_plane light)
{
    for (int k = 0; k < 5; k++) {
        double x = uf_random_between(&job->random, 0, SIDE - 1), y = uf_random_between(&job->random, 0, SIDE - 1);
        double r = uf_random_between(&job->random, 3, 14), by = k % 2 ? -0.6 : 0.8;
        for (int v = (int)fmax(0, y - r); v <= fmin(SIDE - 1, y + r); v++)
            for (int u = (int)fmax(0, x - r); u <= fmin(SIDE - 1, x + r); u++)
                if (hypot(u - x, v - y) < r)
                    uf_plane_row(light, v)[u] *= (float)(1 + by);
    }
}

static uf_status write_film(bench_job *job, const char *name, double level_adu, double fall, int specks,
                            uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&job->work->arena);
    uf_plane light;
    uf_status status = uf_plane_take(job->work, SIDE, SIDE, &light, error);
    if (status == UF_OK) {
        uf_scene_illuminate(light, fall, 0.05, -0.03);
        for (int y = 0; y < SIDE; y++)
            for (int x = 0; x < SIDE; x++)
                uf_plane_row(light, y)[x] *= (float)level_adu;
        if (specks)
            add_specks(job, light);
        status = uf_psf_blur(job->work, light, psf_um / pixel_um, 0, 0, light, error);
    }
    if (status == UF_OK) {
        expose(job, light);
        status = write_counts(job, name, light, error);
    }
    uf_arena_back(&job->work->arena, mark);
    return status;
}

static uf_status write_films(bench_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    char name[48];
    for (int k = 1; status == UF_OK && k <= FILMS; k++) {
        (void)snprintf(name, sizeof name, "film_near_%02d.tif", k);
        status = write_film(job, name, 9000, near_fall, 1, error);
        (void)snprintf(name, sizeof name, "film_wide_%02d.tif", k);
        if (status == UF_OK)
            status = write_film(job, name, 11000, wide_fall, 1, error);
    }
    double decay =
        (1 - stray_share) * exp(-film_gap_nm / depth_nm) + stray_share * exp(-film_gap_nm / stray_depth_nm);
    if (status == UF_OK)
        status = write_film(job, "spacer_near.tif", film_near_adu * decay, near_fall, 0, error);
    return status == UF_OK ? write_film(job, "spacer_wide.tif", film_wide_adu, wide_fall, 0, error) : status;
}

/* ---- shift ----------------------------------------------------------------------------------------- */

static const double shift_dx_px = 2.37, shift_dy_px = -1.62;

static uf_status write_shift(bench_job *job, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&job->work->arena);
    uf_scene_settings settings = uf_scene_defaults();
    uf_scene scene;
    settings.seed = 600;
    settings.width = settings.height = SIDE;
    settings.shift_dx_px = shift_dx_px;
    settings.shift_dy_px = shift_dy_px;
    settings.near_unevenness = near_fall;
    settings.wide_unevenness = wide_fall;
    uf_status status = uf_scene_make(job->work, &settings, &scene, error);
    if (status == UF_OK)
        status = write_counts(job, "shift_near.tif", scene.near_adu, error);
    if (status == UF_OK)
        status = write_counts(job, "shift_wide.tif", scene.wide_adu, error);
    uf_arena_back(&job->work->arena, mark);
    return status;
}

/* ---- all of it ------------------------------------------------------------------------------------- */

static uf_status write_truth(const bench_job *job, uf_error *error)
{
    uf_text out = {0};
    uf_text_printf(&out, "depth_nm = %g\nscattered_fraction = %g\nscattered_depth_nm = %g\n", depth_nm, stray_share,
                   stray_depth_nm);
    uf_text_printf(&out,
                   "offset_adu = %g\ngain_e_per_adu = %g\nread_noise_e = %g\nfull_scale_adu = %g\nhot_pixels = %d\n",
                   offset_adu, gain_e_per_adu, read_noise_e, full_scale_adu, HOT_PIXELS);
    uf_text_printf(&out, "near falls to the corner by = %g\nwide falls to the corner by = %g\n", near_fall,
                   wide_fall);
    uf_text_printf(&out, "shift_dx_px = %g\nshift_dy_px = %g\n", shift_dx_px, shift_dy_px);
    uf_text_printf(&out, "film ratio at gap 0 = %g\nspacer_nm = %g\n", film_near_adu / film_wide_adu, film_gap_nm);
    uf_status status = uf_text_check(&out, "the truth", error);
    if (status == UF_OK)
        status = write_words(job, "truth.txt", out.bytes, out.length, error);
    uf_text_free(&out);
    return status;
}

uf_status uf_demo_bench_write(uf_work *work, const uf_output *output, int *images, uf_error *error)
{
    bench_job job = {.work = work, .output = output};
    uf_random_start(&job.random, 501, 1);
    uf_status status = write_words(&job, "bench.ini", bench_ini, sizeof bench_ini - 1, error);
    if (status == UF_OK)
        status = write_words(&job, "README.txt", read_me, sizeof read_me - 1, error);
    if (status == UF_OK)
        status = write_beads(&job, error);
    if (status == UF_OK)
        status = write_camera(&job, error);
    if (status == UF_OK)
        status = write_films(&job, error);
    if (status == UF_OK)
        status = write_shift(&job, error);
    *images = job.images;
    return status == UF_OK ? write_truth(&job, error) : status;
}
