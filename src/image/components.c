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

/* ---- holes ------------------------------------------------------------------------------------- */

/* Runs of 0-pixels, joined into regions; the sums of a region stand at its root. */
typedef struct hole_region {
    double pixels;
    int open; /* reaches the border, or holds a pixel that must not be filled */
} hole_region;

static int find_zero_runs(const uint8_t *row, int width, run *runs, int count)
{
    for (int x = 0; x < width; x++) {
        if (row[x])
            continue;
        int from = x;
        while (x < width && !row[x])
            x++;
        runs[count] = (run){from, x, count};
        count++;
    }
    return count;
}

static size_t count_zero_runs(uf_mask mask)
{
    size_t count = 0;
    for (int y = 0; y < mask.height; y++) {
        const uint8_t *row = uf_mask_row(mask, y);
        for (int x = 0; x < mask.width; x++)
            count += !row[x] && (x == 0 || row[x - 1]);
    }
    return count;
}

typedef struct hole_job {
    uf_mask mask;
    run *runs;
    int *row_start;
    hole_region *regions; /* by root run */
} hole_job;

static void join_zero_runs(hole_job *job)
{
    int count = 0;
    for (int y = 0; y < job->mask.height; y++) {
        job->row_start[y] = count;
        count = find_zero_runs(uf_mask_row(job->mask, y), job->mask.width, job->runs, count);
        if (y)
            join_rows(job->runs, job->row_start[y - 1], job->row_start[y], job->row_start[y], count, 0);
    }
    job->row_start[job->mask.height] = count;
}

static void sum_regions(hole_job *job)
{
    int last = job->mask.height - 1;
    for (int k = 0; k < job->row_start[last + 1]; k++)
        job->regions[k] = (hole_region){0};
    for (int y = 0; y <= last; y++)
        for (int k = job->row_start[y]; k < job->row_start[y + 1]; k++) {
            hole_region *region = &job->regions[root_of(job->runs, k)];
            region->pixels += job->runs[k].to - job->runs[k].from;
            region->open |= y == 0 || y == last || job->runs[k].from == 0 || job->runs[k].to == job->mask.width;
        }
}

/* Closed regions of more than `small_pixels` are opened where a pixel of theirs must not be filled. */
static void open_unfillable(hole_job *job, uf_mask fillable, double small_pixels)
{
    for (int y = 0; y < job->mask.height; y++)
        for (int k = job->row_start[y]; k < job->row_start[y + 1]; k++) {
            hole_region *region = &job->regions[root_of(job->runs, k)];
            const uint8_t *row = uf_mask_row(fillable, y);
            for (int x = job->runs[k].from; x < job->runs[k].to && !region->open && region->pixels > small_pixels;
                 x++)
                region->open = !row[x];
        }
}

static void fill_closed(hole_job *job, double max_pixels)
{
    for (int y = 0; y < job->mask.height; y++)
        for (int k = job->row_start[y]; k < job->row_start[y + 1]; k++) {
            const hole_region *region = &job->regions[root_of(job->runs, k)];
            if (!region->open && region->pixels <= max_pixels)
                memset(uf_mask_row(job->mask, y) + job->runs[k].from, 1,
                       (size_t)(job->runs[k].to - job->runs[k].from));
        }
}

uf_status uf_fill_holes(uf_work *work, uf_mask mask, double small_pixels, double max_pixels, uf_mask fillable,
                        uf_error *error)
{
    hole_job job = {.mask = mask};
    size_t total = count_zero_runs(mask);
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, total, sizeof *job.runs, "holes", &job.runs, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)mask.height + 1, sizeof *job.row_start, "holes", &job.row_start, error);
    if (status == UF_OK)
        status = uf_take(work, total, sizeof *job.regions, "holes", &job.regions, error);
    if (status == UF_OK) {
        join_zero_runs(&job);
        sum_regions(&job);
        if (fillable.data)
            open_unfillable(&job, fillable, small_pixels);
        fill_closed(&job, max_pixels);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
