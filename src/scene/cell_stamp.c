/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/cell_stamp.h"

#include <math.h>
#include <string.h>

#include "scene/cell_shape.h"

/* Half-width that an arm keeps, in pixels: below it a slanted arm would fall
 * into pieces. */
static const double thinnest_px = 1.4;

/* Beyond this reach, in equivalent radii, an arm is cut off; draws that get
 * there are rare. */
static const double reach_limit = 3.2;

uf_status uf_stamp_take(uf_work *work, double radius_max_px, uf_cell_stamp *stamp, uf_error *error)
{
    int side = 2 * (int)ceil(reach_limit * radius_max_px) + 5;
    *stamp = (uf_cell_stamp){.area = 0};
    uf_status status = uf_mask_take(work, side, side, &stamp->mask, error);
    if (!status)
        status = uf_take(work, (size_t)side * (size_t)side, sizeof *stamp->stack, "a cell", &stamp->stack, error);
    return status;
}

static void grow_box(uf_box *box, int x, int y)
{
    box->x0 = x < box->x0 ? x : box->x0;
    box->x1 = x + 1 > box->x1 ? x + 1 : box->x1;
    box->y0 = y < box->y0 ? y : box->y0;
    box->y1 = y + 1 > box->y1 ? y + 1 : box->y1;
}

void uf_stamp_draw(uf_cell_stamp *stamp, uf_random *random, double radius_px)
{
    uf_cell_shape shape;
    uf_shape_draw(random, thinnest_px / radius_px, &shape);
    double cx = stamp->mask.width / 2 + uf_random_between(random, -0.5, 0.5);
    double cy = stamp->mask.height / 2 + uf_random_between(random, -0.5, 0.5);
    int half = (int)ceil(shape.reach * radius_px) + 1;
    half = half < stamp->mask.width / 2 - 1 ? half : stamp->mask.width / 2 - 1;
    int first = stamp->mask.width / 2 - half, last = stamp->mask.width / 2 + half;
    stamp->box = (uf_box){stamp->mask.width, stamp->mask.height, 0, 0};
    stamp->area = 0;
    for (int y = 0; y < stamp->mask.height; y++)
        memset(uf_mask_row(stamp->mask, y), 0, (size_t)stamp->mask.width);
    for (int y = first; y <= last; y++) {
        uint8_t *row = uf_mask_row(stamp->mask, y);
        for (int x = first; x <= last; x++) {
            row[x] = uf_shape_covers(&shape, (x - cx) / radius_px, (y - cy) / radius_px);
            if (row[x]) {
                grow_box(&stamp->box, x, y);
                stamp->area++;
            }
        }
    }
}

/* Marks the piece that holds pixel `start` with `mark`, over 4-neighbours;
 * returns its size. */
static int flood(uf_cell_stamp *stamp, int32_t start, uint8_t from, uint8_t mark)
{
    uint8_t *on = stamp->mask.data;
    int32_t width = stamp->mask.width;
    int32_t step[4] = {-width, -1, 1, width};
    int size = 0, waiting = 0;
    stamp->stack[waiting++] = start;
    on[start] = mark;
    while (waiting > 0) {
        int32_t at = stamp->stack[--waiting];
        size++;
        for (int k = 0; k < 4; k++)
            if (on[at + step[k]] == from) {
                on[at + step[k]] = mark;
                stamp->stack[waiting++] = at + step[k];
            }
    }
    return size;
}

/* What others or the edge have cut into pieces is no cell any more: only the
 * largest piece stays. */
void uf_stamp_keep_largest(uf_cell_stamp *stamp)
{
    int32_t best = -1;
    int pixels = stamp->mask.width * stamp->mask.height;
    stamp->area = 0;
    for (int32_t i = 0; i < pixels; i++) {
        if (stamp->mask.data[i] != 1)
            continue;
        int size = flood(stamp, i, 1, 2);
        if (size > stamp->area) {
            stamp->area = size;
            best = i;
        }
    }
    if (best >= 0)
        (void)flood(stamp, best, 2, 3);
    for (int32_t i = 0; i < pixels; i++)
        stamp->mask.data[i] = stamp->mask.data[i] == 3;
}
