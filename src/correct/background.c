/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Background and noise of a channel, and the hot pixels that only a known noise can tell. */
#include <math.h>
#include <string.h>

#include "correct/correct.h"
#include "correct/noise.h"
#include "correct/pixels.h"
#include "fit/robust.h"

/* A hot pixel stands above all eight neighbours by many sigma and by eight times their own range: even an
 * undersampled point (sigma 0.6 px) stands above by four times only. */
static int is_hot(uf_plane image, int x, int y, float clear)
{
    float least = INFINITY, most = -INFINITY, value = uf_plane_row(image, y)[x];
    for (int v = y - 1; v <= y + 1; v++)
        for (int u = x - 1; u <= x + 1; u++) {
            if (u == x && v == y)
                continue;
            float neighbour = uf_plane_row(image, v)[u];
            least = neighbour < least ? neighbour : least;
            most = neighbour > most ? neighbour : most;
        }
    return value - most > clear && value - most > 8.0f * (most - least);
}

static int64_t replace_hot(uf_plane image, double clear_adu)
{
    const uf_plane none = {0};
    float clear = (float)clear_adu;
    int64_t replaced = 0;
    for (int y = 1; y + 1 < image.height; y++) {
        float *row = uf_plane_row(image, y);
        for (int x = 1; x + 1 < image.width; x++)
            if (row[x] - row[x - 1] > clear && row[x] - row[x + 1] > clear && is_hot(image, x, y, clear)) {
                row[x] = uf_neighbour_median(image, none, x, y, 1);
                replaced++;
            }
    }
    return replaced;
}

/* ---- first estimate -------------------------------------------------------------------------- */

/* Empty substrate is taken to be at least this share of a field. */
static const double least_empty = 0.05;

enum { SAMPLE = 1 << 14 };

/* A lattice of pixels over the image, at most SAMPLE of them; saturated ones pile up and are left out. */
static size_t sample_image(const uf_channel *channel, double *values)
{
    uf_plane image = channel->image;
    int step = (int)ceil(sqrt((double)image.width * image.height / SAMPLE));
    step = step < 1 ? 1 : step;
    size_t count = 0;
    for (int y = step / 2; y < image.height; y += step)
        for (int x = step / 2; x < image.width && count < SAMPLE; x += step)
            if (!channel->saturated.data || !uf_mask_row(channel->saturated, y)[x])
                values[count++] = (double)uf_plane_row(image, y)[x];
    return count;
}

/* Spread on the lower side of the mode, where no cell adds to it: 1.4826 times the median distance of the
 * values below (the factor makes it sigma for a normal distribution). */
static double lower_spread(const double *sorted, size_t count, double mode)
{
    size_t below = 0;
    while (below < count && sorted[below] < mode)
        below++;
    return 1.4826 * (mode - uf_sorted_quantile(sorted, below, 0.5));
}

static void set_noise(uf_channel *channel, double spread, double pixels)
{
    double level = channel->background_adu;
    if (isnan(channel->noise.gain_e_per_adu)) {
        /* Neither camera keys nor a line through the image: all of the spread is taken to be shot noise. */
        double variance = spread > 0 ? spread * spread : 1.0;
        channel->noise.gain_e_per_adu = level > 0 ? level / variance : 1.0;
        channel->noise.excess2 = 1.0;
        channel->noise.read_adu = level > 0 ? 0.0 : sqrt(variance);
    }
    channel->noise_adu = sqrt(uf_noise_variance(&channel->noise, level));
    channel->background_sd_adu = (spread > channel->noise_adu ? spread : channel->noise_adu) / sqrt(pixels);
}

uf_status uf_background_first(uf_work *work, uf_channel *channel, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    double *values;
    uf_status status = uf_take(work, SAMPLE, sizeof *values, "the background", &values, error);
    if (status != UF_OK)
        return status;
    if (isnan(channel->noise.gain_e_per_adu) && !uf_noise_from_image(work, channel, &status, error) &&
        status != UF_OK)
        return status;
    size_t count = sample_image(channel, values);
    uf_sort(values, count);
    /* The mode's own scatter is pulled in by the mean of what lies within one spread of it. */
    double mode = uf_dense_mode(values, count, least_empty), spread = lower_spread(values, count, mode);
    double sum = 0, taken = 0;
    for (size_t k = 0; k < count; k++)
        if (fabs(values[k] - mode) <= 1.5 * spread) {
            sum += values[k];
            taken++;
        }
    channel->background_adu = taken > 0 ? sum / taken : mode;
    set_noise(channel, lower_spread(values, count, channel->background_adu), taken > 1 ? taken : 1);
    channel->replaced += replace_hot(channel->image, 8.0 * channel->noise_adu);
    uf_arena_back(&work->arena, mark);
    return UF_OK;
}

/* ---- once cells are known -------------------------------------------------------------------- */

/* The distance beyond which at least a hundredth of the coarse pixels lie, at most `clear_px`. */
static double distance_that_leaves_enough(const uf_cell_map *cells, double clear_px, float *scratch)
{
    size_t count = 0;
    for (int y = 0; y < cells->outside_px.height; y++)
        for (int x = 0; x < cells->outside_px.width; x++)
            scratch[count++] = uf_plane_row(cells->outside_px, y)[x];
    double farthest = (double)uf_select(scratch, count, (size_t)(0.99 * (double)(count - 1)));
    return farthest < clear_px ? farthest : clear_px;
}

/* Pixels of the coarse blocks at least `clear` away from cells, thinned to at most SAMPLE. */
static size_t sample_outside(uf_plane image, const uf_cell_map *cells, double clear, double *values)
{
    int step = (int)ceil(sqrt((double)image.width * image.height / SAMPLE)), factor = cells->factor;
    size_t count = 0;
    for (int y = step / 2; y < image.height; y += step) {
        const float *outside = uf_plane_row(cells->outside_px, y / factor);
        const float *row = uf_plane_row(image, y);
        for (int x = step / 2; x < image.width && count < SAMPLE; x += step)
            if (outside[x / factor] > 0 && (double)outside[x / factor] >= clear)
                values[count++] = (double)row[x];
    }
    return count;
}

uf_status uf_background_refine(uf_work *work, const uf_cell_map *cells, double clear_px, uf_channel *channel,
                               uf_error *error)
{
    if (!cells->labels.count)
        return UF_OK;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t coarse = (size_t)cells->outside_px.width * (size_t)cells->outside_px.height;
    double *values;
    float *distances;
    uf_status status = uf_take(work, SAMPLE, sizeof *values, "the background", &values, error);
    if (status == UF_OK)
        status = uf_take(work, coarse, sizeof *distances, "the background", &distances, error);
    if (status != UF_OK)
        return status;
    double clear = distance_that_leaves_enough(cells, clear_px, distances);
    size_t count = sample_outside(channel->image, cells, clear, values);
    if (count >= 16) {
        channel->background_adu = uf_median(values, count);
        double spread = (uf_sorted_quantile(values, count, 0.8413) - uf_sorted_quantile(values, count, 0.1587)) / 2;
        channel->noise_adu = sqrt(uf_noise_variance(&channel->noise, channel->background_adu));
        /* 1.2533: the standard error of a median against that of a mean, for a normal distribution. */
        channel->background_sd_adu = 1.2533 * spread / sqrt((double)count);
    }
    uf_arena_back(&work->arena, mark);
    return UF_OK;
}
