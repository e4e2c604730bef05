/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/topography.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "scene/edge_distance.h"
#include "scene/lattice_noise.h"
#include "scene/random.h"

/* Gaps that membranes keep: a glycocalyx below, medium above (common practice, no source). */
static const double least_gap_nm = 5, most_gap_nm = 600;
static const double lifted_gap_nm = 185, lifted_sd_nm = 30;

/* Spots lie in a belt inside the outline and keep apart. */
static const double belt_from_um = 0.9, belt_to_um = 5.5, apart_um = 2.4;

typedef struct topography {
    uf_work *work;
    const uf_scene_settings *settings;
    uf_scene *scene;
    uf_plane edge_um, noise, patch; /* patch: 0 none .. 1 full */
    uf_plane spot;                  /* the same for spots */
    uint8_t *is_lifted;             /* of cells 1 .. */
} topography;

static float sigmoid(float x)
{
    return 1.0f / (1.0f + expf(-x));
}

/* ---- patches --------------------------------------------------------------------------------- */

static int ascending(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

/* The level that `share` of the cells' pixels exceed, from every fifth of them. */
static float level_exceeded(const topography *t, double share, float *values)
{
    size_t count = 0;
    uf_labels labels = t->scene->labels;
    for (int y = 0; y < labels.height; y++)
        for (int x = y % 5; x < labels.width; x += 5)
            if (uf_labels_row(labels, y)[x])
                values[count++] = uf_plane_row(t->patch, y)[x];
    if (!count)
        return 0.0f;
    qsort(values, count, sizeof *values, ascending);
    double at = (1.0 - share) * (double)(count - 1);
    return values[at < 0 ? 0 : (size_t)at];
}

/* Patches are where a smooth random field, higher towards the outline, exceeds a level. */
static uf_status make_patches(topography *t, uf_error *error)
{
    uf_random random;
    double px = t->settings->pixel_size_um;
    uf_labels labels = t->scene->labels;
    float *values;
    uf_random_start(&random, t->settings->seed, UF_STREAM_PATCHES);
    uf_status status = uf_lattice_noise(t->work, &random, 2.6 / px, t->patch, error);
    if (status == UF_OK)
        status =
            uf_take(t->work, (size_t)labels.width * (size_t)labels.height, sizeof *values, "patches", &values, error);
    if (status != UF_OK)
        return status;
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++)
            if (uf_labels_row(labels, y)[x])
                uf_plane_row(t->patch, y)[x] -= 0.3f * uf_plane_row(t->edge_um, y)[x] / 4.0f;
    float level = level_exceeded(t, t->settings->patch_fraction, values);
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++)
            uf_plane_row(t->patch, y)[x] = sigmoid((uf_plane_row(t->patch, y)[x] - level) / 0.13f);
    return UF_OK;
}

/* ---- spots ----------------------------------------------------------------------------------- */

enum { MOST_SPOTS = 1 << 16, TRIES = 60 };

/* Bounding boxes and centroids of cells, to throw places into and to point spots along. */
typedef struct cell_place {
    uf_box box;
    double x, y, pixels;
} cell_place;

static void find_places(uf_labels labels, const uf_box *boxes, cell_place *places)
{
    for (int k = 0; k <= labels.count; k++)
        places[k] = (cell_place){.box = boxes[k]};
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            cell_place *p = &places[uf_labels_row(labels, y)[x]];
            p->x += x;
            p->y += y;
            p->pixels++;
        }
    for (int k = 0; k <= labels.count; k++)
        if (places[k].pixels > 0) {
            places[k].x /= places[k].pixels;
            places[k].y /= places[k].pixels;
        }
}

/* An ellipse with soft edges; half axes in pixels. */
static void paint_spot(uf_plane plane, double x0, double y0, double half_length, double half_width, double angle)
{
    int reach = (int)ceil(2 * half_length) + 2, cx = (int)x0, cy = (int)y0;
    double c = cos(angle), s = sin(angle);
    for (int y = cy - reach < 0 ? 0 : cy - reach; y <= cy + reach && y < plane.height; y++)
        for (int x = cx - reach < 0 ? 0 : cx - reach; x <= cx + reach && x < plane.width; x++) {
            double u = ((x - x0) * c + (y - y0) * s) / half_length, v = ((y - y0) * c - (x - x0) * s) / half_width;
            float value = sigmoid((float)((1 - sqrt(u * u + v * v)) / 0.15));
            float *at = &uf_plane_row(plane, y)[x];
            *at = value > *at ? value : *at;
        }
}

static int too_near(const uf_scene *scene, double x, double y, double apart_px)
{
    for (int k = 0; k < scene->spots; k++)
        if (hypot((double)scene->spot_x_px[k] - x, (double)scene->spot_y_px[k] - y) < apart_px)
            return 1;
    return 0;
}

static int may_lie_at(const topography *t, int cell, double x, double y)
{
    float edge = uf_plane_row(t->edge_um, (int)y)[(int)x];
    return uf_labels_row(t->scene->labels, (int)y)[(int)x] == cell && (double)edge > belt_from_um &&
           (double)edge < belt_to_um && !too_near(t->scene, x, y, apart_um / t->settings->pixel_size_um);
}

