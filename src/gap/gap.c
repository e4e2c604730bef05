/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "gap/gap.h"

#include <math.h>

#include "base/text.h"
#include "gap/edge_fall.h"
#include "gap/own_reference.h"
#include "gap/signals.h"
#include "image/restore.h"
#include "image/smooth.h"
#include "optics/detection.h"

typedef struct gap_job {
    const uf_kernels *kernels;
    uf_plan *plan;
    const uf_channel *near, *wide;
    const uf_cell_map *cells;
    uf_gap_map *map;
    uf_edge_fall fall;
    uf_plane near_smooth, dye_smooth, near_fine, dye_fine;
    float ln_reference;
    double detection_sigma;
} gap_job;

/* ---- signals --------------------------------------------------------------------------------- */

static void signal_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    gap_job *job = context;
    float near_background = (float)job->near->background_adu, wide_background = (float)job->wide->background_adu;
    int width = job->near->image.width;
    for (int y = y0; y < y1; y++) {
        const float *near = uf_plane_row(job->near->image, y), *wide = uf_plane_row(job->wide->image, y);
        const float *distance = uf_plane_row(job->cells->to_background_px, y);
        const int32_t *labels = uf_labels_row(job->cells->labels, y);
        float *near_out = uf_plane_row(job->map->near_adu, y), *dye = uf_plane_row(job->map->dye_adu, y);
        for (int x = 0; x < width; x++) {
            near_out[x] = near[x] - near_background;
            dye[x] = wide[x] - wide_background;
            if (labels[x])
                dye[x] /= uf_edge_fall_at(&job->fall, distance[x]);
        }
    }
}

/* Both signals at the scale of the point spread function, to judge what can be seen, and with the blur taken out, to
 * tell the gap. Dye goes through the same as near: at outlines both then fall alike. */
static uf_status filter_signals(uf_work *work, gap_job *job, double psf_px, uf_error *error)
{
    const uf_plane in[] = {job->map->near_adu, job->map->dye_adu};
    uf_plane *smooth[] = {&job->near_smooth, &job->dye_smooth}, *fine[] = {&job->near_fine, &job->dye_fine};
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < 2; k++) {
        status = uf_plane_take(work, in[k].width, in[k].height, smooth[k], error);
        if (status == UF_OK)
            status = uf_plane_take(work, in[k].width, in[k].height, fine[k], error);
        if (status == UF_OK)
            status = uf_smooth(work, in[k], psf_px, *smooth[k], error);
        if (status == UF_OK)
            status = uf_restore(work, *smooth[k], psf_px, job->plan->restore_gain, *fine[k], error);
    }
    return status;
}

/* ---- gaps ------------------------------------------------------------------------------------ */

/* An unresolved pixel's gap is at least where its near signal would just be detected. */
static float limit_at(const gap_job *job, float dye)
{
    return (float)uf_gap_limit_nm(job->plan, job->detection_sigma, job->near, job->wide, (double)dye);
}

/* A saturated near pixel is brighter than it says, so its gap is an upper bound and may still prove contact. A saturated
 * wide pixel has more dye than it says: its gap is a lower bound, which counts as not seen. */
static int wide_is_saturated(const gap_job *job, int x, int y)
{
    return job->plan->signal == UF_SIGNAL_RATIO && job->wide->saturated.data &&
           uf_mask_row(job->wide->saturated, y)[x] == UF_PIXEL_SATURATED;
}

static void judge_row(gap_job *job, int y)
{
    const int32_t *labels = uf_labels_row(job->cells->labels, y);
    const float *near = uf_plane_row(job->near_smooth, y), *dye = uf_plane_row(job->dye_smooth, y);
    float *gap = uf_plane_row(job->map->gap_nm, y), *smooth = uf_plane_row(job->map->smooth_gap_nm, y);
    uint8_t *state = uf_mask_row(job->map->state, y);
    double sigma = job->detection_sigma;
    float near_least = (float)(sigma * uf_smoothed_sd(job->plan, job->near, 0));
    float wide_least =
        job->plan->signal == UF_SIGNAL_NEAR ? 0.0f : (float)(sigma * uf_smoothed_sd(job->plan, job->wide, 0));
    for (int x = 0; x < job->cells->labels.width; x++) {
        if (!labels[x]) {
            gap[x] = NAN;
            smooth[x] = UF_GAP_NOWHERE;
            state[x] = UF_GAP_OUTSIDE;
            continue;
        }
        int bound = wide_is_saturated(job, x, y);
        int seen = near[x] > near_least && dye[x] > wide_least && !bound;
        state[x] = seen ? UF_GAP_RESOLVED : UF_GAP_UNRESOLVED;
        float limit = seen ? 0.0f : bound && !isnan(smooth[x]) ? smooth[x] : limit_at(job, dye[x]);
        /* A resolved place may still hold a single dark pixel without a logarithm: it takes its surroundings. */
        gap[x] = !seen ? limit : isnan(gap[x]) ? smooth[x] : gap[x];
        smooth[x] = !seen ? limit : smooth[x];
    }
}

