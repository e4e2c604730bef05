/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "gap/own_reference.h"

#include <math.h>

#include "base/text.h"
#include "fit/robust.h"

static const double closest_share = 0.01;

/* Ratios of one cell's pixels deeper than `deeper` inside it. */
static size_t collect(const uf_cell_map *cells, uf_plane near, uf_plane dye, int label, uf_box box, float deeper,
                      float *ratios)
{
    size_t count = 0;
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *labels = uf_labels_row(cells->labels, y);
        const float *n = uf_plane_row(near, y), *d = uf_plane_row(dye, y), *in = uf_plane_row(cells->distance_px, y);
        for (int x = box.x0; x < box.x1; x++)
            if (labels[x] == label && in[x] > deeper && n[x] > 0.0f && d[x] > 0.0f)
                ratios[count++] = n[x] / d[x];
    }
    return count;
}

/* NaN when no pixel of the cell has a signal. */
static double closest_ratio(const uf_plan *plan, const uf_cell_map *cells, uf_plane near, uf_plane dye, int label,
                            uf_box box, float *ratios)
{
    float deeper = (float)(2 * plan->psf_sigma_um / plan->pixel_size_um) + 0.5f;
    size_t count = collect(cells, near, dye, label, box, deeper, ratios);
    if (!count)
        count = collect(cells, near, dye, label, box, 0.0f, ratios);
    if (!count)
        return (double)NAN;
    return (double)uf_select(ratios, count, (size_t)((1 - closest_share) * (double)(count - 1) + 0.5));
}

static uf_status take_scratch(uf_work *work, const uf_cell_map *cells, uf_box **boxes, double **references,
                              float **ratios, uf_error *error)
{
    size_t places = (size_t)cells->labels.count + 1, most = 1;
    uf_status status = uf_take(work, places, sizeof **boxes, "the reference", boxes, error);
    if (status == UF_OK)
        status = uf_take(work, 2 * places, sizeof **references, "the reference", references, error);
    if (status != UF_OK)
        return status;
    uf_label_boxes(cells->labels, *boxes);
    for (int k = 1; k <= cells->labels.count; k++) {
        uf_box box = (*boxes)[k];
        size_t pixels = box.x1 > box.x0 ? (size_t)(box.x1 - box.x0) * (size_t)(box.y1 - box.y0) : 0;
        most = pixels > most ? pixels : most;
    }
    return uf_take(work, most, sizeof **ratios, "the reference", ratios, error);
}

uf_status uf_own_reference(uf_work *work, uf_plan *plan, uf_plane near, uf_plane dye, const uf_cell_map *cells,
                           float *factor, uf_error *error)
{
    int count = cells->labels.count;
    uf_box *boxes;
    double *references;
    float *ratios;
    size_t known = 0;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = take_scratch(work, cells, &boxes, &references, &ratios, error);
    if (status == UF_OK) {
        double to_contact = exp(-uf_decay_ln(&plan->decay, plan->reference_gap_nm));
        double *sorted = references + count + 1;
        for (int k = 1; k <= count; k++) {
            references[k] = to_contact * closest_ratio(plan, cells, near, dye, k, boxes[k], ratios);
            if (!isnan(references[k]))
                sorted[known++] = references[k];
        }
        double field = known ? uf_round_digits(uf_median(sorted, known), 12) : 1;
        plan->reference_ratio = field;
        factor[0] = 1.0f;
        for (int k = 1; k <= count; k++)
            factor[k] = isnan(references[k]) ? 1.0f : (float)uf_round_digits(references[k] / field, 9);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
