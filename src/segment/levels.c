/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Levels just inside and just outside the outlines.
 *
 * They vary slowly, so a grid of about 0.5 um serves, at a twentieth of the cost. A rough foreground comes from a
 * cut at a fraction of the local maximum. Then, again and again: measure distances from the outline on both
 * sides; average the image over the band 0.8 to 3 um inside it (beyond the reach of the blur, near enough to
 * be this edge's own level) and over the same band outside, spread both averages over the field by normalised
 * convolution (Knutsson and Westin 1993: blur of value times weight over blur of weight); cut at their
 * middle. Two rounds settle it to well below a pixel.
 */
#include "segment/levels.h"

#include <math.h>
#include <string.h>

#include "fit/robust.h"
#include "image/distance.h"
#include "image/smooth.h"

static const double grid_um = 0.5;
static const double band_from_um = 0.8, band_to_um = 3.0;
static const double reaches_um[] = {6.0, 3.0, 1.5}; /* widest first: the narrower one overrules where it reaches */
static const double rough_share = 0.3;              /* of the local maximum */
static const double local_um = 3.0;
enum { ROUNDS = 2 };

typedef struct levels {
    uf_work *work;
    uf_plane image, level;                               /* coarse image; cut between inside and outside */
    uf_labels side;                                      /* 1 inside, 0 outside */
    uf_plane distance;                                   /* to the other side, coarse pixels */
    double background, floor;                            /* nothing below `floor` is a cell */
    float share;                                         /* of the way from outside to inside: the outline */
    double grid_px_um;                                   /* size of a coarse pixel */
    uf_plane value, weight, spread_value, spread_weight; /* scratch; the last two on a coarser grid still */
    uf_expand_column *columns;
    float *row; /* two rows */
} levels;

/* ---- rough foreground ------------------------------------------------------------------------ */

/* Running maximum of `n` values over +- reach, one row or column at a time. */
static void running_maximum(const float *in, float *out, int n, int reach)
{
    for (int x = 0; x < n; x++) {
        int from = x - reach < 0 ? 0 : x - reach, to = x + reach >= n ? n - 1 : x + reach;
        float most = in[from];
        for (int u = from + 1; u <= to; u++)
            most = in[u] > most ? in[u] : most;
        out[x] = most;
    }
}

static void maximum_along_columns(uf_plane in, uf_plane out, int reach)
{
    for (int y = 0; y < in.height; y++) {
        int from = y - reach < 0 ? 0 : y - reach, to = y + reach >= in.height ? in.height - 1 : y + reach;
        float *row = uf_plane_row(out, y);
        memcpy(row, uf_plane_row(in, from), (size_t)in.width * sizeof *row);
        for (int v = from + 1; v <= to; v++) {
            const float *other = uf_plane_row(in, v);
            for (int x = 0; x < in.width; x++)
                row[x] = other[x] > row[x] ? other[x] : row[x];
        }
    }
}

static uf_status rough_level(levels *l, uf_error *error)
{
    int reach = (int)(local_um / l->grid_px_um + 0.5);
    uf_status status = uf_smooth(l->work, l->image, 1.0, l->value, error);
    if (status != UF_OK)
        return status;
    for (int y = 0; y < l->image.height; y++)
        running_maximum(uf_plane_row(l->value, y), uf_plane_row(l->weight, y), l->image.width, reach);
    maximum_along_columns(l->weight, l->value, reach);
    status = uf_smooth(l->work, l->value, reach / 2.0, l->level, error);
    for (int y = 0; y < l->level.height; y++)
        for (int x = 0; x < l->level.width; x++) {
            float *level = &uf_plane_row(l->level, y)[x];
            double cut = l->background + rough_share * ((double)*level - l->background);
            *level = (float)(cut > l->floor ? cut : l->floor);
        }
    return status;
}

/* ---- one round ------------------------------------------------------------------------------- */

static void cut(levels *l)
{
    for (int y = 0; y < l->image.height; y++) {
        const float *image = uf_plane_row(l->image, y), *level = uf_plane_row(l->level, y);
        int32_t *side = uf_labels_row(l->side, y);
        for (int x = 0; x < l->image.width; x++)
            side[x] = image[x] > level[x] && (double)image[x] > l->floor;
    }
    l->side.count = 1;
}

/* value, weight := the image where it lies in the band on one side, and where that is. */
static double pick_band(levels *l, int side)
{
    float from = (float)(band_from_um / l->grid_px_um), to = (float)(band_to_um / l->grid_px_um);
    double total = 0;
    for (int y = 0; y < l->image.height; y++) {
        const float *image = uf_plane_row(l->image, y), *distance = uf_plane_row(l->distance, y);
        const int32_t *sides = uf_labels_row(l->side, y);
        float *value = uf_plane_row(l->value, y), *weight = uf_plane_row(l->weight, y);
        for (int x = 0; x < l->image.width; x++) {
            int in_band = sides[x] == side && distance[x] - 0.5f >= from && distance[x] - 0.5f <= to;
            weight[x] = (float)in_band;
            value[x] = in_band ? image[x] : 0.0f;
            total += in_band;
        }
    }
    return total;
}

/* A view of the top left of a scratch plane. */
static uf_plane reduced_view(uf_plane plane, int step, int width, int height)
{
    return (uf_plane){plane.data, (width + step - 1) / step, (height + step - 1) / step, (width + step - 1) / step};
}

/* out := blurred value / blurred weight where there is weight within reach; else out is left alone. A blur this
 * wide needs no fine grid: it is done on one of about a third of its sigma and read back between the points. */
static uf_status spread(levels *l, double reach_um, uf_plane out, uf_error *error)
{
    double sigma = reach_um / l->grid_px_um;
    int step = sigma >= 5 ? (int)(sigma / 2.5) : 1;
    uf_plane value = reduced_view(l->spread_value, step, out.width, out.height);
    uf_plane weight = reduced_view(l->spread_weight, step, out.width, out.height);
    uf_reduce(l->work, l->value, step, value);
    uf_reduce(l->work, l->weight, step, weight);
    uf_status status = uf_smooth(l->work, value, sigma / step, value, error);
    if (status == UF_OK)
        status = uf_smooth(l->work, weight, sigma / step, weight, error);
    if (status != UF_OK)
        return status;
    uf_expand_columns(value.width, step, out.width, l->columns);
    for (int y = 0; y < out.height; y++) {
        float *row = uf_plane_row(out, y);
        uf_expand_row(value, step, y, l->columns, l->row, out.width);
        uf_expand_row(weight, step, y, l->columns, l->row + out.width, out.width);
        for (int x = 0; x < out.width; x++)
            if (l->row[out.width + x] > 0.01f)
                row[x] = l->row[x] / l->row[out.width + x];
    }
    return UF_OK;
}

static double band_mean(const levels *l, double total)
{
    double sum = 0;
    for (int y = 0; y < l->value.height; y++)
        for (int x = 0; x < l->value.width; x++)
            sum += (double)uf_plane_row(l->value, y)[x];
    return total > 0 ? sum / total : (double)NAN;
}

static void fill(uf_plane plane, double value)
{
    for (int y = 0; y < plane.height; y++)
        for (int x = 0; x < plane.width; x++)
            uf_plane_row(plane, y)[x] = (float)value;
}

/* Level of one side over the whole field: far from the band its mean, nearer an average over the band within
 * reach. Reaches in steps of two keep the middle of a dim cell from taking the level of a bright neighbour. */
static uf_status side_level(levels *l, int side, double without, uf_plane out, uf_error *error)
{
    double total = pick_band(l, side), mean = band_mean(l, total);
    fill(out, isnan(mean) ? without : mean);
    if (!(total > 0))
        return UF_OK;
    uf_status status = UF_OK;
    for (size_t k = 0; status == UF_OK && k < sizeof reaches_um / sizeof reaches_um[0]; k++)
        status = spread(l, reaches_um[k], out, error);
    return status;
}

static uf_status one_round(levels *l, uf_cell_map *map, uf_error *error)
{
    cut(l);
    uf_status status = uf_distance(l->work, l->side, NULL, l->distance, error);
    if (status == UF_OK)
        status = side_level(l, 1, l->floor, map->plateau_adu, error);
    if (status == UF_OK)
        status = side_level(l, 0, l->background, map->outside_adu, error);
    for (int y = 0; status == UF_OK && y < l->level.height; y++) {
        const float *inside = uf_plane_row(map->plateau_adu, y), *outside = uf_plane_row(map->outside_adu, y);
        float *level = uf_plane_row(l->level, y);
        for (int x = 0; x < l->level.width; x++) {
            float outline = outside[x] + l->share * (inside[x] - outside[x]);
            level[x] = (double)outline > l->floor ? outline : (float)l->floor;
        }
    }
    return status;
}

/* ---- all of it ------------------------------------------------------------------------------- */

/* Below this nothing is a cell: 6 sigma of a coarse pixel's noise, and a tenth of the outline's share of the field's
 * bright end, below which stray reflections and haze live. */
static void find_floor(levels *l, const uf_channel *wide, int factor)
{
    size_t count = (size_t)l->image.width * (size_t)l->image.height,
           bright_at = (size_t)(0.995 * (double)(count - 1));
    memcpy(l->value.data, l->image.data, count * sizeof *l->value.data);
    double bright = (double)uf_select(l->value.data, count, bright_at) - l->background;
    double noise = 6.0 * wide->noise_adu / factor + 3.0 * wide->background_sd_adu;
    double dim = 0.1 * (double)l->share * bright;
    l->floor = l->background + (dim > noise ? dim : noise);
}

static uf_status take_planes(levels *l, int width, int height, uf_error *error)
{
    uf_plane *planes[] = {&l->image,  &l->level,        &l->distance,     &l->value,
                          &l->weight, &l->spread_value, &l->spread_weight};
    uf_status status = uf_labels_take(l->work, width, height, &l->side, error);
    if (status == UF_OK)
        status = uf_take(l->work, (size_t)width, sizeof *l->columns, "segmentation", &l->columns, error);
    if (status == UF_OK)
        status = uf_take(l->work, 2 * (size_t)width, sizeof *l->row, "segmentation", &l->row, error);
    for (size_t k = 0; status == UF_OK && k < sizeof planes / sizeof planes[0]; k++)
        status = uf_plane_take(l->work, width, height, planes[k], error);
    return status;
}

/* Raises the plateau where the middle of the two levels lies below what can be a cell. */
static void hold_floor(const levels *l, uf_cell_map *map)
{
    for (int y = 0; y < map->plateau_adu.height; y++) {
        float *inside = uf_plane_row(map->plateau_adu, y);
        const float *outside = uf_plane_row(map->outside_adu, y);
        for (int x = 0; x < map->plateau_adu.width; x++) {
            float least = outside[x] + ((float)l->floor - outside[x]) / l->share;
            inside[x] = inside[x] > least ? inside[x] : least;
        }
    }
}

static int coarse_size(int pixels, int factor)
{
    return (pixels + factor - 1) / factor;
}

uf_status uf_levels_find(uf_work *work, const uf_channel *wide, double pixel_size_um, float share, uf_cell_map *map,
                         uf_error *error)
{
    int factor = (int)(grid_um / pixel_size_um + 0.5);
    factor = factor < 1 ? 1 : factor > 16 ? 16 : factor;
    int width = coarse_size(wide->image.width, factor), height = coarse_size(wide->image.height, factor);
    map->factor = factor;
    uf_status status = uf_plane_take(work, width, height, &map->plateau_adu, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &map->outside_adu, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    levels l = {
        .work = work, .background = wide->background_adu, .share = share, .grid_px_um = factor * pixel_size_um};
    if (status == UF_OK)
        status = take_planes(&l, width, height, error);
    if (status == UF_OK) {
        uf_reduce(work, wide->image, factor, l.image);
        find_floor(&l, wide, factor);
        status = rough_level(&l, error);
    }
    for (int round = 0; status == UF_OK && round < ROUNDS; round++)
        status = one_round(&l, map, error);
    if (status == UF_OK)
        hold_floor(&l, map);
    uf_arena_back(&work->arena, mark);
    return status;
}

uf_status uf_levels_outside(uf_work *work, uf_cell_map *map, uf_error *error)
{
    int factor = map->factor, width = map->plateau_adu.width, height = map->plateau_adu.height;
    uf_labels inside;
    uf_status status = uf_plane_take(work, width, height, &map->outside_px, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    if (status == UF_OK)
        status = uf_labels_take(work, width, height, &inside, error);
    if (status == UF_OK) {
        for (int y = 0; y < height; y++)
            memset(uf_labels_row(inside, y), 0, (size_t)width * sizeof(int32_t));
        for (int y = 0; y < map->labels.height; y++) {
            const int32_t *row = uf_labels_row(map->labels, y);
            int32_t *coarse = uf_labels_row(inside, y / factor);
            for (int x = 0; x < map->labels.width; x++)
                if (row[x])
                    coarse[x / factor] = 1;
        }
        inside.count = 1;
        status = uf_distance(work, inside, NULL, map->outside_px, error);
    }
    for (int y = 0; status == UF_OK && y < height; y++) {
        float *row = uf_plane_row(map->outside_px, y);
        for (int x = 0; x < width; x++)
            row[x] = uf_labels_row(inside, y)[x] ? 0.0f : row[x] * (float)factor;
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
