/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "measure/contrast.h"

#include <math.h>
#include <stdlib.h>

#include "image/kernels.h"

static const double reaches_um[] = {0.45, 0.7, 1.0, 1.4, 1.8};
enum { REACHES = 5, NARROW_REACHES = 2, DIRECTIONS = 8, BAND = 64 };

typedef struct offset {
    int dx, dy;
} offset;

typedef struct contrast_job {
    const uf_kernels *kernels;
    uf_plane gap, narrow, closed;
    offset offsets[DIRECTIONS][REACHES];
    float *rows; /* one a band */
} contrast_job;

static void make_offsets(contrast_job *job, double pixel_size_um)
{
    for (int d = 0; d < DIRECTIONS; d++)
        for (int r = 0; r < REACHES; r++) {
            double angle = 3.14159265358979323846 * d / DIRECTIONS, px = reaches_um[r] / pixel_size_um;
            px = px < 1 ? 1 : px;
            job->offsets[d][r] = (offset){(int)lround(px * cos(angle)), (int)lround(px * sin(angle))};
        }
}

/* One direction's narrow contrast joins the best so far. */
static void add_narrow(const contrast_job *job, int y, offset o)
{
    int width = job->gap.width, side = abs(o.dx), n = width - 2 * side;
    if (y < abs(o.dy) || y + abs(o.dy) >= job->gap.height || n <= 0)
        return;
    job->kernels->two_sided(uf_plane_row(job->narrow, y) + side, uf_plane_row(job->gap, y) + side,
                            uf_plane_row(job->gap, y - o.dy) + side - o.dx,
                            uf_plane_row(job->gap, y + o.dy) + side + o.dx, n);
}

/* One direction's closedness takes its place among the worst, where its longest reach lies in the image. */
static void add_closed(const contrast_job *job, int y, const offset *offsets, float *row)
{
    offset longest = offsets[REACHES - 1];
    int width = job->gap.width, side = abs(longest.dx), n = width - 2 * side;
    if (y < abs(longest.dy) || y + abs(longest.dy) >= job->gap.height || n <= 0)
        return;
    for (int x = 0; x < n; x++)
        row[x] = -1e9f;
    const float *here = uf_plane_row(job->gap, y) + side;
    for (int r = 0; r < REACHES; r++)
        job->kernels->closed_sides(row, here, uf_plane_row(job->gap, y - offsets[r].dy) + side - offsets[r].dx,
                                   uf_plane_row(job->gap, y + offsets[r].dy) + side + offsets[r].dx,
                                   0.5f * UF_GAP_NOWHERE, n);
    float *worst = uf_plane_row(job->closed, y) + side;
    for (int x = 0; x < n; x++)
        worst[x] = row[x] < worst[x] ? row[x] : worst[x];
}

static void contrast_rows(void *context, int y0, int y1)
{
    contrast_job *job = context;
    int width = job->gap.width;
    float *row = job->rows + (size_t)(y0 / BAND) * (size_t)width;
    for (int y = y0; y < y1; y++) {
        for (int x = 0; x < width; x++) {
            uf_plane_row(job->narrow, y)[x] = 0.0f;
            uf_plane_row(job->closed, y)[x] = 1e9f;
        }
        for (int d = 0; d < DIRECTIONS; d++) {
            for (int r = 0; r < NARROW_REACHES; r++)
                add_narrow(job, y, job->offsets[d][r]);
            add_closed(job, y, job->offsets[d], row);
        }
    }
}

uf_status uf_contrast_find(uf_work *work, uf_plane gap_nm, double pixel_size_um, uf_plane narrow, uf_plane closed,
                           uf_error *error)
{
    contrast_job job = {.kernels = uf_kernels_in_use(), .gap = gap_nm, .narrow = narrow, .closed = closed};
    size_t bands = (size_t)(gap_nm.height + BAND - 1) / BAND;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    make_offsets(&job, pixel_size_um);
    uf_status status = uf_take(work, bands * (size_t)gap_nm.width, sizeof(float), "spots", &job.rows, error);
    if (status == UF_OK)
        uf_rows_run(work, gap_nm.height, contrast_rows, &job);
    uf_arena_back(&work->arena, mark);
    return status;
}
