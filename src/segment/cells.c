/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>
#include <string.h>

#include "image/components.h"
#include "image/distance.h"
#include "image/kernels.h"
#include "image/smooth.h"
#include "segment/levels.h"
#include "segment/part.h"
#include "segment/segment.h"

/* ---- cut at the middle of the two levels -------------------------------------------------------------- */

typedef struct cutting {
    const uf_kernels *kernels;
    uf_plane image, level; /* level is coarse */
    int factor;
    uf_mask mask;
    float *rows; /* two expanded rows a band */
} cutting;

enum { BAND = 64 };

/* A coarse row at full width, linear between the centres of its pixels. */
static void expand_row(const float *coarse, int coarse_width, int factor, float *out, int width)
{
    for (int x = 0; x < width; x++) {
        float u = ((float)x + 0.5f) / (float)factor - 0.5f;
        int x0 = u < 0.0f ? 0 : (int)u;
        x0 = x0 < coarse_width ? x0 : coarse_width - 1;
        int x1 = x0 + 1 < coarse_width ? x0 + 1 : x0;
        float t = u - (float)x0;
        t = t < 0.0f ? 0.0f : t > 1.0f ? 1.0f : t;
        out[x] = coarse[x0] + t * (coarse[x1] - coarse[x0]);
    }
}

static void cut_rows(void *context, int y0, int y1)
{
    cutting *c = context;
    int width = c->image.width, loaded = -2;
    float *upper = c->rows + (size_t)(y0 / BAND) * 2 * (size_t)width, *lower = upper + width;
    for (int y = y0; y < y1; y++) {
        float v = ((float)y + 0.5f) / (float)c->factor - 0.5f;
        int above = v < 0.0f ? 0 : (int)v;
        above = above < c->level.height ? above : c->level.height - 1;
        int below = above + 1 < c->level.height ? above + 1 : above;
        if (above != loaded) {
            expand_row(uf_plane_row(c->level, above), c->level.width, c->factor, upper, width);
            expand_row(uf_plane_row(c->level, below), c->level.width, c->factor, lower, width);
            loaded = above;
        }
        float t = v - (float)above;
        t = t < 0.0f ? 0.0f : t > 1.0f ? 1.0f : t;
        c->kernels->above(uf_mask_row(c->mask, y), uf_plane_row(c->image, y), upper, lower, t, width);
    }
}

/* Middle of plateau and outside: never below what can be a cell (uf_levels_find sees to it). */
static uf_status middle_level(uf_work *work, const uf_cell_map *map, uf_plane *level, uf_error *error)
{
    uf_status status = uf_plane_take(work, map->plateau_adu.width, map->plateau_adu.height, level, error);
    for (int y = 0; status == UF_OK && y < level->height; y++)
        for (int x = 0; x < level->width; x++)
            uf_plane_row(*level, y)[x] =
                0.5f * (uf_plane_row(map->plateau_adu, y)[x] + uf_plane_row(map->outside_adu, y)[x]);
    return status;
}

static uf_status cut_image(uf_work *work, const uf_channel *wide, const uf_cell_map *map, double smooth_px,
                           uf_mask *mask, uf_error *error)
{
    cutting c = {.kernels = uf_kernels_in_use(), .factor = map->factor, .mask = *mask};
    int width = wide->image.width, height = wide->image.height;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t bands = (size_t)(height + BAND - 1) / BAND;
    uf_status status = middle_level(work, map, &c.level, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &c.image, error);
    if (status == UF_OK)
        status = uf_take(work, bands * 2 * (size_t)width, sizeof(float), "segmentation", &c.rows, error);
    if (status == UF_OK)
        status = uf_smooth(work, wide->image, smooth_px, c.image, error);
    if (status == UF_OK)
        uf_rows_run(work, height, cut_rows, &c);
    uf_arena_back(&work->arena, mark);
    return status;
}

/* ---- all of it --------------------------------------------------------------------------------------------- */

/* The neck of a pair of touching cells, relative to the smaller one's half width, at which they are still
 * called one: the square root spreads the useful range over the setting's 0 .. 1. */
static double neck_of_setting(double split)
{
    return sqrt(split);
}

static uf_status find_labels(uf_work *work, const uf_channel *wide, const uf_settings *settings,
                             double pixel_size_um, uf_mask mask, uf_cell_map *map, uf_error *error)
{
    double um2 = pixel_size_um * pixel_size_um;
    double min_pixels = settings->cells.min_area_um2 / um2, max_pixels = settings->cells.max_area_um2 / um2;
    uf_status status = uf_fill_holes(work, mask, min_pixels, error);
    if (status == UF_OK)
        status = uf_components(work, mask, UF_FOUR_NEIGHBOURS, &map->labels, error);
    if (status == UF_OK)
        status = uf_distance(work, map->labels, 1, map->distance_px, error);
    if (status == UF_OK)
        status = uf_part_cells(work, wide, map->distance_px, pixel_size_um, neck_of_setting(settings->cells.split),
                               min_pixels, max_pixels, &map->labels, error);
    return status;
}

uf_status uf_segment(uf_work *work, const uf_channel *wide, const uf_settings *settings, double pixel_size_um,
                     uf_cell_map *map, uf_error *error)
{
    int width = wide->image.width, height = wide->image.height;
    *map = (uf_cell_map){0};
    uf_status status = uf_labels_take(work, width, height, &map->labels, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &map->distance_px, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &map->to_background_px, error);
    if (status == UF_OK)
        status = uf_levels_find(work, wide, pixel_size_um, map, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_mask mask;
    if (status == UF_OK)
        status = uf_mask_take(work, width, height, &mask, error);
    if (status == UF_OK)
        status = cut_image(work, wide, map, settings->cells.smooth_um / pixel_size_um, &mask, error);
    if (status == UF_OK)
        status = find_labels(work, wide, settings, pixel_size_um, mask, map, error);
    uf_arena_back(&work->arena, mark);
    if (status == UF_OK) {
        /* What was the distance to the outside of a piece is now split by cells too. */
        uf_plane spare = map->to_background_px;
        map->to_background_px = map->distance_px;
        map->distance_px = spare;
        status = uf_distance(work, map->labels, 1, map->distance_px, error);
    }
    if (status == UF_OK)
        status = uf_levels_outside(work, map, error);
    return status;
}
