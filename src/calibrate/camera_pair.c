/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A pair of flats: one point of the photon transfer line. */
#include <math.h>

#include "calibrate/camera_parts.h"
#include "fit/robust.h"

/* Leaving out what lies beyond this lowers the variance of normal values by 1e-7, and that of one electron a
 * pixel behind a multiplying register, whose tails are exponential, by 1 %. Three steps are always granted: of
 * counts that hardly ever differ, those that do are no outliers. */
static const double outlier_sigma = 6, outlier_steps = 3;

/* Fewer pixels in a tile say nothing of a variance. */
enum { LEAST_IN_TILE = 8, OUTLIER_ROUNDS = 20 };

/* What one tile holds. */
typedef struct tile_sums {
    double pixels, rejected;                       /* kept, and left out as outliers */
    double counts, signal;                         /* sums over the kept ones */
    double variance;                               /* of the difference, */
    double fourth;                                 /* and the sum of its fourth powers */
    double along, along_pixels, down, down_pixels; /* products of neighbours' differences */
} tile_sums;

typedef struct pair {
    const uf_dark *dark;
    uf_plane a, b;
    uf_tiles tiles;
    double scale_a, scale_b; /* onto the common mean */
    tile_sums *sums;         /* one a tile */
} pair;

/* ---- light of each frame --------------------------------------------------------------------- */

/* Signals of the two frames, summed into tile_sums: a as counts, b as signal. */
static void light_of_tile(void *context, int hand, int index)
{
    (void)hand;
    const pair *p = context;
    const uf_dark_frames *frames = p->dark->frames;
    uf_box box = uf_tile(p->tiles, index);
    tile_sums sums = {0};
    for (int y = box.y0; y < box.y1; y++) {
        const float *a = uf_plane_row(p->a, y), *b = uf_plane_row(p->b, y);
        const double *dark = frames->mean_adu + (size_t)y * (size_t)frames->width;
        const uint8_t *bad = uf_mask_row(p->dark->defects, y);
        for (int x = box.x0; x < box.x1; x++) {
            if (bad[x])
                continue;
            sums.pixels++;
            sums.counts += (double)a[x] - dark[x] - frames->level_adu;
            sums.signal += (double)b[x] - dark[x] - frames->level_adu;
        }
    }
    p->sums[index] = sums;
}

static uf_status find_scales(uf_work *work, pair *p, uf_photon_point *point, uf_error *error)
{
    double a = 0, b = 0, pixels = 0, least = uf_least_light_adu(p->dark);
    int tiles = uf_tiles_count(p->tiles);
    uf_pool_run(work->pool, tiles, light_of_tile, p);
    for (int k = 0; k < tiles; k++) {
        a += p->sums[k].counts;
        b += p->sums[k].signal;
        pixels += p->sums[k].pixels;
    }
    a /= pixels;
    b /= pixels;
    double mean = (a + b) / 2;
    p->scale_a = p->scale_b = 1;
    point->flicker = (double)NAN;
    if (fmin(a, b) < -least)
        return uf_fail(
            error, UF_INPUT,
            "a flat is %.4g ADU darker than the dark frames (%.6g ADU); are flats and dark frames swapped, or "
            "taken with another offset or exposure?",
            -fmin(a, b), p->dark->offset_adu);
    if (!(mean > least))
        return UF_OK;
    if (fabs(a - b) > UF_FLICKER_MOST * mean)
        return uf_fail(
            error, UF_INPUT,
            "the two flats of a pair have signals of %.5g and %.5g ADU; a pair needs the same light and exposure "
            "twice, within %.0f %%",
            a, b, 100 * UF_FLICKER_MOST);
    p->scale_a = mean / a;
    p->scale_b = mean / b;
    point->flicker = a / b - 1;
    return UF_OK;
}

/* ---- variance of the difference -------------------------------------------------------------- */

/* Differences of a tile: NaN where a pixel does not count. */
typedef struct differences {
    int width, height;
    double value[UF_TILE_LARGEST * UF_TILE_LARGEST];
} differences;

