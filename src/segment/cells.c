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

/* Of the way from the outside's level to the plateau: where the outline lies, by label. A membrane is as bright at the
 * outline as inside, so blur leaves the middle in place. Cytosol thins out towards the outline: the middle of its
 * level further in lies well inside (seen on simulated cells of 0.25 um at the outline to 5 um thick). */
static const float outline_shares[] = {
    [UF_LABEL_MEMBRANE] = 0.5f, [UF_LABEL_CYTOSOL] = 0.09f, [UF_LABEL_ADHESION_PROTEIN] = 0.25f};
static const float hole_share = 0.6f; /* of the outline's share: holes filled down to that level */
static const double speck_um2 = 0.5;  /* holes up to this are filled anyway */

/* ---- cut at the middle of the two levels ----------------------------------------------------- */

typedef struct cutting {
    const uf_kernels *kernels;
    uf_plane image, level; /* level is coarse */
    int factor;
    uf_mask mask;
    uf_expand_column *columns;
    float *rows; /* one a hand */
} cutting;

static void cut_rows(void *context, int hand, int y0, int y1)
{
    cutting *c = context;
    int width = c->image.width;
    float *level = c->rows + (size_t)hand * (size_t)width;
    for (int y = y0; y < y1; y++) {
        uf_expand_row(c->level, c->factor, y, c->columns, level, width);
        c->kernels->above(uf_mask_row(c->mask, y), uf_plane_row(c->image, y), level, width);
    }
}

/* The level at a share of the way from outside to plateau; the middle is never below what can be a cell
 * (uf_levels_find sees to it). */
static uf_status level_between(uf_work *work, const uf_cell_map *map, float share, uf_plane *level, uf_error *error)
{
    uf_status status = uf_plane_take(work, map->plateau_adu.width, map->plateau_adu.height, level, error);
    for (int y = 0; status == UF_OK && y < level->height; y++) {
        const float *inside = uf_plane_row(map->plateau_adu, y), *outside = uf_plane_row(map->outside_adu, y);
        for (int x = 0; x < level->width; x++)
            uf_plane_row(*level, y)[x] = outside[x] + share * (inside[x] - outside[x]);
    }
    return status;
}

