/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "gap/edge_fall.h"

#include <math.h>

#include "base/text.h"
#include "image/smooth.h"

static const double reach_um = 1.6, settled_from_um = 1.2;

/* Mean of wide over plateau by distance from the outline, at every second pixel of every second row: outlines
 * are long enough. */
static void collect(const uf_channel *wide, const uf_cell_map *cells, const uf_expand_column *columns, float *level,
                    const uf_edge_fall *fall, double *sum, double *weight)
{
    float background = (float)wide->background_adu;
    for (int y = 0; y < cells->labels.height; y += 2) {
        const float *distance = uf_plane_row(cells->to_background_px, y), *image = uf_plane_row(wide->image, y);
        const int32_t *labels = uf_labels_row(cells->labels, y);
        uf_expand_row(cells->plateau_adu, cells->factor, y, columns, level, cells->labels.width);
        for (int x = y / 2 % 2; x < cells->labels.width; x += 2) {
            int k = (int)((distance[x] - 0.5f) * (float)fall->per_px);
            if (!labels[x] || k >= fall->steps)
                continue;
            float plateau = level[x] - background;
            if (!(plateau > 0.0f))
                continue;
            sum[k] += (double)(image[x] - background);
            weight[k] += (double)plateau;
        }
    }
}

/* Mean of the fall beyond the blur's reach: what the plateau map makes of 1. */
static double settled(const uf_edge_fall *fall, const double *sum, const double *weight, double pixel_size_um)
{
    double s = 0, w = 0;
    for (int k = 0; k < fall->steps; k++)
        if ((k + 0.5) / fall->per_px * pixel_size_um >= settled_from_um) {
            s += sum[k];
            w += weight[k];
        }
    return w > 0 && s > 0 ? s / w : (double)NAN;
}

static void fill_fall(uf_edge_fall *fall, const double *sum, const double *weight, double level, double psf_px)
{
    for (int k = 0; k <= UF_EDGE_FALL_STEPS; k++)
        fall->relative[k] = 1.0f;
    for (int k = 0; k < fall->steps && !isnan(level); k++) {
        if (!(weight[k] > 0))
            continue;
        double from_outline_px = (k + 0.5) / fall->per_px;
        double near_fall = 0.5 * erfc(-from_outline_px / (psf_px * sqrt(2.0)));
        double relative = sum[k] / weight[k] / level / near_fall;
        /* Between a third and one: outside that it is an accident of few pixels, not blur. */
        fall->relative[k] = (float)uf_round_digits(relative < 0.33 ? 0.33 : relative > 1 ? 1 : relative, 9);
    }
}

uf_status uf_edge_fall_measure(uf_work *work, const uf_channel *wide, const uf_cell_map *cells, double pixel_size_um,
                               double psf_px, uf_edge_fall *fall, uf_error *error)
{
    double sum[UF_EDGE_FALL_STEPS] = {0}, weight[UF_EDGE_FALL_STEPS] = {0};
    int width = cells->labels.width;
    uf_expand_column *columns;
    float *level;
    fall->per_px = 2.0;
    fall->steps = (int)(reach_um / pixel_size_um * fall->per_px);
    fall->steps = fall->steps < 1 ? 1 : fall->steps > UF_EDGE_FALL_STEPS ? UF_EDGE_FALL_STEPS : fall->steps;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, (size_t)width, sizeof *columns, "gaps", &columns, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)width, sizeof *level, "gaps", &level, error);
    if (status == UF_OK) {
        uf_expand_columns(cells->plateau_adu.width, cells->factor, width, columns);
        collect(wide, cells, columns, level, fall, sum, weight);
        fill_fall(fall, sum, weight, settled(fall, sum, weight, pixel_size_um), psf_px);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}