static void take_differences(const pair *p, uf_box box, differences *d)
{
    const uf_dark_frames *frames = p->dark->frames;
    d->width = box.x1 - box.x0;
    d->height = box.y1 - box.y0;
    double *value = d->value;
    for (int y = box.y0; y < box.y1; y++) {
        const float *a = uf_plane_row(p->a, y), *b = uf_plane_row(p->b, y);
        const double *dark = frames->mean_adu + (size_t)y * (size_t)frames->width;
        const uint8_t *bad = uf_mask_row(p->dark->defects, y);
        for (int x = box.x0; x < box.x1; x++) {
            double offset = dark[x] + frames->level_adu;
            *value++ =
                bad[x] ? (double)NAN : p->scale_a * ((double)a[x] - offset) - p->scale_b * ((double)b[x] - offset);
        }
    }
}

/* Mean and variance of the differences that count. */
static void spread_of(const differences *d, double *count, double *mean, double *variance)
{
    int n = d->width * d->height;
    double sum = 0, squares = 0, kept = 0;
    for (int k = 0; k < n; k++)
        if (!isnan(d->value[k])) {
            sum += d->value[k];
            kept++;
        }
    *mean = kept > 0 ? sum / kept : 0;
    for (int k = 0; k < n; k++)
        if (!isnan(d->value[k]))
            squares += (d->value[k] - *mean) * (d->value[k] - *mean);
    *count = kept;
    *variance = kept > 1 ? squares / (kept - 1) : 0;
}

/* Leaves out what is beyond six sigma until nothing is. Starting from the plain sd, rounded counts do no harm (a
 * median of few different values would), and up to 2 % of outliers come out, the largest first. */
static void leave_out_outliers(differences *d, double step, tile_sums *sums)
{
    double count, mean, variance;
    spread_of(d, &count, &mean, &variance);
    for (int round = 0; round < OUTLIER_ROUNDS; round++) {
        double most = fmax(outlier_sigma * outlier_sigma * variance, pow(outlier_steps * step, 2));
        double before = sums->rejected;
        for (int k = 0; k < d->width * d->height; k++)
            if ((d->value[k] - mean) * (d->value[k] - mean) > most) {
                d->value[k] = (double)NAN;
                sums->rejected++;
            }
        if (sums->rejected == before)
            break;
        spread_of(d, &count, &mean, &variance);
    }
    sums->pixels = count;
    sums->variance = variance;
    for (int k = 0; k < d->width * d->height; k++) {
        d->value[k] -= mean;
        sums->fourth += isnan(d->value[k]) ? 0 : pow(d->value[k], 4);
    }
}

static void correlate(const differences *d, tile_sums *sums)
{
    for (int y = 0; y < d->height; y++)
        for (int x = 0; x < d->width; x++) {
            const double *here = d->value + y * d->width + x;
            double right = x + 1 < d->width ? here[0] * here[1] : (double)NAN;
            double below = y + 1 < d->height ? here[0] * here[d->width] : (double)NAN;
            if (!isnan(right)) {
                sums->along += right;
                sums->along_pixels++;
            }
            if (!isnan(below)) {
                sums->down += below;
                sums->down_pixels++;
            }
        }
}

/* Counts and signal of the pixels whose difference counts: mean and variance are of the same ones. */
static void mean_of_kept(const pair *p, uf_box box, const differences *d, tile_sums *sums)
{
    const uf_dark_frames *frames = p->dark->frames;
    const double *value = d->value;
    for (int y = box.y0; y < box.y1; y++) {
        const float *a = uf_plane_row(p->a, y), *b = uf_plane_row(p->b, y);
        const double *dark = frames->mean_adu + (size_t)y * (size_t)frames->width;
        for (int x = box.x0; x < box.x1; x++) {
            if (isnan(*value++))
                continue;
            double counts = ((double)a[x] + (double)b[x]) / 2;
            sums->counts += counts;
            sums->signal += counts - dark[x] - frames->level_adu;
        }
    }
}

static void measure_tile(void *context, int hand, int index)
{
    (void)hand;
    const pair *p = context;
    uf_box box = uf_tile(p->tiles, index);
    differences d;
    tile_sums sums = {0};
    take_differences(p, box, &d);
    leave_out_outliers(&d, p->dark->step_adu, &sums);
    if (sums.pixels >= LEAST_IN_TILE) {
        correlate(&d, &sums);
        mean_of_kept(p, box, &d, &sums);
    } else {
        sums = (tile_sums){0};
    }
    p->sums[index] = sums;
}

/* ---- tiles together -------------------------------------------------------------------------- */

/* Scaled to the common mean m of signals m (1 + e) and m (1 - e), the light's variance is k m m^2 / (m_a m_b),
 * and that of the dark (scale_a^2 + scale_b^2) / 2 times its own. */
