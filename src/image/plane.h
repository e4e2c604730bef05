/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Planes, masks and labels: views of rows of pixels, float once read. uf_plane itself is public. */
#ifndef UF_IMAGE_PLANE_H
#define UF_IMAGE_PLANE_H

#include <stdint.h>

#include "base/work.h"

/* 0 is off, 1 is on. */
typedef struct uf_mask {
    uint8_t *data;
    int width;
    int height;
    ptrdiff_t stride;
} uf_mask;

/* 0 is background, 1 .. count are objects. */
typedef struct uf_labels {
    int32_t *data;
    int width;
    int height;
    ptrdiff_t stride;
    int count;
} uf_labels;

/* Half-open box of pixels: x0 <= x < x1, y0 <= y < y1. */
typedef struct uf_box {
    int x0, y0, x1, y1;
} uf_box;

static inline float *uf_plane_row(uf_plane plane, int y)
{
    return plane.data + (ptrdiff_t)y * plane.stride;
}

static inline uint8_t *uf_mask_row(uf_mask mask, int y)
{
    return mask.data + (ptrdiff_t)y * mask.stride;
}

static inline int32_t *uf_labels_row(uf_labels labels, int y)
{
    return labels.data + (ptrdiff_t)y * labels.stride;
}

/* Planes from the arena, contents undefined; width and height at least 1. UF_MEMORY. */
UF_MUST_USE uf_status uf_plane_take(uf_work *work, int width, int height, uf_plane *plane, uf_error *error);
UF_MUST_USE uf_status uf_mask_take(uf_work *work, int width, int height, uf_mask *mask, uf_error *error);
UF_MUST_USE uf_status uf_labels_take(uf_work *work, int width, int height, uf_labels *labels, uf_error *error);

/* Bounding boxes of labels 1 .. count into boxes[1 .. count]; boxes[0] is the whole image, and the box of
 * a label that does not occur is empty. */
void uf_label_boxes(uf_labels labels, uf_box *boxes);

#endif
