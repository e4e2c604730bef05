/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Dark frames: offset, noise in time, and pixels that are unlike the others. */
#include <math.h>
#include <string.h>

#include "calibrate/camera_parts.h"
#include "fit/chi_square.h"
#include "fit/robust.h"

/* A pixel this many times noisier than the others has lost nine tenths of its weight, whatever is done with it. */
static const double noisy_ratio = 3;

/* And beyond what one pixel in ten million shows by chance with so few frames. */
static const double noisy_chance = 1e-7;

/* A mean this many robust sd from its neighbours', and this many times the noise of a pixel: what a single image
 * would show as a wrong pixel where only the offset is subtracted. */
static const double hot_sigma = 8, hot_noise = 3;

/* And beyond what its own noise does to its mean, or noisy pixels would all be hot. */
static const double hot_own_sigma = 5;

/* A dark frame's level may wander by this many times the noise of a pixel; more is light. Ten robust sd of the
 * frames' own wander are granted too: some cameras drift as they warm up. */
static const double level_noise = 5, level_sigma = 10;

/* Rounding to whole steps is noise of step^2 / 12 only while the noise before it is not much smaller than a step.
 * Below a variance of 0.24 step^2 the noise before it is only known to be less than 0.40 steps (EMVA 1288,
 * release 3.1). */
static const double rounding_variance = 1.0 / 12, least_variance = 0.24, noise_bound = 0.40;

/* ---- adding frames --------------------------------------------------------------------------- */

uf_status uf_dark_start(uf_work *work, int width, int height, uf_dark_frames *frames, uf_error *error)
{
    size_t pixels = (size_t)width * (size_t)height;
    *frames = (uf_dark_frames){.width = width, .height = height};
    uf_status status = uf_take(work, pixels, sizeof(double), "dark frames", &frames->mean_adu, error);
    if (status == UF_OK)
        status = uf_take(work, pixels, sizeof(double), "dark frames", &frames->squares_adu2, error);
    if (status == UF_OK)
        status = uf_take(work, UF_DARK_FRAMES_MOST, sizeof(double), "dark frames", &frames->shift_adu, error);
    if (status == UF_OK)
        status = uf_take(work, UF_DARK_FRAMES_MOST, sizeof(double), "dark frames", &frames->scatter_adu, error);
    if (status == UF_OK)
        status = uf_take(work, UF_DARK_FRAMES_MOST, sizeof(uint64_t), "dark frames", &frames->fingerprint, error);
    for (size_t k = 0; status == UF_OK && k < pixels; k++)
        frames->mean_adu[k] = frames->squares_adu2[k] = 0;
    return status;
}

static uf_status refuse_frame(const uf_dark_frames *frames, uf_plane frame, uint64_t fingerprint, uf_error *error)
{
    int number = frames->count + 1;
    if (frame.width != frames->width || frame.height != frames->height)
        return uf_fail(error, UF_INPUT, "dark frame %d is %d x %d pixels, those before it %d x %d; all need one size",
                       number, frame.width, frame.height, frames->width, frames->height);
    if (frames->count >= UF_DARK_FRAMES_MOST)
        return uf_fail(error, UF_INPUT, "more than %d dark frames; fewer do as well", UF_DARK_FRAMES_MOST);
    for (int k = 0; k < frames->count; k++) {
        if (frames->fingerprint[k] != fingerprint)
            continue;
        if (uf_plane_is_constant(frame))
            return uf_fail(
                error, UF_INPUT,
                "dark frames %d and %d hold nothing but %g, so the noise is cut off; raise the camera's offset "
                "(black level) until dark pixels differ",
                k + 1, number, (double)uf_plane_row(frame, 0)[0]);
        return uf_fail(error, UF_INPUT,
                       "dark frame %d is the same as dark frame %d, pixel for pixel; give each exposure once", number,
                       k + 1);
    }
    return UF_OK;
}

