/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/basins.h"

#include <string.h>

#include "image/components.h"

/* Depths are sorted into steps of a quarter, row by row within a step. */
enum { STEPS_PER_UNIT = 4, MOST_STEPS = 1 << 16 };

typedef struct basin {
    int parent;
    float depth; /* of its deepest pixel */
} basin;

typedef struct flood {
    uf_plane depth;
    uf_labels labels;
    basin *basins; /* 1 .. count */
    int count;
    float neck;
} flood;

static int root_of(basin *basins, int k)
{
    while (basins[k].parent != k) {
        basins[k].parent = basins[basins[k].parent].parent;
        k = basins[k].parent;
    }
    return k;
}

/* ---- order of the flood ---------------------------------------------------------------------- */

static int step_of(float depth)
{
    float step = depth * STEPS_PER_UNIT;
    return step < (float)(MOST_STEPS - 1) ? (int)step : MOST_STEPS - 1;
}

/* Counting sort of the foreground pixels (y * width + x), deepest step first. Returns how many. */
static size_t sort_pixels(uf_plane depth, uf_labels labels, size_t *place, uint32_t *order)
{
    memset(place, 0, (MOST_STEPS + 1) * sizeof *place);
    for (int y = 0; y < depth.height; y++)
        for (int x = 0; x < depth.width; x++)
            if (uf_labels_row(labels, y)[x])
                place[MOST_STEPS - step_of(uf_plane_row(depth, y)[x])]++;
    for (int k = 1; k <= MOST_STEPS; k++)
        place[k] += place[k - 1];
    size_t count = place[MOST_STEPS];
    for (int y = 0; y < depth.height; y++)
        for (int x = 0; x < depth.width; x++)
            if (uf_labels_row(labels, y)[x]) {
                int step = MOST_STEPS - step_of(uf_plane_row(depth, y)[x]);
                order[place[step - 1]++] = (uint32_t)y * (uint32_t)depth.width + (uint32_t)x;
            }
    return count;
}

/* ---- flood ----------------------------------------------------------------------------------- */

/* The roots of the basins around (x, y), each once, at most 8; the first is that of the deepest neighbour, the
 * one that (x, y) runs down to. */
static int roots_around(flood *f, int x, int y, int *roots)
{
    int count = 0;
    float deepest = -1.0f;
    for (int v = y - 1; v <= y + 1; v++)
        for (int u = x - 1; u <= x + 1; u++) {
            if (u < 0 || v < 0 || u >= f->labels.width || v >= f->labels.height)
                continue;
            int label = uf_labels_row(f->labels, v)[u];
            if (label <= 0)
                continue;
            int root = root_of(f->basins, label), at = 0;
            while (at < count && roots[at] != root)
                at++;
            if (at == count)
                roots[count++] = root;
            if (uf_plane_row(f->depth, v)[u] > deepest) {
                deepest = uf_plane_row(f->depth, v)[u];
                roots[at] = roots[0];
                roots[0] = root;
            }
        }
    return count;
}

static int is_one_basin(const flood *f, int shallower, float saddle)
{
    return saddle >= f->neck * f->basins[shallower].depth;
}

static void flood_pixel(flood *f, int x, int y)
{
    int roots[8], count = roots_around(f, x, y, roots);
    float here = uf_plane_row(f->depth, y)[x];
    if (!count) {
        int fresh = ++f->count;
        f->basins[fresh] = (basin){fresh, here};
        uf_labels_row(f->labels, y)[x] = fresh;
        return;
    }
    uf_labels_row(f->labels, y)[x] = roots[0];
    for (int k = 1; k < count; k++) {
        int a = root_of(f->basins, roots[0]), b = root_of(f->basins, roots[k]);
        int deeper = f->basins[a].depth >= f->basins[b].depth ? a : b, shallower = deeper == a ? b : a;
        if (a != b && is_one_basin(f, shallower, here))
            f->basins[shallower].parent = deeper;
    }
}

/* ---- afterwards ------------------------------------------------------------------------------ */

static void resolve(flood *f)
{
    for (int y = 0; y < f->labels.height; y++) {
        int32_t *row = uf_labels_row(f->labels, y);
        for (int x = 0; x < f->labels.width; x++)
            if (row[x])
                row[x] = root_of(f->basins, row[x]);
    }
}

/* The label that shares the longest border with `small`, 0 when it stands alone. borders has count + 1 places
 * of zeros and is left so. */
