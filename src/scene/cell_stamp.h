/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One cell as pixels on a small grid of its own, before it is laid into the image. */
#ifndef UF_SCENE_CELL_STAMP_H
#define UF_SCENE_CELL_STAMP_H

#include "image/plane.h"
#include "scene/random.h"

/* The outermost pixels of the mask are always off, so that neighbours can be asked without bounds. */
typedef struct uf_cell_stamp {
    uf_mask mask;
    uf_box box;     /* of the pixels drawn */
    int area;       /* pixels that are on */
    int32_t *stack; /* scratch, one entry a pixel */
} uf_cell_stamp;

/* Room for cells up to an equivalent radius. UF_MEMORY. */
UF_MUST_USE uf_status uf_stamp_take(uf_work *work, double radius_max_px, uf_cell_stamp *stamp, uf_error *error);

/* Draws a random cell of the area of a disc of `radius_px`, around the middle of the grid. */
void uf_stamp_draw(uf_cell_stamp *stamp, uf_random *random, double radius_px);

/* Switches off all but the largest 4-connected piece, and counts its area. */
void uf_stamp_keep_largest(uf_cell_stamp *stamp);

#endif
