/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/plane.h"

static uf_status take_pixels(uf_work *work, int width, int height, size_t size, void *pointer, uf_error *error)
{
    return uf_take(work, (size_t)width * (size_t)height, size, "an image", pointer, error);
}

uf_status uf_plane_take(uf_work *work, int width, int height, uf_plane *plane, uf_error *error)
{
    *plane = (uf_plane){.width = width, .height = height, .stride = width};
    return take_pixels(work, width, height, sizeof *plane->data, &plane->data, error);
}

uf_status uf_mask_take(uf_work *work, int width, int height, uf_mask *mask, uf_error *error)
{
    *mask = (uf_mask){.width = width, .height = height, .stride = width};
    return take_pixels(work, width, height, sizeof *mask->data, &mask->data, error);
}

uf_status uf_labels_take(uf_work *work, int width, int height, uf_labels *labels, uf_error *error)
{
    *labels = (uf_labels){.width = width, .height = height, .stride = width};
    return take_pixels(work, width, height, sizeof *labels->data, &labels->data, error);
}

void uf_label_boxes(uf_labels labels, uf_box *boxes)
{
    for (int k = 1; k <= labels.count; k++)
        boxes[k] = (uf_box){labels.width, labels.height, 0, 0};
    boxes[0] = (uf_box){0, 0, labels.width, labels.height};
    for (int y = 0; y < labels.height; y++) {
        const int32_t *row = uf_labels_row(labels, y);
        for (int x = 0; x < labels.width; x++) {
            if (!row[x])
                continue;
            uf_box *box = &boxes[row[x]];
            box->x0 = x < box->x0 ? x : box->x0;
            box->x1 = x + 1 > box->x1 ? x + 1 : box->x1;
            box->y0 = y < box->y0 ? y : box->y0;
            box->y1 = y + 1;
        }
    }
}
