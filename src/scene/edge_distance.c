/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/edge_distance.h"

#include <math.h>

/* A pixel outside the cell lies on its outline; one outside the image says
 * nothing. */
static float step_from(uf_labels labels, uf_plane distance, int x, int y, int32_t cell, float step)
{
    if (x < 0 || y < 0 || x >= labels.width || y >= labels.height)
        return INFINITY;
    return uf_labels_row(labels, y)[x] == cell ? uf_plane_row(distance, y)[x] + step : step;
}

static void relax(uf_labels labels, uf_plane distance, int x, int y, int direction, double pixel_size_um)
{
    int32_t cell = uf_labels_row(labels, y)[x];
    float straight = (float)(0.95509 * pixel_size_um), slanted = (float)(1.36930 * pixel_size_um);
    float *here = &uf_plane_row(distance, y)[x];
    float d = *here;
    d = fminf(d, step_from(labels, distance, x - direction, y, cell, straight));
    d = fminf(d, step_from(labels, distance, x - direction, y - direction, cell, slanted));
    d = fminf(d, step_from(labels, distance, x, y - direction, cell, straight));
    d = fminf(d, step_from(labels, distance, x + direction, y - direction, cell, slanted));
    *here = d;
}

void uf_scene_edge_distance(uf_labels labels, double pixel_size_um, uf_plane distance_um)
{
    float farthest = (float)((labels.width + labels.height) * pixel_size_um);
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++)
            uf_plane_row(distance_um, y)[x] = uf_labels_row(labels, y)[x] ? farthest : 0;
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++)
            if (uf_labels_row(labels, y)[x])
                relax(labels, distance_um, x, y, 1, pixel_size_um);
    for (int y = labels.height - 1; y >= 0; y--)
        for (int x = labels.width - 1; x >= 0; x--)
            if (uf_labels_row(labels, y)[x])
                relax(labels, distance_um, x, y, -1, pixel_size_um);
}
