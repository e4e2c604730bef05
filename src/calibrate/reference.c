/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "calibrate/reference.h"

#include <math.h>

#include "fit/robust.h"
#include "image/channel.h"

/* ---- pooling ------------------------------------------------------------------------------------- */

/* Mean of ln ratio of each well; wells without a ratio get NaN. Returns how many have one. */
static int wells_of(const uf_reference_unit *units, int count, int wells, double *sum, double *n)
{
    int found = 0;
    for (int k = 0; k < wells; k++)
        sum[k] = n[k] = 0;
    for (int k = 0; k < count; k++)
        if (units[k].ratio > 0 && isfinite(units[k].ratio)) {
            sum[units[k].well] += log(units[k].ratio);
            n[units[k].well]++;
        }
    for (int k = 0; k < wells; k++) {
        found += n[k] > 0;
        sum[k] = n[k] > 0 ? sum[k] / n[k] : (double)NAN;
    }
    return found;
}

static void pool_wells(const double *ln, int wells, uf_reference_pool *pool)
{
    double sum = 0, squares = 0;
    int n = pool->wells;
    for (int k = 0; k < wells; k++)
        sum += isnan(ln[k]) ? 0 : ln[k];
    double mean = sum / n;
    pool->ratio = exp(mean);
    pool->worst_well = -1;
    pool->worst_change = 0;
    for (int k = 0; k < wells; k++) {
        if (isnan(ln[k]))
            continue;
        squares += (ln[k] - mean) * (ln[k] - mean);
        double change = n > 1 ? exp((mean - ln[k]) / (n - 1)) - 1 : 0;
        if (n > 1 && (pool->worst_well < 0 || fabs(change) > fabs(pool->worst_change))) {
            pool->worst_well = k;
            pool->worst_change = change;
        }
    }
    pool->sd_from_fields = n < 3;
    pool->ratio_sd = pool->ratio * (n < 3 ? pool->spread : sqrt(squares / (n - 1) / n));
}

uf_status uf_reference_pool_units(uf_work *work, const uf_reference_unit *units, int count, uf_reference_pool *pool,
                                  uf_error *error)
{
    int wells = 0;
    double *ln, *n, *spreads;
    size_t known = 0, room;
    for (int k = 0; k < count; k++)
        wells = units[k].well >= wells ? units[k].well + 1 : wells;
    *pool =
        (uf_reference_pool){.worst_well = -1, .ratio = (double)NAN, .ratio_sd = (double)NAN, .spread = (double)NAN};
    room = (size_t)wells + (size_t)count + 1;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, room, sizeof *ln, "the reference", &ln, error);
    if (status == UF_OK)
        status = uf_take(work, room, sizeof *n, "the reference", &n, error);
    if (status == UF_OK)
        status = uf_take(work, room, sizeof *spreads, "the reference", &spreads, error);
    if (status == UF_OK) {
        pool->wells = wells_of(units, count, wells, ln, n);
        for (int k = 0; k < count; k++) {
            pool->fields += units[k].ratio > 0 && isfinite(units[k].ratio);
            if (units[k].ratio > 0 && !isnan(units[k].spread))
                spreads[known++] = units[k].spread;
        }
        pool->spread = uf_median(spreads, known);
        if (pool->wells)
            pool_wells(ln, wells, pool);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

/* ---- film ---------------------------------------------------------------------------------------- */

typedef struct film_images {
    uf_plane near, wide, near_blank, wide_blank;
    uf_mask near_saturated, wide_saturated;
} film_images;

static int is_saturated(uf_mask mask, int x, int y)
{
    return mask.data && uf_mask_row(mask, y)[x] == UF_PIXEL_SATURATED;
}

static double light_at(uf_plane image, uf_plane blank, int x, int y)
{
    return (double)uf_plane_row(image, y)[x] - (blank.data ? (double)uf_plane_row(blank, y)[x] : 0);
}

/* Medians of one block above the backgrounds; 0 when it cannot be used. */
static int look_at_block(const film_images *f, int x0, int y0, double *near, double *wide, int64_t *saturated)
{
    double near_values[UF_FILM_BLOCK_PX * UF_FILM_BLOCK_PX], wide_values[UF_FILM_BLOCK_PX * UF_FILM_BLOCK_PX];
    size_t n = 0;
    int bad = 0;
    for (int y = y0; y < y0 + UF_FILM_BLOCK_PX && y < f->near.height; y++)
        for (int x = x0; x < x0 + UF_FILM_BLOCK_PX && x < f->near.width; x++) {
            bad += is_saturated(f->near_saturated, x, y) || is_saturated(f->wide_saturated, x, y);
            near_values[n] = light_at(f->near, f->near_blank, x, y);
            wide_values[n++] = light_at(f->wide, f->wide_blank, x, y);
        }
    *saturated += bad;
    *near = uf_median(near_values, n);
    *wide = uf_median(wide_values, n);
    return !bad && *wide > 0 && *near > 0;
}

static void conclude(double *ratios, double *nears, double *wides, size_t blocks, uf_film_ratio *film)
{
    film->blocks = (int)blocks;
    film->near_adu = uf_median(nears, blocks);
    film->wide_adu = uf_median(wides, blocks);
    film->ratio = uf_median(ratios, blocks);
    for (size_t k = 0; k < blocks; k++)
        ratios[k] = fabs(log(ratios[k] / film->ratio));
    film->spread = 1.4826 * uf_median(ratios, blocks);
}

uf_status uf_film_ratio_of(uf_work *work, uf_plane near, uf_plane wide, uf_mask near_saturated,
                           uf_mask wide_saturated, uf_plane near_blank, uf_plane wide_blank, uf_film_ratio *film,
                           uf_error *error)
{
    film_images images = {near, wide, near_blank, wide_blank, near_saturated, wide_saturated};
    int across = (near.width + UF_FILM_BLOCK_PX - 1) / UF_FILM_BLOCK_PX;
    int down = (near.height + UF_FILM_BLOCK_PX - 1) / UF_FILM_BLOCK_PX;
    size_t blocks = 0, most = (size_t)across * (size_t)down;
    int64_t saturated = 0;
    double *values;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, 3 * most, sizeof *values, "the reference", &values, error);
    *film = (uf_film_ratio){.ratio = (double)NAN};
    for (int k = 0; status == UF_OK && k < across * down; k++) {
        double n, w;
        if (!look_at_block(&images, k % across * UF_FILM_BLOCK_PX, k / across * UF_FILM_BLOCK_PX, &n, &w, &saturated))
            continue;
        values[blocks] = n / w;
        values[most + blocks] = n;
        values[2 * most + blocks++] = w;
    }
    if (status == UF_OK)
        conclude(values, values + most, values + 2 * most, blocks, film);
    film->saturated_fraction = (double)saturated / ((double)near.width * near.height);
    uf_arena_back(&work->arena, mark);
    return status;
}
