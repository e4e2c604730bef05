/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The outline of one spread cell, as an implicit curve: negative inside, positive outside. A star-shaped body
 * (an ellipse with a few harmonics, broad lamellae bulging from it, a fine ruffle) is joined with bent,
 * tapering arms by a smooth minimum, which rounds the corners between them as cortical tension does in a
 * cell. The proportions are drawn to look like fibroblasts and epithelial cells on a coated coverslip:
 * common practice, no source.
 */
#ifndef UF_SCENE_CELL_SHAPE_H
#define UF_SCENE_CELL_SHAPE_H

#include "scene/random.h"

enum { UF_SHAPE_ANGLES = 512, UF_SHAPE_ARMS = 7 };

/* From root over bend to tip, with a half-width for each end. */
typedef struct uf_shape_arm {
    double x[3], y[3];
    double root_width, tip_width;
    double middle_x, middle_y, reach; /* a disc that holds the arm */
} uf_shape_arm;

/* Lengths are in radii of the disc of equal area, once drawn. */
typedef struct uf_cell_shape {
    double radius[UF_SHAPE_ANGLES + 1]; /* of the body, by angle; the last repeats the first */
    double radius_min, radius_max;
    uf_shape_arm arm[UF_SHAPE_ARMS];
    int arms;
    double scale; /* from drawn lengths to radii of the disc of equal area */
    double reach; /* no point of the cell is farther from its origin */
} uf_cell_shape;

/* Draws a cell. No arm gets thinner than `thinnest` at its tip (half-width, in the shape's unit). */
void uf_shape_draw(uf_random *random, double thinnest, uf_cell_shape *shape);

/* Whether a point, in radii of the disc of equal area, lies in the cell. */
bool uf_shape_covers(const uf_cell_shape *shape, double x, double y);

#endif
