/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "measure/contrast.h"

#include <math.h>
#include <stdlib.h>

#include "base/constants.h"
#include "image/kernels.h"

static const double reaches_um[] = {0.45, 0.7, 1.0, 1.4, 1.8};
enum { REACHES = 5, NARROW_REACHES = 2, DIRECTIONS = 8, STRETCH = 64 };

typedef struct offset {
    int dx, dy;
} offset;

typedef struct contrast_job {
    const uf_kernels *kernels;
    uf_plane gap, narrow, closed;
    offset offsets[DIRECTIONS][REACHES];
    float least;
    float *rows; /* one a hand */
} contrast_job;

static void make_offsets(contrast_job *job, double pixel_size_um)
{
    for (int d = 0; d < DIRECTIONS; d++)
        for (int r = 0; r < REACHES; r++) {
            double angle = UF_PI * d / DIRECTIONS, px = reaches_um[r] / pixel_size_um;
            px = px < 1 ? 1 : px;
            job->offsets[d][r] = (offset){(int)lround(px * cos(angle)), (int)lround(px * sin(angle))};
        }
}

/* Columns from .. to - 1 of one row. */
typedef struct span {
    int from, to;
} span;

/* From the first to the last pixel of a row that has a gap: contrast elsewhere is never looked at. */
static span span_of_row(const contrast_job *job, int y)
{
    const float *row = uf_plane_row(job->gap, y);
    span s = {0, job->gap.width};
    while (s.from < s.to && row[s.from] <= 0.5f * UF_GAP_NOWHERE)
        s.from++;
    while (s.to > s.from && row[s.to - 1] <= 0.5f * UF_GAP_NOWHERE)
        s.to--;
    return s;
}

/* The part of a row's span whose neighbours at an offset lie in the image; empty when the rows do not. */
static span within(const contrast_job *job, int y, span s, offset o)
{
    int side = abs(o.dx), width = job->gap.width;
    s.from = s.from > side ? s.from : side;
    s.to = s.to < width - side ? s.to : width - side;
    if (y < abs(o.dy) || y + abs(o.dy) >= job->gap.height || s.to < s.from)
        s.to = s.from;
    return s;
}

/* One direction's narrow contrast joins the best so far. */
static void add_narrow(const contrast_job *job, int y, span row, offset o)
{
    span s = within(job, y, row, o);
    if (s.to > s.from)
        job->kernels->two_sided(uf_plane_row(job->narrow, y) + s.from, uf_plane_row(job->gap, y) + s.from,
                                uf_plane_row(job->gap, y - o.dy) + s.from - o.dx,
                                uf_plane_row(job->gap, y + o.dy) + s.from + o.dx, s.to - s.from);
}

/* One direction's closedness takes its place among the worst, where its longest reach lies in the image. */
static void add_closed(const contrast_job *job, int y, span row, const offset *offsets, float *scratch)
{
    span s = within(job, y, row, offsets[REACHES - 1]);
    int n = s.to - s.from;
    if (n <= 0)
        return;
    for (int x = 0; x < n; x++)
        scratch[x] = -1e9f;
    const float *here = uf_plane_row(job->gap, y) + s.from;
    for (int r = 0; r < REACHES; r++)
        job->kernels->closed_sides(scratch, here, uf_plane_row(job->gap, y - offsets[r].dy) + s.from - offsets[r].dx,
                                   uf_plane_row(job->gap, y + offsets[r].dy) + s.from + offsets[r].dx,
                                   0.5f * UF_GAP_NOWHERE, n);
    float *worst = uf_plane_row(job->closed, y) + s.from;
    for (int x = 0; x < n; x++)
        worst[x] = scratch[x] < worst[x] ? scratch[x] : worst[x];
}

static int any_reaches(const float *row, span s, float least)
{
    int found = 0;
    for (int x = s.from; x < s.to; x++)
        found |= row[x] >= least;
    return found;
}

/* Closedness of the stretches of a row in which some pixel is narrow enough. */
static void close_row(const contrast_job *job, int y, span row, float *scratch)
{
    const float *narrow = uf_plane_row(job->narrow, y);
    for (int from = row.from; from < row.to; from += STRETCH) {
        span s = {from, from + STRETCH < row.to ? from + STRETCH : row.to};
        int wanted = any_reaches(narrow, s, job->least);
        for (int x = s.from; x < s.to; x++)
            uf_plane_row(job->closed, y)[x] = wanted ? 1e9f : -1e9f;
        for (int d = 0; wanted && d < DIRECTIONS; d++)
            add_closed(job, y, s, job->offsets[d], scratch);
    }
}

static void contrast_rows(void *context, int hand, int y0, int y1)
{
    contrast_job *job = context;
    int width = job->gap.width;
    float *scratch = job->rows + (size_t)hand * (size_t)width;
    for (int y = y0; y < y1; y++) {
        for (int x = 0; x < width; x++) {
            uf_plane_row(job->narrow, y)[x] = 0.0f;
            uf_plane_row(job->closed, y)[x] = -1e9f;
        }
        span s = span_of_row(job, y);
        for (int d = 0; d < DIRECTIONS; d++)
            for (int r = 0; r < NARROW_REACHES; r++)
                add_narrow(job, y, s, job->offsets[d][r]);
        close_row(job, y, s, scratch);
    }
}

uf_status uf_contrast_find(uf_work *work, uf_plane gap_nm, double pixel_size_um, double least_nm, uf_plane narrow,
                           uf_plane closed, uf_error *error)
{
    contrast_job job = {
        .kernels = uf_kernels_in_use(), .gap = gap_nm, .narrow = narrow, .closed = closed, .least = (float)least_nm};
    uf_arena_mark mark = uf_arena_now(&work->arena);
    make_offsets(&job, pixel_size_um);
    uf_status status =
        uf_take(work, (size_t)uf_hands(work) * (size_t)gap_nm.width, sizeof(float), "spots", &job.rows, error);
    if (status == UF_OK)
        uf_rows_run(work, gap_nm.height, contrast_rows, &job);
    uf_arena_back(&work->arena, mark);
    return status;
}
