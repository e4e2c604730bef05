/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "segment/flood.h"

#include <math.h>

static const float unevenness_ratio = 2.5f; /* relief up to this many times the usual is the dye's own unevenness */
static const float shape_weight = 0.15f;    /* relief of a vanishing neck, 1/um */
static const float levels_per_relief = 1000.0f;

enum { LEVELS = 4096 };

/* Pixels waiting at each level, first come first served. */
typedef struct queue {
    int32_t head[LEVELS], tail[LEVELS], *next;
    int lowest;
} queue;

static void push(queue *q, int32_t pixel, int level)
{
    q->next[pixel] = -1;
    if (q->head[level] < 0)
        q->head[level] = pixel;
    else
        q->next[q->tail[level]] = pixel;
    q->tail[level] = pixel;
    q->lowest = level < q->lowest ? level : q->lowest;
}

static int32_t pop(queue *q)
{
    while (q->lowest < LEVELS && q->head[q->lowest] < 0)
        q->lowest++;
    if (q->lowest == LEVELS)
        return -1;
    int32_t pixel = q->head[q->lowest];
    q->head[q->lowest] = q->next[pixel];
    return pixel;
}

float uf_flood_relief(const uf_flood_grid *grid, int x, int y)
{
    int width = grid->image_adu.width, height = grid->image_adu.height;
    const float *here = uf_plane_row(grid->image_adu, y);
    float dx = here[x + 1 < width ? x + 1 : x] - here[x ? x - 1 : x];
    float dy = uf_plane_row(grid->image_adu, y + 1 < height ? y + 1 : y)[x] -
               uf_plane_row(grid->image_adu, y ? y - 1 : y)[x];
    float level = here[x] - grid->background_adu;
    level = level > grid->least_adu ? level : grid->least_adu;
    return sqrtf(dx * dx + dy * dy) * (float)(0.5 / grid->pixel_um) / level;
}

/* The same for every label, or a shallow part would run over a deep one as soon as it passes the neck. */
static int level_of(const uf_flood_grid *grid, int x, int y)
{
    float shape = 1.0f - uf_plane_row(grid->distance_px, y)[x] / grid->deepest_px;
    float ridge = uf_flood_relief(grid, x, y) - unevenness_ratio * grid->usual;
    float level = ((ridge > 0.0f ? ridge : 0.0f) + shape_weight * shape) * levels_per_relief;
    return level < (float)(LEVELS - 1) ? (int)level : LEVELS - 1;
}

/* Whether a pixel of a core has a neighbour that waits: only those need to be queued. */
static int at_shore(uf_labels labels, int x, int y)
{
    const int32_t *row = uf_labels_row(labels, y);
    return (x && row[x - 1] == -1) || (x + 1 < labels.width && row[x + 1] == -1) ||
           (y && uf_labels_row(labels, y - 1)[x] == -1) ||
           (y + 1 < labels.height && uf_labels_row(labels, y + 1)[x] == -1);
}

/* Gives the waiting neighbours of a labelled pixel its label and queues them. */
static void flood_neighbours(const uf_flood_grid *grid, queue *q, int x, int y)
{
    static const int dx[] = {-1, 1, 0, 0}, dy[] = {0, 0, -1, 1};
    uf_labels labels = grid->labels;
    int part = uf_labels_row(labels, y)[x];
    for (int k = 0; k < 4; k++) {
        int u = x + dx[k], v = y + dy[k];
        if (u < 0 || v < 0 || u >= labels.width || v >= labels.height)
            continue;
        int32_t *label = &uf_labels_row(labels, v)[u];
        if (*label != -1)
            continue;
        *label = part;
        int level = level_of(grid, u, v);
        /* Water does not run back down past the level already reached. */
        push(q, v * labels.width + u, level > q->lowest ? level : q->lowest);
    }
}

uf_status uf_flood_run(uf_work *work, const uf_flood_grid *grid, uf_error *error)
{
    queue *q;
    int width = grid->labels.width, height = grid->labels.height;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, 1, sizeof *q, "segmentation", &q, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)width * (size_t)height, sizeof *q->next, "segmentation", &q->next, error);
    if (status == UF_OK) {
        for (int k = 0; k < LEVELS; k++)
            q->head[k] = -1;
        q->lowest = 0;
        for (int y = 0; y < height; y++)
            for (int x = 0; x < width; x++)
                if (uf_labels_row(grid->labels, y)[x] > 0 && at_shore(grid->labels, x, y))
                    push(q, y * width + x, 0);
        for (int32_t pixel; (pixel = pop(q)) >= 0;)
            flood_neighbours(grid, q, pixel % width, pixel / width);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