/* First and last + 1 column that any cell has in row y; equal when none. */
static void cell_span(uf_labels labels, int y, int *from, int *to)
{
    const int32_t *row = uf_labels_row(labels, y);
    *from = 0;
    *to = labels.width;
    while (*from < labels.width && !row[*from])
        ++*from;
    while (*to > *from && !row[*to - 1])
        --*to;
}

static void gap_rows(void *context, int hand, int y0, int y1)
{
    (void)hand;
    gap_job *job = context;
    const uf_gap_lookup *lookup = &job->plan->decay.lookup;
    for (int y = y0; y < y1; y++) {
        int from, to;
        cell_span(job->cells->labels, y, &from, &to);
        job->kernels->gap(uf_plane_row(job->map->gap_nm, y) + from, uf_plane_row(job->near_fine, y) + from,
                          uf_plane_row(job->dye_fine, y) + from, job->ln_reference, lookup, to - from);
        job->kernels->gap(uf_plane_row(job->map->smooth_gap_nm, y) + from, uf_plane_row(job->near_smooth, y) + from,
                          uf_plane_row(job->dye_smooth, y) + from, job->ln_reference, lookup, to - from);
        judge_row(job, y);
    }
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status take_map(uf_work *work, int width, int height, uf_gap_map *map, uf_error *error)
{
    map->chi_square = (uf_plane){0};
    uf_plane *planes[] = {&map->gap_nm, &map->dye_adu, &map->smooth_gap_nm};
    uf_status status = uf_mask_take(work, width, height, &map->state, error);
    for (size_t k = 0; status == UF_OK && k < sizeof planes / sizeof planes[0]; k++)
        status = uf_plane_take(work, width, height, planes[k], error);
    return status;
}

/* Near alone tells the gap: the dye is even over each cell, and falls at outlines as near does. */
static uf_status even_dye(uf_work *work, const gap_job *job, double psf_px, uf_error *error)
{
    uf_labels labels = job->cells->labels;
    float background = (float)job->near->background_adu;
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++) {
            uf_plane_row(job->map->dye_adu, y)[x] = uf_labels_row(labels, y)[x] ? 1.0f : 0.0f;
            uf_plane_row(job->map->near_adu, y)[x] -= background;
        }
    double near_blur = sqrt(job->plan->restore_gain - 1) * psf_px;
    return uf_smooth(work, job->map->dye_adu, near_blur, job->map->dye_adu, error);
}

uf_status uf_gap_signals(uf_work *work, uf_plan *plan, uf_channel *near, const uf_channel *wide,
                         const uf_cell_map *cells, uf_gap_map *map, uf_error *error)
{
    double psf_px = plan->psf_sigma_um / plan->pixel_size_um;
    gap_job job = {.plan = plan, .near = near, .wide = wide, .cells = cells, .map = map};
    uf_status status = take_map(work, near->image.width, near->image.height, map, error);
    map->near_adu = near->image;
    if (status == UF_OK && plan->signal == UF_SIGNAL_NEAR)
        return even_dye(work, &job, psf_px, error);
    if (status == UF_OK)
        status = uf_edge_fall_measure(work, wide, cells, plan->pixel_size_um, psf_px, &job.fall, error);
    if (status == UF_OK)
        uf_rows_run(work, near->image.height, signal_rows, &job);
    return status;
}

/* Each cell's own reference, as a factor of its dye, so that one ratio serves the field. */
static uf_status find_own_reference(uf_work *work, gap_job *job, uf_error *error)
{
    uf_labels labels = job->cells->labels;
    uf_plane planes[] = {job->map->dye_adu, job->dye_smooth, job->dye_fine};
    float *factor;
    uf_status status = uf_take(work, (size_t)labels.count + 1, sizeof *factor, "the reference", &factor, error);
    if (status == UF_OK)
        status = uf_own_reference(work, job->plan, job->near_smooth, job->dye_smooth, job->cells, factor, error);
    for (int k = 0; status == UF_OK && k < 3; k++)
        for (int y = 0; y < labels.height; y++) {
            const int32_t *label = uf_labels_row(labels, y);
            float *row = uf_plane_row(planes[k], y);
            for (int x = 0; x < labels.width; x++)
                row[x] *= factor[label[x]];
        }
    return status;
}

uf_status uf_gap_find(uf_work *work, uf_plan *plan, double detection_sigma, uf_channel *near, const uf_channel *wide,
                      const uf_cell_map *cells, uf_gap_map *map, uf_error *error)
{
    int height = near->image.height;
    double psf_px = plan->psf_sigma_um / plan->pixel_size_um;
    gap_job job = {.kernels = uf_kernels_in_use(),
                   .plan = plan,
                   .near = near,
                   .wide = wide,
                   .cells = cells,
                   .map = map,
                   .detection_sigma = detection_sigma};
    uf_status status = uf_gap_signals(work, plan, near, wide, cells, map, error);
    if (status != UF_OK)
        return status;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    status = filter_signals(work, &job, psf_px, error);
    if (status == UF_OK && plan->reference_from_cell)
        status = find_own_reference(work, &job, error);
    job.ln_reference = (float)uf_round_digits(log(plan->reference_ratio), 12);
    if (status == UF_OK)
        uf_rows_run(work, height, gap_rows, &job);
    uf_arena_back(&work->arena, mark);
    return status;
}