typedef struct adding {
    uf_dark_frames *frames;
    uf_plane frame;
    uf_tiles tiles;
    double *mean, *sd; /* of the difference from the frames before, a tile each */
    double shift;
} adding;

static void compare_tile(void *context, int hand, int index)
{
    (void)hand;
    const adding *a = context;
    uf_box box = uf_tile(a->tiles, index);
    double n = (double)(box.x1 - box.x0) * (box.y1 - box.y0), sum = 0, squares = 0, first = 0;
    for (int y = box.y0; y < box.y1; y++) {
        const float *row = uf_plane_row(a->frame, y);
        const double *mean = a->frames->mean_adu + (size_t)y * (size_t)a->frames->width;
        for (int x = box.x0; x < box.x1; x++) {
            double d = (double)row[x] - mean[x];
            first = x == box.x0 && y == box.y0 ? d : first;
            sum += d - first;
            squares += (d - first) * (d - first);
        }
    }
    a->mean[index] = first + sum / n;
    a->sd[index] = sqrt(fmax(0, squares / n - sum / n * (sum / n)));
}

static void welford_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    const adding *a = context;
    const uf_dark_frames *frames = a->frames;
    double n = frames->count + 1;
    for (int y = y0; y < y1; y++) {
        const float *row = uf_plane_row(a->frame, y);
        double *mean = frames->mean_adu + (size_t)y * (size_t)frames->width;
        double *squares = frames->squares_adu2 + (size_t)y * (size_t)frames->width;
        for (int x = 0; x < frames->width; x++) {
            double value = (double)row[x] - a->shift, d = value - mean[x];
            mean[x] += d / n;
            squares[x] += d * (value - mean[x]);
        }
    }
}

static double counts_at_zero(uf_plane frame)
{
    double count = 0;
    for (int y = 0; y < frame.height; y++) {
        const float *row = uf_plane_row(frame, y);
        int in_row = 0;
        for (int x = 0; x < frame.width; x++)
            in_row += row[x] <= 0.0f;
        count += in_row;
    }
    return count;
}