/* `smooth` is the wide image, smoothed. */
static uf_status cut_image(uf_work *work, uf_plane smooth, const uf_cell_map *map, float share, uf_mask *mask,
                           uf_error *error)
{
    cutting c = {.kernels = uf_kernels_in_use(), .image = smooth, .factor = map->factor, .mask = *mask};
    int width = smooth.width;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = level_between(work, map, share, &c.level, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)uf_hands(work) * (size_t)width, sizeof(float), "segmentation", &c.rows, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)width, sizeof *c.columns, "segmentation", &c.columns, error);
    if (status == UF_OK) {
        uf_expand_columns(c.level.width, c.factor, width, c.columns);
        uf_rows_run(work, smooth.height, cut_rows, &c);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

/* ---- all of it ------------------------------------------------------------------------------- */

/* The neck of a pair of touching cells, relative to the smaller one's half width, at which they are still
 * called one: the square root spreads the useful range over the setting's 0 .. 1. */
static double neck_of_setting(double split)
{
    return sqrt(split);
}

static uf_part_settings part_settings(const uf_settings *settings, double pixel_size_um, uf_labels nuclei)
{
    double um2 = pixel_size_um * pixel_size_um;
    return (uf_part_settings){.pixel_size_um = pixel_size_um,
                              .neck = neck_of_setting(settings->cells.split),
                              .nuclei = nuclei,
                              .min_pixels = settings->cells.min_area_um2 / um2,
                              .max_pixels = settings->cells.max_area_um2 / um2};
}

/* A hole is filled where the image does not fall near to the outside's level: a dim place in a cell, not the
 * gap that cells leave between them, which would make their necks wide. */
static uf_status fill_dim_places(uf_work *work, uf_plane smooth, const uf_cell_map *map, float outline,
                                 double max_pixels, double um2, uf_mask mask, uf_error *error)
{
    uf_mask above_outside;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_mask_take(work, mask.width, mask.height, &above_outside, error);
    if (status == UF_OK)
        status = cut_image(work, smooth, map, hole_share * outline, &above_outside, error);
    if (status == UF_OK)
        status = uf_fill_holes(work, mask, speck_um2 / um2, max_pixels, above_outside, error);
    uf_arena_back(&work->arena, mark);
    return status;
}

/* Labels of cells, and the distance to the outside of all of them. */
static uf_status find_labels(uf_work *work, const uf_channel *wide, const uf_settings *settings, double pixel_size_um,
                             uf_labels nuclei, uf_cell_map *map, uf_error *error)
{
    uf_part_settings part = part_settings(settings, pixel_size_um, nuclei);
    float outline = outline_shares[settings->cells.label];
    int width = wide->image.width, height = wide->image.height;
    uf_mask mask;
    uf_plane smooth;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_mask_take(work, width, height, &mask, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &smooth, error);
    if (status == UF_OK)
        status = uf_smooth(work, wide->image, settings->cells.smooth_um / pixel_size_um, smooth, error);
    if (status == UF_OK)
        status = cut_image(work, smooth, map, outline, &mask, error);
    if (status == UF_OK)
        status =
            fill_dim_places(work, smooth, map, outline, part.min_pixels, pixel_size_um * pixel_size_um, mask, error);
    if (status == UF_OK)
        status = uf_components(work, mask, UF_FOUR_NEIGHBOURS, &map->labels, error);
    if (status == UF_OK)
        status = uf_distance_inside(work, map->labels, map->to_background_px, error);
    if (status == UF_OK)
        status = uf_part_cells(work, wide, smooth, map->to_background_px, &part, &map->labels, error);
    uf_arena_back(&work->arena, mark);
    return status;
}

/* ---- given labels ---------------------------------------------------------------------------- */

enum { MOST_LABEL = 1 << 24 }; /* a float holds all whole numbers up to here */

static uf_status largest_label(uf_plane given, int *largest, uf_error *error)
{
    *largest = 0;
    for (int y = 0; y < given.height; y++)
        for (int x = 0; x < given.width; x++) {
            float value = uf_plane_row(given, y)[x];
            if (!(value >= 0.0f) || value >= (float)MOST_LABEL || value != floorf(value))
                return uf_fail(
                    error, UF_INPUT,
                    "the mask holds %g at x %d, y %d; expected whole numbers, 0 outside cells, 1 and up in them",
                    (double)value, x, y);
            *largest = (int)value > *largest ? (int)value : *largest;
        }
    return UF_OK;
}

/* Thousands of labels of a few pixels each are no cells. */
static uf_status check_labels(int64_t covered, int count, uf_error *error)
{
    enum { MANY = 1000, LEAST_PIXELS = 50 };
    if (count < MANY || covered >= (int64_t)LEAST_PIXELS * count)
        return UF_OK;
    return uf_fail(error, UF_INPUT,
                   "the mask holds %d labels of %.1f pixels on average: is it an ordinary image? Expected a label "
                   "image, 0 outside "
                   "cells and one number a cell",
                   count, (double)covered / count);
}

/* Numbers the values that occur in the order of their first pixel. */
static uf_status take_given(uf_work *work, uf_plane given, uf_cell_map *map, uf_error *error)
{
    int largest, count = 0;
    int64_t covered = 0;
    int32_t *number;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = largest_label(given, &largest, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)largest + 1, sizeof *number, "the mask", &number, error);
    if (status == UF_OK) {
        memset(number, 0, ((size_t)largest + 1) * sizeof *number);
        for (int y = 0; y < given.height; y++)
            for (int x = 0; x < given.width; x++) {
                int label = (int)uf_plane_row(given, y)[x];
                if (label && !number[label])
                    number[label] = ++count;
                covered += label != 0;
                uf_labels_row(map->labels, y)[x] = number[label];
            }
        map->labels.count = count;
        status = check_labels(covered, count, error);
    }
    if (status == UF_OK) {
        status = uf_distance_inside(work, map->labels, map->to_background_px, error);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

/* Marks the cells that share a border with another. */
static void mark_touching(uf_labels labels, uint8_t *touching)
{
    for (int y = 0; y < labels.height; y++) {
        const int32_t *row = uf_labels_row(labels, y);
        const int32_t *below = uf_labels_row(labels, y + 1 < labels.height ? y + 1 : y);
        for (int x = 0; x < labels.width; x++) {
            int here = row[x], right = row[x + 1 < labels.width ? x + 1 : x], under = below[x];
            if (!here || (right == here && under == here))
                continue;
            if (right && right != here)
                touching[here] = touching[right] = 1;
            if (under && under != here)
                touching[here] = touching[under] = 1;
        }
    }
}

/* Distance to the own outline: for a cell that touches no other that is the distance to the background. */
static uf_status own_distances(uf_work *work, uf_cell_map *map, uf_error *error)
{
    uf_labels labels = map->labels;
    uint8_t *touching;
    size_t places = (size_t)labels.count + 1;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, places, 1, "distances", &touching, error);
    if (status == UF_OK) {
        memset(touching, 0, places);
        mark_touching(labels, touching);
        for (int y = 0; y < labels.height; y++)
            memcpy(uf_plane_row(map->distance_px, y), uf_plane_row(map->to_background_px, y),
                   (size_t)labels.width * sizeof(float));
        status = uf_distance(work, labels, touching, map->distance_px, error);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

uf_status uf_segment(uf_work *work, const uf_channel *wide, const uf_settings *settings, double pixel_size_um,
                     uf_plane given, uf_labels nuclei, uf_cell_map *map, uf_error *error)
{
    int width = wide->image.width, height = wide->image.height;
    *map = (uf_cell_map){0};
    uf_status status = uf_labels_take(work, width, height, &map->labels, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &map->distance_px, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &map->to_background_px, error);
    if (status == UF_OK)
        status = uf_levels_find(work, wide, pixel_size_um, outline_shares[settings->cells.label], map, error);
    if (status == UF_OK)
        status = given.data ? take_given(work, given, map, error)
                            : find_labels(work, wide, settings, pixel_size_um, nuclei, map, error);
    if (status == UF_OK)
        status = own_distances(work, map, error);
    if (status == UF_OK)
        status = uf_levels_outside(work, map, error);
    return status;
}

uf_status uf_segment_nuclei(uf_work *work, const uf_channel *channel, double pixel_size_um, uf_labels *nuclei,
                            uf_error *error)
{
    static const double least_um2 = 10;
    uf_settings like = {.cells = {.label = UF_LABEL_MEMBRANE,
                                  .smooth_um = 0.2,
                                  .min_area_um2 = least_um2,
                                  .max_area_um2 = 1e9,
                                  .split = 0.65}};
    uf_cell_map map;
    const uf_plane no_mask = {0};
    const uf_labels no_nuclei = {0};
    uf_status status = uf_segment(work, channel, &like, pixel_size_um, no_mask, no_nuclei, &map, error);
    *nuclei = map.labels;
    return status;
}
