/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Exact Euclidean distances. */
#ifndef UF_IMAGE_DISTANCE_H
#define UF_IMAGE_DISTANCE_H

#include "image/plane.h"

/*
 * Distance of every pixel's centre to the nearest pixel of another label, in pixels, exact. The image
 * border is no outline: a pixel that has no other label anywhere gets UF_FAR. `wanted` (one byte a label from 0,
 * NULL: all) says which labels' pixels are to be filled; the others are left as they are. The outline itself lies
 * half a pixel nearer.
 *
 * Two passes: down the columns the distance to the nearest change of label; along the rows the lower
 * envelope of the parabolas these distances stand for, run by run of equal label (Felzenszwalb and
 * Huttenlocher 2012, Theory of Computing 8:415; the nearest other pixel of a run lies in a column of the
 * run or just beyond its ends). Cost: linear in the pixels.
 */
UF_MUST_USE uf_status uf_distance(uf_work *work, uf_labels labels, const uint8_t *wanted, uf_plane distance_px,
                                  uf_error *error);

/* The same for all labels above 0; pixels of label 0 get 0. */
UF_MUST_USE uf_status uf_distance_inside(uf_work *work, uf_labels labels, uf_plane distance_px, uf_error *error);

#define UF_FAR 1e6f

#endif
