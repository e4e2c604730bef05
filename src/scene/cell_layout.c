/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/cell_layout.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "scene/cell_stamp.h"

/* Cells keep this far from each other unless they touch, and from the image's
 * edge unless cut by it. */
static const double clearance_um = 1.0;

enum { SHAPES = 5, PLACES = 150, CROWDED = 4 };

/* The cell at hand, and the image it is to be laid into. */
typedef struct layout {
    const uf_scene_settings *settings;
    uf_random random;
    uf_labels labels;
    uf_labels zone; /* 0 free; k within the clearance of cell k; -1 within that of
                       two */
    int clearance;
    uf_cell_stamp stamp;
} layout;

/* Places
 * ------------------------------------------------------------------------------------------
 */

/* Pixels the stamp would share with cell `partner` (0: none) with its corner at
 * (left, top); -1 when it would come too close to any other cell. */
static int shared_pixels(const layout *l, int left, int top, int32_t partner)
{
    int shared = 0;
    for (int y = l->stamp.box.y0; y < l->stamp.box.y1; y++) {
        int to_y = top + y;
        if (to_y < 0 || to_y >= l->labels.height)
            continue;
        const uint8_t *on = uf_mask_row(l->stamp.mask, y);
        const int32_t *zone = uf_labels_row(l->zone, to_y), *label = uf_labels_row(l->labels, to_y);
        int x0 = l->stamp.box.x0 > -left ? l->stamp.box.x0 : -left;
        int x1 = l->stamp.box.x1 < l->labels.width - left ? l->stamp.box.x1 : l->labels.width - left;
        for (int x = x0; x < x1; x++) {
            if (!on[x] || !zone[left + x])
                continue;
            if (zone[left + x] != partner)
                return -1;
            shared += label[left + x] == partner;
        }
    }
    return shared;
}

static bool within_image(const layout *l, int left, int top)
{
    return left + l->stamp.box.x0 >= l->clearance && left + l->stamp.box.x1 <= l->labels.width - l->clearance &&
           top + l->stamp.box.y0 >= l->clearance && top + l->stamp.box.y1 <= l->labels.height - l->clearance;
}

static bool find_free_place(layout *l, int *left, int *top)
{
    int room_x = l->labels.width - 2 * l->clearance - (l->stamp.box.x1 - l->stamp.box.x0);
    int room_y = l->labels.height - 2 * l->clearance - (l->stamp.box.y1 - l->stamp.box.y0);
    if (room_x < 0 || room_y < 0)
        return false;
    for (int k = 0; k < PLACES; k++) {
        *left = l->clearance - l->stamp.box.x0 + uf_random_whole(&l->random, 0, room_x);
        *top = l->clearance - l->stamp.box.y0 + uf_random_whole(&l->random, 0, room_y);
        if (shared_pixels(l, *left, *top, 0) == 0)
            return true;
    }
    return false;
}

/* The middle of the cell comes within a quarter of its size of a random point
 * of a random edge. */
static bool find_border_place(layout *l, int *left, int *top)
{
    int middle_x = (l->stamp.box.x0 + l->stamp.box.x1) / 2, middle_y = (l->stamp.box.y0 + l->stamp.box.y1) / 2;
    int reach = (l->stamp.box.x1 - l->stamp.box.x0 + l->stamp.box.y1 - l->stamp.box.y0) / 8;
    for (int k = 0; k < PLACES; k++) {
        int side = uf_random_whole(&l->random, 0, 3);
        int x = uf_random_whole(&l->random, 0, l->labels.width - 1);
        int y = uf_random_whole(&l->random, 0, l->labels.height - 1);
        int off = uf_random_whole(&l->random, -reach, reach);
        if (side < 2)
            x = (side ? l->labels.width : 0) + off;
        else
            y = (side > 2 ? l->labels.height : 0) + off;
        *left = x - middle_x;
        *top = y - middle_y;
        if (shared_pixels(l, *left, *top, 0) == 0)
            return true;
    }
    return false;
}

static bool middle_of(const layout *l, int32_t cell, int *x, int *y)
{
    int64_t sum_x = 0, sum_y = 0, pixels = 0;
    for (int j = 0; j < l->labels.height; j++) {
        const int32_t *row = uf_labels_row(l->labels, j);
        for (int i = 0; i < l->labels.width; i++)
            if (row[i] == cell) {
                sum_x += i;
                sum_y += j;
                pixels++;
            }
    }
    if (!pixels)
        return false;
    *x = (int)(sum_x / pixels);
    *y = (int)(sum_y / pixels);
    return true;
}

/* Slides the stamp towards a random earlier cell, from afar, until a
 * twenty-fifth of it would lie in that cell: giving that part up leaves a
 * shared border and not a shared point. */
static bool find_touching_place(layout *l, int *left, int *top)
{
    for (int k = 0; k < 8; k++) {
        int32_t partner = uf_random_whole(&l->random, 1, l->labels.count);
        double angle = uf_random_between(&l->random, 0, 6.283185307179586);
        int x, y;
        if (!middle_of(l, partner, &x, &y))
            continue;
        for (int away = l->stamp.mask.width; away >= 0; away -= 3) {
            *left = x + (int)lrint(away * cos(angle)) - l->stamp.mask.width / 2;
            *top = y + (int)lrint(away * sin(angle)) - l->stamp.mask.height / 2;
            int shared = shared_pixels(l, *left, *top, partner);
            if (shared < 0)
                break;
            if (shared * 25 > l->stamp.area) {
                if (within_image(l, *left, *top))
                    return true;
                break;
            }
        }
    }
    return false;
}