static void add_spot(topography *t, uf_random *random, const cell_place *place, int cell, double x, double y)
{
    double px = t->settings->pixel_size_um;
    double half_length = uf_random_between(random, 0.45, 1.15) / px,
           half_width = uf_random_between(random, 0.18, 0.29) / px;
    double angle = atan2(y - place->y, x - place->x) + 0.3 * uf_random_normal(random);
    uf_scene *scene = t->scene;
    paint_spot(t->spot, x, y, half_length, half_width, angle);
    scene->spot_x_px[scene->spots] = (float)x;
    scene->spot_y_px[scene->spots] = (float)y;
    scene->spot_cell[scene->spots] = cell;
    scene->spots++;
}

static void make_cell_spots(topography *t, uf_random *random, const cell_place *place, int cell)
{
    int wanted = uf_random_whole(random, t->settings->spots_min, t->settings->spots_max);
    uf_box box = place->box;
    for (int tries = 0; wanted > 0 && tries < TRIES * t->settings->spots_max; tries++) {
        double x = uf_random_between(random, box.x0, box.x1 - 1e-6),
               y = uf_random_between(random, box.y0, box.y1 - 1e-6);
        if (t->scene->spots >= MOST_SPOTS || !may_lie_at(t, cell, x, y))
            continue;
        add_spot(t, random, place, cell, x, y);
        wanted--;
    }
}

static uf_status make_spots(topography *t, uf_error *error)
{
    uf_random random;
    uf_labels labels = t->scene->labels;
    uf_box *boxes;
    cell_place *places;
    uf_status status = uf_take(t->work, (size_t)labels.count + 1, sizeof *boxes, "spots", &boxes, error);
    if (status == UF_OK)
        status = uf_take(t->work, (size_t)labels.count + 1, sizeof *places, "spots", &places, error);
    if (status != UF_OK)
        return status;
    uf_label_boxes(labels, boxes);
    find_places(labels, boxes, places);
    uf_random_start(&random, t->settings->seed, UF_STREAM_SPOTS);
    for (int y = 0; y < labels.height; y++)
        memset(uf_plane_row(t->spot, y), 0, (size_t)labels.width * sizeof(float));
    for (int k = 1; k <= labels.count; k++)
        if (!t->is_lifted[k] && t->settings->spots_max > 0)
            make_cell_spots(t, &random, &places[k], k);
    return UF_OK;
}

/* ---- the gap --------------------------------------------------------------------------------- */

static void choose_lifted(topography *t)
{
    uf_random random;
    uf_random_start(&random, t->settings->seed, UF_STREAM_TRAITS);
    for (int k = 1; k <= t->scene->labels.count; k++)
        t->is_lifted[k] = uf_random_uniform(&random) < t->settings->lifted;
}

static void fill_gap(topography *t)
{
    const uf_scene_settings *s = t->settings;
    uf_labels labels = t->scene->labels;
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            int cell = uf_labels_row(labels, y)[x];
            double noise = (double)uf_plane_row(t->noise, y)[x], edge = (double)uf_plane_row(t->edge_um, y)[x];
            double patch = (double)uf_plane_row(t->patch, y)[x], spot = (double)uf_plane_row(t->spot, y)[x];
            /* The membrane arches away from the substrate under the cell's middle. */
            double arch = 22 * fmin(edge, 7) / 7;
            double gap = s->base_gap_nm + s->gap_sd_nm * noise + arch;
            gap = gap * (1 - patch) + s->patch_gap_nm * patch;
            gap = gap * (1 - spot) + s->spot_gap_nm * spot;
            if (t->is_lifted[cell])
                gap = lifted_gap_nm + lifted_sd_nm * noise;
            gap = fmin(fmax(gap, least_gap_nm), most_gap_nm);
            uf_plane_row(t->scene->gap_nm, y)[x] = cell ? (float)gap : NAN;
        }
}

uf_status uf_scene_topography(uf_work *work, const uf_scene_settings *settings, uf_scene *scene, uf_error *error)
{
    topography t = {.work = work, .settings = settings, .scene = scene};
    int width = settings->width, height = settings->height;
    uf_random random;
    size_t spots = MOST_SPOTS;
    uf_status status = uf_take(work, spots, sizeof(float), "spots", &scene->spot_x_px, error);
    if (status == UF_OK)
        status = uf_take(work, spots, sizeof(float), "spots", &scene->spot_y_px, error);
    if (status == UF_OK)
        status = uf_take(work, spots, sizeof(int32_t), "spots", &scene->spot_cell, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_plane *planes[] = {&t.edge_um, &t.noise, &t.patch, &t.spot};
    for (size_t k = 0; status == UF_OK && k < sizeof planes / sizeof planes[0]; k++)
        status = uf_plane_take(work, width, height, planes[k], error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)scene->labels.count + 1, 1, "cells", &t.is_lifted, error);
    if (status == UF_OK) {
        t.is_lifted[0] = 0;
        choose_lifted(&t);
        uf_scene_edge_distance(scene->labels, settings->pixel_size_um, t.edge_um);
        uf_random_start(&random, settings->seed, UF_STREAM_MEMBRANE);
        status = uf_lattice_noise(work, &random, 5.0 / settings->pixel_size_um, t.noise, error);
    }
    if (status == UF_OK)
        status = make_patches(&t, error);
    if (status == UF_OK)
        status = make_spots(&t, error);
    if (status == UF_OK)
        fill_gap(&t);
    uf_arena_back(&work->arena, mark);
    return status;
}
