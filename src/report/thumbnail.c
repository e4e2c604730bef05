/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "report/thumbnail.h"

#include <string.h>

#include "report/overlay_parts.h"

static int smaller(int a, int b)
{
    return a < b ? a : b;
}

/* Sums in double and in order; a block cut by the border is averaged over what there is of it. */
static void average_row(uf_plane from, int factor, int y, double *sums, float *to, int width)
{
    int y1 = smaller((y + 1) * factor, from.height);
    for (int x = 0; x < width; x++)
        sums[x] = 0;
    for (int v = y * factor; v < y1; v++) {
        const float *row = uf_plane_row(from, v);
        for (int x = 0; x < width; x++)
            for (int u = x * factor; u < smaller((x + 1) * factor, from.width); u++)
                sums[x] += row[u];
    }
    for (int x = 0; x < width; x++) {
        int across = smaller((x + 1) * factor, from.width) - x * factor;
        to[x] = (float)(sums[x] / (across * (y1 - y * factor)));
    }
}

static uf_status reduce(uf_work *work, uf_plane from, int factor, uf_plane *to, uf_error *error)
{
    int width = (from.width + factor - 1) / factor, height = (from.height + factor - 1) / factor;
    double *sums;
    uf_status status = uf_plane_take(work, width, height, to, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)width, sizeof *sums, "a thumbnail", &sums, error);
    for (int y = 0; status == UF_OK && y < height; y++)
        average_row(from, factor, y, sums, uf_plane_row(*to, y), width);
    return status;
}

/* Label in the middle of the block behind a pixel; -1 beyond the picture. */
static int32_t label_at(uf_labels labels, int factor, const uf_indexed *picture, int x, int y)
{
    if (x < 0 || y < 0 || x >= picture->width || y >= picture->height)
        return -1;
    return uf_labels_row(labels, smaller(y * factor + factor / 2,
                                         labels.height - 1))[smaller(x * factor + factor / 2, labels.width - 1)];
}

/* As in overlays: a pixel of a cell with a neighbour that is not of it; a cell cut by the edge stays open there. */
static int is_outline(uf_labels labels, int factor, const uf_indexed *picture, int x, int y)
{
    static const int dx[] = {1, -1, 0, 0}, dy[] = {0, 0, 1, -1};
    int32_t here = label_at(labels, factor, picture, x, y);
    for (int k = 0; here > 0 && k < 4; k++) {
        int32_t other = label_at(labels, factor, picture, x + dx[k], y + dy[k]);
        if (other >= 0 && other != here)
            return 1;
    }
    return 0;
}

uf_status uf_thumbnail_draw(uf_work *work, const uf_thumbnail_input *input, uf_indexed *picture, double *white_adu,
                            uf_error *error)
{
    int longest = input->near_adu.width > input->near_adu.height ? input->near_adu.width : input->near_adu.height;
    int factor = (longest + UF_THUMBNAIL_SIDE - 1) / UF_THUMBNAIL_SIDE;
    uf_plane small;
    *picture = (uf_indexed){.width = (input->near_adu.width + factor - 1) / factor,
                            .height = (input->near_adu.height + factor - 1) / factor};
    uf_palette_fill(picture);
    uf_status status =
        uf_take(work, (size_t)picture->width * (size_t)picture->height, 1, "a thumbnail", &picture->data, error);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    if (status == UF_OK)
        status = reduce(work, input->near_adu, factor, &small, error);
    if (status != UF_OK)
        return status;
    uf_overlay_input like = {.near_adu = small, .near_background_adu = input->near_background_adu};
    overlay_scene scene = {.input = &like, .reduction = 1, .width = small.width, .height = small.height};
    status = overlay_measure_near(work, &scene, error);
    for (int y = 0; status == UF_OK && y < picture->height; y++) {
        uint8_t *row = picture->data + (size_t)y * (size_t)picture->width;
        overlay_near_inks(&scene, uf_plane_row(small, y), NULL, row);
        for (int x = 0; x < picture->width; x++)
            if (is_outline(input->labels, factor, picture, x, y))
                row[x] = UF_INK_OUTLINE;
    }
    *white_adu = (double)(scene.white - scene.black);
    uf_arena_back(&work->arena, mark);
    return status;
}