/* Laying
 * ------------------------------------------------------------------------------------------
 */

/* Takes from the stamp what is taken already or lies outside the image; false
 * when too little is left. */
static bool carve(layout *l, int left, int top, double least_share)
{
    int whole = l->stamp.area;
    for (int y = l->stamp.box.y0; y < l->stamp.box.y1; y++) {
        uint8_t *on = uf_mask_row(l->stamp.mask, y);
        bool outside = top + y < 0 || top + y >= l->labels.height;
        const int32_t *label = outside ? NULL : uf_labels_row(l->labels, top + y);
        for (int x = l->stamp.box.x0; x < l->stamp.box.x1; x++)
            if (outside || left + x < 0 || left + x >= l->labels.width || label[left + x])
                on[x] = 0;
    }
    uf_stamp_keep_largest(&l->stamp);
    return l->stamp.area > 0 && l->stamp.area >= least_share * whole;
}

static void mark_zone(layout *l, int x, int y, int32_t cell)
{
    int c = l->clearance;
    int x0 = x > c ? x - c : 0, x1 = x + c < l->zone.width ? x + c : l->zone.width - 1;
    int y0 = y > c ? y - c : 0, y1 = y + c < l->zone.height ? y + c : l->zone.height - 1;
    for (int j = y0; j <= y1; j++) {
        int32_t *zone = uf_labels_row(l->zone, j);
        for (int i = x0; i <= x1; i++)
            zone[i] = zone[i] == 0 || zone[i] == cell ? cell : -1;
    }
}

/* The squares around the cell's rim and the cell itself cover every pixel
 * within the clearance. */
static void lay(layout *l, int left, int top)
{
    int32_t cell = ++l->labels.count;
    for (int y = l->stamp.box.y0; y < l->stamp.box.y1; y++) {
        const uint8_t *on = uf_mask_row(l->stamp.mask, y);
        const uint8_t *above = uf_mask_row(l->stamp.mask, y - 1), *below = uf_mask_row(l->stamp.mask, y + 1);
        for (int x = l->stamp.box.x0; x < l->stamp.box.x1; x++) {
            if (!on[x])
                continue;
            uf_labels_row(l->labels, top + y)[left + x] = cell;
            int32_t *zone = &uf_labels_row(l->zone, top + y)[left + x];
            *zone = *zone == 0 || *zone == cell ? cell : -1;
            if (!on[x - 1] || !on[x + 1] || !above[x] || !below[x])
                mark_zone(l, left + x, top + y, cell);
        }
    }
}

static bool add_cell(layout *l, double radius_px)
{
    for (int k = 0; k < SHAPES; k++) {
        bool border = uf_random_uniform(&l->random) < l->settings->border;
        bool touching = uf_random_uniform(&l->random) < l->settings->touching;
        int left, top;
        uf_stamp_draw(&l->stamp, &l->random, radius_px);
        if (border ? find_border_place(l, &left, &top)
                   : (touching && l->labels.count && find_touching_place(l, &left, &top)) ||
                         find_free_place(l, &left, &top))
            if (carve(l, left, top, border ? 0.2 : 0.85)) {
                lay(l, left, top);
                return true;
            }
    }
    return false;
}

static int largest_first(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x < y) - (x > y);
}

static void lay_all(layout *l, double *radius_px)
{
    const uf_scene_settings *s = l->settings;
    for (int k = 0; k < s->cells; k++)
        radius_px[k] = uf_random_between(&l->random, s->radius_min_um, s->radius_max_um) / s->pixel_size_um;
    if (s->cells > 1)
        qsort(radius_px, (size_t)s->cells, sizeof *radius_px, largest_first);
    for (int k = 0, failed = 0; k < s->cells && failed < CROWDED; k++)
        failed = add_cell(l, radius_px[k]) ? 0 : failed + 1;
}

static void clear_labels(uf_labels labels)
{
    for (int y = 0; y < labels.height; y++)
        memset(uf_labels_row(labels, y), 0, (size_t)labels.width * sizeof(int32_t));
}

uf_status uf_scene_lay_cells(uf_work *work, const uf_scene_settings *settings, uf_labels *labels, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    layout l = {.settings = settings, .labels = *labels};
    double *radius_px;
    l.clearance = (int)ceil(clearance_um / settings->pixel_size_um);
    l.labels.count = 0;
    uf_random_start(&l.random, settings->seed, UF_STREAM_LAYOUT);
    uf_status status = uf_labels_take(work, labels->width, labels->height, &l.zone, error);
    if (!status)
        status = uf_stamp_take(work, settings->radius_max_um / settings->pixel_size_um, &l.stamp, error);
    if (!status)
        status = uf_take(work, (size_t)settings->cells, sizeof *radius_px, "cells", &radius_px, error);
    if (!status) {
        clear_labels(l.labels);
        clear_labels(l.zone);
        lay_all(&l, radius_px);
        labels->count = l.labels.count;
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