static int longest_border(uf_labels labels, int small, uf_box box, int *borders)
{
    int best = 0;
    for (int pass = 0; pass < 2; pass++)
        for (int y = box.y0; y < box.y1; y++)
            for (int x = box.x0; x < box.x1; x++) {
                if (uf_labels_row(labels, y)[x] != small)
                    continue;
                int right = x + 1 < labels.width ? uf_labels_row(labels, y)[x + 1] : 0;
                int left = x > 0 ? uf_labels_row(labels, y)[x - 1] : 0;
                int below = y + 1 < labels.height ? uf_labels_row(labels, y + 1)[x] : 0;
                int above = y > 0 ? uf_labels_row(labels, y - 1)[x] : 0;
                int around[4] = {left, right, above, below};
                for (int k = 0; k < 4; k++) {
                    if (!around[k] || around[k] == small)
                        continue;
                    borders[around[k]] = pass ? 0 : borders[around[k]] + 1;
                    if (!pass && (!best || borders[around[k]] > borders[best]))
                        best = around[k];
                }
            }
    return best;
}

static void relabel(uf_labels labels, uf_box box, int from, int to)
{
    for (int y = box.y0; y < box.y1; y++) {
        int32_t *row = uf_labels_row(labels, y);
        for (int x = box.x0; x < box.x1; x++)
            if (row[x] == from)
                row[x] = to;
    }
}

static uf_status join_small(uf_work *work, uf_labels labels, double min_pixels, uf_error *error)
{
    size_t places = (size_t)labels.count + 1;
    int64_t *areas;
    uf_box *boxes;
    int *borders;
    uf_status status = uf_take(work, places, sizeof *areas, "basins", &areas, error);
    if (status == UF_OK)
        status = uf_take(work, places, sizeof *boxes, "basins", &boxes, error);
    if (status == UF_OK)
        status = uf_take(work, places, sizeof *borders, "basins", &borders, error);
    if (status != UF_OK)
        return status;
    memset(borders, 0, places * sizeof *borders);
    uf_label_areas(labels, areas);
    uf_label_boxes(labels, boxes);
    for (int k = 1; k <= labels.count; k++) {
        if (!areas[k] || (double)areas[k] >= min_pixels)
            continue;
        int other = longest_border(labels, k, boxes[k], borders);
        if (!other)
            continue;
        relabel(labels, boxes[k], k, other);
        areas[other] += areas[k];
        areas[k] = 0;
        uf_box *a = &boxes[other], b = boxes[k];
        *a = (uf_box){a->x0 < b.x0 ? a->x0 : b.x0, a->y0 < b.y0 ? a->y0 : b.y0, a->x1 > b.x1 ? a->x1 : b.x1,
                      a->y1 > b.y1 ? a->y1 : b.y1};
    }
    return UF_OK;
}

/* Drops what is too small or too large and numbers the rest in the order of first pixels. */
static uf_status renumber(uf_work *work, uf_labels *labels, double min_pixels, double max_pixels, uf_error *error)
{
    size_t places = (size_t)labels->count + 1;
    int64_t *areas;
    int32_t *number;
    uf_status status = uf_take(work, places, sizeof *areas, "basins", &areas, error);
    if (status == UF_OK)
        status = uf_take(work, places, sizeof *number, "basins", &number, error);
    if (status != UF_OK)
        return status;
    uf_label_areas(*labels, areas);
    memset(number, 0, places * sizeof *number);
    int count = 0;
    for (int y = 0; y < labels->height; y++) {
        int32_t *row = uf_labels_row(*labels, y);
        for (int x = 0; x < labels->width; x++) {
            int k = row[x];
            if (!k)
                continue;
            if (!number[k])
                number[k] = (double)areas[k] >= min_pixels && (double)areas[k] <= max_pixels ? ++count : -1;
            row[x] = number[k] > 0 ? number[k] : 0;
        }
    }
    labels->count = count;
    return UF_OK;
}

uf_status uf_labels_tidy(uf_work *work, double min_pixels, double max_pixels, uf_labels *labels, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = join_small(work, *labels, min_pixels, error);
    if (status == UF_OK)
        status = renumber(work, labels, min_pixels, max_pixels, error);
    uf_arena_back(&work->arena, mark);
    return status;
}

uf_status uf_basins(uf_work *work, uf_plane depth, double neck, uf_labels *labels, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t pixels = (size_t)labels->width * (size_t)labels->height;
    flood f = {.depth = depth, .labels = *labels, .neck = (float)neck};
    size_t *place;
    uint32_t *order;
    uf_status status = uf_take(work, MOST_STEPS + 1, sizeof *place, "basins", &place, error);
    if (status == UF_OK)
        status = uf_take(work, pixels, sizeof *order, "basins", &order, error);
    if (status == UF_OK)
        /* A cell starts at a local maximum, so at most every second pixel of every second row. */
        status = uf_take(work, pixels / 2 + 2, sizeof *f.basins, "basins", &f.basins, error);
    if (status == UF_OK) {
        size_t count = sort_pixels(depth, *labels, place, order);
        for (int y = 0; y < labels->height; y++)
            memset(uf_labels_row(*labels, y), 0, (size_t)labels->width * sizeof(int32_t));
        for (size_t k = 0; k < count; k++)
            flood_pixel(&f, (int)(order[k] % (uint32_t)labels->width), (int)(order[k] / (uint32_t)labels->width));
        resolve(&f);
        labels->count = f.count;
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
