/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Flooding of pieces from cores over a relief of brightness and shape. Internal to segment. */
#ifndef UF_SEGMENT_FLOOD_H
#define UF_SEGMENT_FLOOD_H

#include "image/plane.h"

/* One grid to flood: labels above 0 are cores, -1 waits, 0 is land. */
typedef struct uf_flood_grid {
    uf_labels labels;
    uf_plane distance_px;            /* to the outside */
    uf_plane image_adu;              /* smoothed */
    float background_adu, least_adu; /* signals are taken to be at least least_adu */
    double pixel_um;                 /* of this grid */
    float usual;      /* relief of the dye's own unevenness, 1/um: what does not exceed it several times is none */
    float deepest_px; /* greatest distance of all */
} uf_flood_grid;

/* Relative gradient of the image at a pixel, 1/um, by central differences. */
float uf_flood_relief(const uf_flood_grid *grid, int x, int y);

/* Gives every waiting pixel the label of the core whose water reaches it first (Meyer 1994, Signal Process.
 * 38:113: flooding by ordered queues). Water rises over the relief plus a little for distance from the middle
 * of the piece, so that without a ridge the neck decides. UF_MEMORY. */
UF_MUST_USE uf_status uf_flood_run(uf_work *work, const uf_flood_grid *grid, uf_error *error);

#endif
