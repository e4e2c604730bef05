/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Connected components and holes. */
#ifndef UF_IMAGE_COMPONENTS_H
#define UF_IMAGE_COMPONENTS_H

#include "image/plane.h"

typedef enum uf_neighbours { UF_FOUR_NEIGHBOURS, UF_EIGHT_NEIGHBOURS } uf_neighbours;

/* Labels the connected runs of 1-pixels 1 .. count in the order of their first pixel (row by row), as
 * scipy.ndimage.label does. labels.count is set. Two passes with union-find over runs. UF_MEMORY. */
UF_MUST_USE uf_status uf_components(uf_work *work, uf_mask mask, uf_neighbours neighbours, uf_labels *labels,
                                    uf_error *error);

/* Fills holes: 0-regions (4-connected) that do not reach the image border and have at most `max_pixels`. One of more
 * than `small_pixels` is filled only where `fillable` is 1 all over it (data NULL: everywhere). */
UF_MUST_USE uf_status uf_fill_holes(uf_work *work, uf_mask mask, double small_pixels, double max_pixels,
                                    uf_mask fillable, uf_error *error);

/* Pixels of each label into areas[0 .. count]. */
void uf_label_areas(uf_labels labels, int64_t *areas);

#endif
