/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shape of one label. Internal to measure; lengths in pixels. */
#ifndef UF_MEASURE_SHAPE_H
#define UF_MEASURE_SHAPE_H

#include "image/plane.h"

typedef struct uf_shape {
    double area_px, x_px, y_px;
    double perimeter_px;
    double caliper_max_px, caliper_min_px, hull_area_px;
    double axis_long_px, axis_short_px; /* full axes of the ellipse with the same second moments */
    double orientation_deg;             /* of the long axis, counter-clockwise as seen, in (-90, 90] */
} uf_shape;

/*
 * Area by counting, centroid, second moments (each pixel a unit square: 1/12 is added to both variances);
 * perimeter by Crofton's formula over four directions, pi/8 (N0 + N90 + (N45 + N135)/sqrt 2), N the number of
 * in/out transitions along all lines of one direction; calipers and hull from the convex hull of the
 * pixels' edge midpoints. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_shape_of(uf_work *work, uf_labels labels, int label, uf_box box, uf_shape *shape,
                                  uf_error *error);

/* Axes and orientation from the moments about the centroid, with y downwards as in images. */
void uf_shape_ellipse(double variance_x, double variance_y, double covariance, uf_shape *shape);

#endif