static double without_flicker(const pair *p, double variance)
{
    double light = p->scale_a * p->scale_b, dark = (p->scale_a * p->scale_a + p->scale_b * p->scale_b) / 2;
    double foot = p->dark->variance_adu2;
    return (variance - foot * dark) / light + foot;
}

static void percentiles_of_tiles(const pair *p, double *scratch, uf_photon_point *point)
{
    size_t count = 0;
    for (int k = 0; k < uf_tiles_count(p->tiles); k++)
        if (p->sums[k].pixels > 0)
            scratch[count++] = p->sums[k].signal / p->sums[k].pixels;
    uf_sort(scratch, count);
    point->low_adu = uf_sorted_quantile(scratch, count, 0.05);
    point->high_adu = uf_sorted_quantile(scratch, count, 0.95);
}

/* Half the variance of the difference, over all tiles. How sure it is, is taken from the fourth moments: uneven
 * light and the long tails of few electrons make a variance less sure than the 2 / degrees of equal normal
 * values. */
static void join_tiles(const pair *p, double *scratch, uf_photon_point *point)
{
    tile_sums all = {0};
    double degrees = 0;
    for (int k = 0; k < uf_tiles_count(p->tiles); k++) {
        const tile_sums *t = p->sums + k;
        if (!(t->pixels > 0))
            continue;
        all.pixels += t->pixels;
        all.rejected += t->rejected;
        all.counts += t->counts;
        all.signal += t->signal;
        all.along += t->along;
        all.along_pixels += t->along_pixels;
        all.down += t->down;
        all.down_pixels += t->down_pixels;
        degrees += t->pixels - 1;
        all.variance += (t->pixels - 1) * t->variance;
        all.fourth += t->fourth - t->pixels * t->variance * t->variance;
    }
    double variance = all.variance / degrees;
    point->pixels = all.pixels;
    point->rejected_fraction = all.rejected / (all.pixels + all.rejected);
    point->mean_adu = all.counts / all.pixels;
    point->signal_adu = all.signal / all.pixels;
    point->variance_adu2 = without_flicker(p, variance / 2);
    point->variance_sd_adu2 = sqrt(fmax(0, all.fourth)) / degrees / 2;
    point->correlation_x = variance > 0 ? all.along / all.along_pixels / variance : 0;
    point->correlation_y = variance > 0 ? all.down / all.down_pixels / variance : 0;
    percentiles_of_tiles(p, scratch, point);
}

/* ---- saturation ------------------------------------------------------------------------------ */

/* A ceiling gathers at least so many pixels, and so many times those at the next lower count that occurs: noise
 * thins out upwards, and where it ends a handful of pixels are chance. */
enum { LEAST_AT_CEILING = 10 };
static const double more_than_below = 2;

/* The highest count of an ordinary pixel below `below`. */
static double highest_count(const pair *p, double below)
{
    double highest = -INFINITY;
    for (int y = 0; y < p->a.height; y++) {
        const float *a = uf_plane_row(p->a, y), *b = uf_plane_row(p->b, y);
        const uint8_t *bad = uf_mask_row(p->dark->defects, y);
        for (int x = 0; x < p->a.width; x++) {
            double one = (double)a[x], two = (double)b[x];
            highest = !bad[x] && one < below && one > highest ? one : highest;
            highest = !bad[x] && two < below && two > highest ? two : highest;
        }
    }
    return highest;
}

/* Ordinary pixels of which either frame is within low <= count < high. */
static double pixels_between(const pair *p, double low, double high)
{
    double count = 0;
    for (int y = 0; y < p->a.height; y++) {
        const float *a = uf_plane_row(p->a, y), *b = uf_plane_row(p->b, y);
        const uint8_t *bad = uf_mask_row(p->dark->defects, y);
        for (int x = 0; x < p->a.width; x++) {
            int in_a = (double)a[x] >= low && (double)a[x] < high, in_b = (double)b[x] >= low && (double)b[x] < high;
            count += !bad[x] && (in_a || in_b);
        }
    }
    return count;
}

