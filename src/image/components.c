/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "image/components.h"

#include <string.h>

/* A maximal run of 1-pixels in a row: from <= x < to. `parent` chains runs of one component. */
typedef struct run {
    int from, to;
    int parent;
} run;

static int root_of(run *runs, int k)
{
    while (runs[k].parent != k) {
        runs[k].parent = runs[runs[k].parent].parent;
        k = runs[k].parent;
    }
    return k;
}

/* The lower index stays root, so that a component's root is its first run. */
static void join(run *runs, int a, int b)
{
    a = root_of(runs, a);
    b = root_of(runs, b);
    if (a < b)
        runs[b].parent = a;
    else
        runs[a].parent = b;
}

static int find_runs(const uint8_t *row, int width, run *runs, int count)
{
    for (int x = 0; x < width; x++) {
        if (!row[x])
            continue;
        int from = x;
        while (x < width && row[x])
            x++;
        runs[count] = (run){from, x, count};
        count++;
    }
    return count;
}

/* Joins the runs of one row with those of the row above that touch them; both lists ascend. */
static void join_rows(run *runs, int above, int above_end, int here, int here_end, int reach)
{
    for (int a = above, b = here; a < above_end && b < here_end;) {
        if (runs[a].from < runs[b].to + reach && runs[b].from < runs[a].to + reach)
            join(runs, a, b);
        if (runs[a].to < runs[b].to)
            a++;
        else
            b++;
    }
}

static int64_t count_runs(uf_mask mask)
{
    int64_t count = 0;
    for (int y = 0; y < mask.height; y++) {
        const uint8_t *row = uf_mask_row(mask, y);
        for (int x = 0; x < mask.width; x++)
            count += row[x] && (x == 0 || !row[x - 1]);
    }
    return count;
}

static void paint(uf_labels labels, const run *runs, const int *row_start, const int *number)
{
    for (int y = 0; y < labels.height; y++) {
        int32_t *row = uf_labels_row(labels, y);
        memset(row, 0, (size_t)labels.width * sizeof *row);
        for (int k = row_start[y]; k < row_start[y + 1]; k++)
            for (int x = runs[k].from; x < runs[k].to; x++)
                row[x] = number[k];
    }
}

uf_status uf_components(uf_work *work, uf_mask mask, uf_neighbours neighbours, uf_labels *labels, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    size_t total = (size_t)count_runs(mask);
    run *runs;
    int *row_start, *number;
    uf_status status = uf_take(work, total, sizeof *runs, "components", &runs, error);
    if (status == UF_OK)
        status = uf_take(work, total, sizeof *number, "components", &number, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)mask.height + 1, sizeof *row_start, "components", &row_start, error);
    if (status == UF_OK) {
        int count = 0;
        for (int y = 0; y < mask.height; y++) {
            row_start[y] = count;
            count = find_runs(uf_mask_row(mask, y), mask.width, runs, count);
            if (y)
                join_rows(runs, row_start[y - 1], row_start[y], row_start[y], count,
                          neighbours == UF_EIGHT_NEIGHBOURS);
        }
        row_start[mask.height] = count;
        labels->count = 0;
        for (int k = 0; k < count; k++) {
            int root = root_of(runs, k);
            number[k] = root == k ? ++labels->count : number[root];
        }
        paint(*labels, runs, row_start, number);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

void uf_label_areas(uf_labels labels, int64_t *areas)
{
    memset(areas, 0, ((size_t)labels.count + 1) * sizeof *areas);
    for (int y = 0; y < labels.height; y++) {
        const int32_t *row = uf_labels_row(labels, y);
        for (int x = 0; x < labels.width; x++)
            areas[row[x]]++;
    }
}

/* ---- holes ----------------------------------------------------------------------------------- */

static void mark_border(uf_labels labels, uint8_t *open)
{
    for (int x = 0; x < labels.width; x++) {
        open[uf_labels_row(labels, 0)[x]] = 1;
        open[uf_labels_row(labels, labels.height - 1)[x]] = 1;
    }
    for (int y = 0; y < labels.height; y++) {
        const int32_t *row = uf_labels_row(labels, y);
        open[row[0]] = 1;
        open[row[labels.width - 1]] = 1;
    }
}

static void fill_closed(uf_mask mask, uf_labels labels, const uint8_t *open)
{
    for (int y = 0; y < mask.height; y++) {
        uint8_t *row = uf_mask_row(mask, y);
        const int32_t *region = uf_labels_row(labels, y);
        for (int x = 0; x < mask.width; x++)
            row[x] |= region[x] && !open[region[x]];
    }
}

/* Regions with a pixel that must not be filled stay open. */
static void keep_unfillable(uf_labels regions, uf_mask fillable, const int64_t *areas, double small_pixels,
                            uint8_t *open)
{
    for (int y = 0; y < regions.height; y++) {
        const int32_t *region = uf_labels_row(regions, y);
        const uint8_t *row = uf_mask_row(fillable, y);
        for (int x = 0; x < regions.width; x++)
            if (!row[x] && (double)areas[region[x]] > small_pixels)
                open[region[x]] = 1;
    }
}

static uf_status find_regions(uf_work *work, uf_mask mask, uf_labels *regions, uf_error *error)
{
    uf_mask outside;
    uf_status status = uf_mask_take(work, mask.width, mask.height, &outside, error);
    if (status == UF_OK)
        status = uf_labels_take(work, mask.width, mask.height, regions, error);
    if (status != UF_OK)
        return status;
    for (int y = 0; y < mask.height; y++)
        for (int x = 0; x < mask.width; x++)
            uf_mask_row(outside, y)[x] = !uf_mask_row(mask, y)[x];
    return uf_components(work, outside, UF_FOUR_NEIGHBOURS, regions, error);
}

uf_status uf_fill_holes_where(uf_work *work, uf_mask mask, double small_pixels, double max_pixels, uf_mask fillable,
                              uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_labels regions;
    uint8_t *open;
    int64_t *areas;
    uf_status status = find_regions(work, mask, &regions, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)regions.count + 1, sizeof *areas, "holes", &areas, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)regions.count + 1, sizeof *open, "holes", &open, error);
    if (status == UF_OK) {
        uf_label_areas(regions, areas);
        for (int k = 0; k <= regions.count; k++)
            open[k] = (double)areas[k] > max_pixels;
        mark_border(regions, open);
        if (fillable.data)
            keep_unfillable(regions, fillable, areas, small_pixels, open);
        fill_closed(mask, regions, open);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

uf_status uf_fill_holes(uf_work *work, uf_mask mask, double max_pixels, uf_error *error)
{
    return uf_fill_holes_where(work, mask, max_pixels, max_pixels, (uf_mask){0}, error);
}
