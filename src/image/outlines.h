/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Outlines of labels as polygons along the edges of pixels. Nothing is smoothed: filling the rings by the even-odd
 * rule gives back the pixels of the label, and their signed areas add up to the number of its pixels.
 */
#ifndef UF_IMAGE_OUTLINES_H
#define UF_IMAGE_OUTLINES_H

#include "image/plane.h"

/* A corner where four pixels meet: (x, y) is the upper left corner of pixel (x, y), which lies at (x - 0.5, y - 0.5)
 * when pixel centres are whole numbers. */
typedef struct uf_corner {
    int32_t x, y;
} uf_corner;

/* Closed rings, one after the other: ring k holds corners ends[k - 1] (0 for the first) to ends[k] - 1. Each turns at
 * every corner and has the label on its right, going right along the upper edges: outer rings run clockwise as seen,
 * holes counter-clockwise. */
typedef struct uf_rings {
    uf_corner *corners;
    size_t *ends;
    size_t count;
} uf_rings;

/* Traces one label, all of whose pixels lie in `box` (uf_label_boxes). Pixels that share only a corner are not joined.
 * What lies beyond the image is not of the label, so rings close along the image's edge. Rings come in the order of
 * their first upper edge, row by row, and start with it. A label that does not occur has none. UF_MEMORY. */
UF_MUST_USE uf_status uf_outline_trace(uf_work *work, uf_labels labels, int32_t label, uf_box box, uf_rings *rings,
                                       uf_error *error);

#endif