/* Full scale as given, or the highest count where it gathers pixels. */
static void find_saturation(const pair *p, double full_scale, uf_photon_point *point)
{
    double ordinary = p->dark->ordinary_pixels;
    point->highest_adu = highest_count(p, INFINITY);
    point->saturation_adu = (double)NAN;
    point->saturated_fraction = 0;
    if (point->highest_adu >= full_scale) {
        point->saturation_adu = full_scale;
        point->saturated_fraction = pixels_between(p, full_scale, INFINITY) / ordinary;
        return;
    }
    double next = highest_count(p, point->highest_adu);
    double at = pixels_between(p, point->highest_adu, INFINITY), below = pixels_between(p, next, point->highest_adu);
    if (at >= LEAST_AT_CEILING && at > more_than_below * below) {
        point->saturation_adu = point->highest_adu;
        point->saturated_fraction = at / ordinary;
    }
}

/* ---- response -------------------------------------------------------------------------------- */

uf_status uf_response_start(uf_work *work, int width, int height, uf_response *response, uf_error *error)
{
    size_t pixels = (size_t)width * (size_t)height;
    *response = (uf_response){.width = width, .height = height};
    uf_status status =
        uf_take(work, pixels, sizeof *response->signal, "the pixels' response", &response->signal, error);
    for (size_t k = 0; status == UF_OK && k < pixels; k++)
        response->signal[k] = 0;
    return status;
}

static void add_response(const pair *p, uf_response *response)
{
    const uf_dark_frames *frames = p->dark->frames;
    for (int y = 0; y < frames->height; y++) {
        const float *a = uf_plane_row(p->a, y), *b = uf_plane_row(p->b, y);
        const double *dark = frames->mean_adu + (size_t)y * (size_t)frames->width;
        double *sum = response->signal + (size_t)y * (size_t)frames->width;
        for (int x = 0; x < frames->width; x++)
            sum[x] += ((double)a[x] + (double)b[x]) / 2 - dark[x] - frames->level_adu;
    }
    response->pairs++;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status check_pair(const pair *p, double exposure_ms, uf_error *error)
{
    const uf_dark_frames *frames = p->dark->frames;
    const uf_plane planes[] = {p->a, p->b};
    for (int k = 0; k < 2; k++)
        if (planes[k].width != frames->width || planes[k].height != frames->height)
            return uf_fail(error, UF_INPUT, "a flat is %d x %d pixels, the dark frames %d x %d; all need one size",
                           planes[k].width, planes[k].height, frames->width, frames->height);
    if (!(p->dark->ordinary_pixels > 0))
        return uf_fail(error, UF_INPUT,
                       "no pixel is ordinary in the dark frames; take more of them, of one exposure");
    if (exposure_ms <= 0 || isinf(exposure_ms))
        return uf_fail(error, UF_INPUT, "an exposure of %g ms; give one above 0, or none", exposure_ms);
    return UF_OK;
}

/* Two frames that are the same to the last count are one file given twice, unless all is at full scale. */
static uf_status check_unlike(const pair *p, const uf_photon_point *point, uf_error *error)
{
    if (point->saturated_fraction > 0.5 || uf_plane_fingerprint(p->a) != uf_plane_fingerprint(p->b))
        return UF_OK;
    return uf_fail(
        error, UF_INPUT,
        "the two flats of a pair are the same, pixel for pixel; give two frames taken one after the other");
}

uf_status uf_photon_pair(uf_work *work, const uf_dark *dark, uf_plane a, uf_plane b, double exposure_ms,
                         double full_scale_adu, uf_response *response, uf_photon_point *point, uf_error *error)
{
    pair p = {.dark = dark, .a = a, .b = b, .tiles = uf_tiles_of(a.width, a.height)};
    *point = (uf_photon_point){.exposure_ms = exposure_ms};
    uf_status status = check_pair(&p, exposure_ms, error);
    if (status != UF_OK)
        return status;
    size_t tiles = (size_t)uf_tiles_count(p.tiles);
    double *scratch = NULL;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    status = uf_take(work, tiles, sizeof *p.sums, "a pair of flats", &p.sums, error);
    if (status == UF_OK)
        status = uf_take(work, tiles, sizeof *scratch, "a pair of flats", &scratch, error);
    if (status == UF_OK)
        status = find_scales(work, &p, point, error);
    if (status == UF_OK) {
        uf_pool_run(work->pool, (int)tiles, measure_tile, &p);
        join_tiles(&p, scratch, point);
        find_saturation(&p, full_scale_adu, point);
        status = check_unlike(&p, point, error);
    }
    if (status == UF_OK && response && point->saturated_fraction <= 0.001 &&
        point->signal_adu > uf_least_light_adu(dark))
        add_response(&p, response);
    uf_arena_back(&work->arena, mark);
    return status;
}