uf_status uf_dark_add(uf_work *work, uf_dark_frames *frames, uf_plane frame, uf_error *error)
{
    uint64_t fingerprint = uf_plane_fingerprint(frame);
    uf_status status = refuse_frame(frames, frame, fingerprint, error);
    if (status != UF_OK)
        return status;
    adding a = {.frames = frames, .frame = frame, .tiles = uf_tiles_of(frame.width, frame.height)};
    size_t tiles = (size_t)uf_tiles_count(a.tiles);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    status = uf_take(work, tiles, sizeof *a.mean, "a dark frame", &a.mean, error);
    if (status == UF_OK)
        status = uf_take(work, tiles, sizeof *a.sd, "a dark frame", &a.sd, error);
    if (status == UF_OK) {
        int k = frames->count;
        frames->shift_adu[k] = frames->scatter_adu[k] = 0;
        if (k > 0) {
            uf_pool_run(work->pool, (int)tiles, compare_tile, &a);
            frames->shift_adu[k] = a.shift = uf_median(a.mean, tiles);
            frames->scatter_adu[k] = uf_median(a.sd, tiles);
        }
        uf_rows_run(work, frame.height, welford_rows, &a);
        uf_count_step_add(&frames->step, frame);
        frames->at_zero += counts_at_zero(frame);
        frames->fingerprint[k] = fingerprint;
        frames->level_adu += (a.shift - frames->level_adu) / (k + 1);
        frames->count++;
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

void uf_dark_image(const uf_dark_frames *frames, uf_plane out)
{
    for (int y = 0; y < frames->height; y++) {
        const double *mean = frames->mean_adu + (size_t)y * (size_t)frames->width;
        float *row = uf_plane_row(out, y);
        for (int x = 0; x < frames->width; x++)
            row[x] = (float)(mean[x] + frames->level_adu);
    }
}

/* ---- levels of the frames -------------------------------------------------------------------- */

/* Two frames differ from each other by root 2 of the noise of one, and from the mean of many by that of one. */
static double noise_of_differences(const uf_dark_frames *frames, double *scratch)
{
    for (int k = 1; k < frames->count; k++)
        scratch[k - 1] = frames->scatter_adu[k] / sqrt(1 + 1.0 / k);
    return uf_median(scratch, (size_t)frames->count - 1);
}

static uf_status check_levels(const uf_dark_frames *frames, uf_error *error)
{
    double scratch[UF_DARK_FRAMES_MOST], sd = noise_of_differences(frames, scratch), farthest = 0;
    int n = frames->count, worst = 0;
    memcpy(scratch, frames->shift_adu, (size_t)n * sizeof *scratch);
    uf_sort(scratch, (size_t)n);
    double middle = n == 2 ? scratch[0] : uf_sorted_quantile(scratch, (size_t)n, 0.5);
    for (int k = 0; k < n; k++) {
        double away = fabs(frames->shift_adu[k] - middle);
        scratch[k] = away;
        worst = away > farthest ? k : worst;
        farthest = fmax(farthest, away);
    }
    double granted = fmax(level_noise * sd, n == 2 ? 0 : level_sigma * UF_MAD_TO_SD * uf_median(scratch, (size_t)n));
    if (farthest <= granted)
        return UF_OK;
    return uf_fail(error, UF_INPUT,
                   "dark frame %d is %.4g ADU %s than the other%s, with noise of %.3g ADU; dark frames need a closed "
                   "shutter and one exposure: leave it out or take it again",
                   worst + 1, farthest, frames->shift_adu[worst] > middle ? "brighter" : "darker", n == 2 ? "" : "s",
                   sd);
}

static double sd_of_levels(const uf_dark_frames *frames)
{
    double squares = 0;
    for (int k = 0; k < frames->count; k++)
        squares += pow(frames->shift_adu[k] - frames->level_adu, 2);
    return sqrt(squares / (frames->count - 1));
}

/* ---- noise of the pixels --------------------------------------------------------------------- */

typedef struct noise_scale {
    double mean, mean_sd; /* variance of ordinary pixels */
    double limit;         /* a variance above it is noisy */
    double pixels;        /* ordinary ones */
    double median;        /* the variance of which this would be the median */
} noise_scale;

static void average_below(const float *variances, size_t n, noise_scale *scale)
{
    double sum = 0, squares = 0, count = 0;
    for (size_t k = 0; k < n; k++)
        if ((double)variances[k] <= scale->limit) {
            sum += (double)variances[k];
            squares += (double)variances[k] * (double)variances[k];
            count++;
        }
    scale->mean = count > 0 ? sum / count : 0;
    scale->mean_sd = count > 1 ? sqrt(fmax(0, squares / count - scale->mean * scale->mean) / (count - 1)) : 0;
    scale->pixels = count;
}

/* Mean variance of the pixels that are not noisy, what is noisy hanging on that mean: from the median, again and
 * again. */
static noise_scale scale_of_noise(float *variances, size_t n, int frames)
{
    double degrees = frames - 1, times = uf_chi_square_upper_quantile(noisy_chance, degrees) / degrees;
    times = fmax(times, noisy_ratio * noisy_ratio);
    noise_scale scale = {.limit = INFINITY};
    scale.median = uf_median_float(variances, n) * degrees / uf_chi_square_quantile(0.5, degrees);
    if (scale.median > 0)
        scale.mean = scale.median;
    else
        average_below(variances, n, &scale);
    for (int round = 0; round < 30; round++) {
        double before = scale.limit;
        scale.limit = times * scale.mean;
        average_below(variances, n, &scale);
        if (scale.limit == before)
            break;
    }
    return scale;
}

static void without_rounding(uf_dark *dark, const noise_scale *scale)
{
    double step2 = dark->step_adu * dark->step_adu, rounding = rounding_variance * step2;
    double median = dark->frames->count >= UF_MEDIAN_NOISE_FRAMES ? scale->median : scale->mean;
    /* the sd of a median is root(pi / 2) times that of a mean */
    double sd = scale->mean_sd * (dark->frames->count >= UF_MEDIAN_NOISE_FRAMES ? 1.2533 : 1);
    dark->variance_adu2 = scale->mean;
    dark->variance_sd_adu2 = scale->mean_sd;
    dark->noise_is_bound = scale->mean < least_variance * step2 || median < least_variance * step2;
    if (dark->noise_is_bound) {
        dark->noise_adu = dark->noise_rms_adu = noise_bound * dark->step_adu;
        dark->noise_sd_adu = (double)NAN;
        return;
    }
    dark->noise_adu = sqrt(median - rounding);
    dark->noise_rms_adu = sqrt(scale->mean - rounding);
    dark->noise_sd_adu = dark->noise_adu > 0 ? sd / (2 * dark->noise_adu) : 0;
}

/* ---- pixels that are unlike their neighbours ------------------------------------------------- */

typedef struct looking {
    const uf_dark_frames *frames;
    uf_tiles tiles;
    float *away; /* of each pixel's mean from the median of its tile */
} looking;

static void away_from_tile(void *context, int hand, int index)
{
    (void)hand;
    const looking *l = context;
    uf_box box = uf_tile(l->tiles, index);
    size_t width = (size_t)l->frames->width, n = 0;
    float values[UF_TILE_LARGEST * UF_TILE_LARGEST];
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            values[n++] = (float)l->frames->mean_adu[(size_t)y * width + (size_t)x];
    double middle = uf_median_float(values, n);
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++) {
            size_t at = (size_t)y * width + (size_t)x;
            l->away[at] = (float)(l->frames->mean_adu[at] - middle);
        }
}

/* The mean of the good pixels of each tile: few frames give means a median would round. */
static void mean_of_tile(const uf_dark *dark, uf_tiles tiles, int index, double *means, size_t *count)
{
    uf_box box = uf_tile(tiles, index);
    double sum = 0, n = 0;
    for (int y = box.y0; y < box.y1; y++)
        for (int x = box.x0; x < box.x1; x++)
            if (!uf_mask_row(dark->defects, y)[x]) {
                sum += dark->frames->mean_adu[(size_t)y * (size_t)dark->frames->width + (size_t)x];
                n++;
            }
    if (n > 0)
        means[(*count)++] = sum / n;
}

static double robust_sd(const float *away, float *scratch, size_t n)
{
    for (size_t k = 0; k < n; k++)
        scratch[k] = fabsf(away[k]);
    return UF_MAD_TO_SD * uf_median_float(scratch, n);
}

/* Marks bad pixels, and measures how the ordinary ones differ from their neighbours. */
static void mark_pixels(uf_dark *dark, const noise_scale *scale, const float *away, double hot)
{
    const uf_dark_frames *frames = dark->frames;
    double noisy = 0, hots = 0, any = 0, squares = 0, degrees = frames->count - 1;
    for (int y = 0; y < frames->height; y++)
        for (int x = 0; x < frames->width; x++) {
            size_t at = (size_t)y * (size_t)frames->width + (size_t)x;
            double variance = (double)(float)(frames->squares_adu2[at] / degrees), off = fabs((double)away[at]);
            int is_noisy = variance > scale->limit;
            int is_hot = off > hot && off > hot_own_sigma * sqrt(variance / frames->count);
            uf_mask_row(dark->defects, y)[x] =
                (uint8_t)((is_noisy ? UF_DEFECT_NOISE : 0) | (is_hot ? UF_DEFECT_DARK : 0));
            noisy += is_noisy;
            hots += is_hot;
            any += is_noisy || is_hot;
            squares += is_noisy || is_hot ? 0 : off * off;
        }
    double pixels = (double)frames->width * frames->height;
    dark->noisy_share = noisy / pixels;
    dark->hot_share = hots / pixels;
    dark->ordinary_pixels = pixels - any;
    dark->pattern_adu = sqrt(fmax(0, squares / fmax(1, pixels - any) - scale->mean / frames->count));
}

static void find_offset(uf_dark *dark, uf_tiles tiles, double *means)
{
    const uf_dark_frames *frames = dark->frames;
    size_t count = 0;
    for (int k = 0; k < uf_tiles_count(tiles); k++)
        mean_of_tile(dark, tiles, k, means, &count);
    dark->offset_adu = uf_median(means, count) + frames->level_adu;
    dark->drift_adu = sd_of_levels(frames);
    double pixel_part = dark->variance_adu2 / (frames->count * fmax(1, dark->ordinary_pixels));
    double hidden = dark->noise_is_bound ? dark->step_adu * dark->step_adu * rounding_variance : 0;
    dark->offset_sd_adu = sqrt(dark->drift_adu * dark->drift_adu / frames->count + pixel_part + hidden);
}

/* ---- all of it ------------------------------------------------------------------------------- */

typedef struct scratch_planes {
    float *a, *b;
    double *tiles;
} scratch_planes;

static uf_status take_scratch(uf_work *work, size_t pixels, size_t tiles, scratch_planes *s, uf_error *error)
{
    uf_status status = uf_take(work, pixels, sizeof *s->a, "dark frames", &s->a, error);
    if (status == UF_OK)
        status = uf_take(work, pixels, sizeof *s->b, "dark frames", &s->b, error);
    if (status == UF_OK)
        status = uf_take(work, tiles, sizeof *s->tiles, "dark frames", &s->tiles, error);
    return status;
}

static uf_status look(uf_work *work, uf_dark *dark, scratch_planes *s, uf_error *error)
{
    const uf_dark_frames *frames = dark->frames;
    size_t pixels = (size_t)frames->width * (size_t)frames->height;
    looking l = {.frames = frames, .tiles = uf_tiles_of(frames->width, frames->height), .away = s->a};
    for (size_t k = 0; k < pixels; k++)
        s->b[k] = (float)(frames->squares_adu2[k] / (frames->count - 1));
    noise_scale scale = scale_of_noise(s->b, pixels, frames->count);
    if (!(scale.mean > 0))
        return uf_fail(
            error, UF_INPUT,
            "the %d dark frames do not differ in their good pixels, so there is no noise to measure; raise the "
            "camera's offset (black level), or save what the camera gave and not an average",
            frames->count);
    without_rounding(dark, &scale);
    uf_pool_run(work->pool, uf_tiles_count(l.tiles), away_from_tile, &l);
    double spread = robust_sd(l.away, s->b, pixels);
    mark_pixels(dark, &scale, l.away, fmax(hot_sigma * spread, hot_noise * sqrt(scale.mean)));
    find_offset(dark, l.tiles, s->tiles);
    return UF_OK;
}

uf_status uf_dark_finish(uf_work *work, const uf_dark_frames *frames, uf_dark *dark, uf_error *error)
{
    *dark = (uf_dark){.frames = frames, .step_adu = uf_count_step_adu(&frames->step)};
    if (frames->count < 2)
        return uf_fail(error, UF_INPUT,
                       "%d dark frame%s; noise is how pixels differ from frame to frame: take at least 2, better 20",
                       frames->count, frames->count == 1 ? "" : "s");
    uf_status status = check_levels(frames, error);
    if (status == UF_OK)
        status = uf_mask_take(work, frames->width, frames->height, &dark->defects, error);
    if (status != UF_OK)
        return status;
    double pixels = (double)frames->width * frames->height;
    dark->clipped_share = dark->step_adu > 0 ? frames->at_zero / (pixels * frames->count) : 0;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    scratch_planes s = {0};
    int tiles = uf_tiles_count(uf_tiles_of(frames->width, frames->height));
    status = take_scratch(work, (size_t)pixels, (size_t)tiles, &s, error);
    if (status == UF_OK)
        status = look(work, dark, &s, error);
    uf_arena_back(&work->arena, mark);
    return status;
}
