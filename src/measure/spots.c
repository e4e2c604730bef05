/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Focal spots: compact minima of the gap against their own surroundings, on both sides of them.
 *
 * The smaller of the narrow and the closed contrast (measure/contrast.h) is the score. Its map is cut above the
 * noise and parted at saddles (image/basins.h): each part is a spot, a long one too, since only its middle is
 * closed. The spot's region, connected to its top, is where the narrow contrast is at least half of that at the
 * top and the gap no more than that half above the gap there.
 */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/constants.h"
#include "fit/robust.h"
#include "image/basins.h"
#include "measure/contrast.h"
#include "measure/measure.h"
#include "measure/shape.h"
#include "optics/detection.h"

/* Two maxima of contrast are one spot when the saddle between them reaches this share of the lower one. */
static const double one_spot_saddle = 0.6;

/* Natural unevenness of a membrane reaches some nm of contrast, and a tenth of the signal where it is far; a spot must
 * stand out of it. */
static const double least_contrast_nm = 7.0, least_contrast_share = 0.1;

/* At the outline near and wide fall by blur, and what one takes the other's fall for may be wrong by this share; the error
 * is gone this far inside. A gap wrong by that looks like a spot where the membrane is far. */
static const double rim_error = 0.35, rim_reach_um = 1.0;

/* ---- cut ------------------------------------------------------------------------------------- */

/* Contrast that noise alone does not reach in this cell, by gap: the noise grows with the gap. */
static double needed_contrast(const uf_measure_input *in, const uf_cell *row, double gap_nm)
{
    double dye = row->dye_mean_adu;
    double near = dye * in->plan->reference_ratio * exp(uf_decay_ln(&in->plan->decay, gap_nm));
    double noise = uf_gap_noise_nm(in->plan, uf_psf_smoothing(in->plan), in->near, in->wide, near, dye);
    double by_noise = in->settings->spots.contrast_sigma * noise;
    double least = fmax(least_contrast_nm, least_contrast_share * uf_gap_per_ln(in->plan, gap_nm));
    return by_noise > least || isnan(by_noise) ? by_noise : least;
}

enum { GAP_STEPS = 64, GAP_STEP_NM = 8 };

/* needed_contrast of one cell as a small table over gaps from 0 in steps of GAP_STEP_NM. */
static void tabulate_needed(const uf_measure_input *in, const uf_cell *row, float *needed)
{
    for (int k = 0; k < GAP_STEPS; k++) {
        double value = needed_contrast(in, row, k * GAP_STEP_NM);
        needed[k] = isnan(value) ? INFINITY : (float)value;
    }
}

static float needed_at(const float *needed, float gap)
{
    int k = gap < 0.0f ? 0 : (int)(gap / (float)GAP_STEP_NM);
    return needed[k < GAP_STEPS ? k : GAP_STEPS - 1];
}

/* score := the smaller contrast where it can belong to a spot (at least half of what a spot's top must reach), 0
 * elsewhere; ground says where. `narrow` is left whole. */
static void cut_score(const uf_measure_input *in, uf_plane narrow, uf_plane score, const float *needed,
                      uf_labels ground)
{
    for (int y = 0; y < score.height; y++) {
        const int32_t *labels = uf_labels_row(in->cells->labels, y);
        const uint8_t *state = uf_mask_row(in->gaps->state, y);
        const float *gap = uf_plane_row(in->gaps->smooth_gap_nm, y), *best = uf_plane_row(narrow, y);
        float *row = uf_plane_row(score, y);
        int32_t *out = uf_labels_row(ground, y);
        for (int x = 0; x < score.width; x++) {
            float value = best[x] < row[x] ? best[x] : row[x];
            out[x] = labels[x] && state[x] == UF_GAP_RESOLVED &&
                     value >= 0.5f * needed_at(needed + (size_t)labels[x] * GAP_STEPS, gap[x]);
            row[x] = out[x] ? value : 0.0f;
        }
    }
}

/* ---- spots ----------------------------------------------------------------------------------- */

/* One candidate: where its score is highest, and sums over its region. */
typedef struct spot_sums {
    float top, least_gap, near_peak;
    int cell, top_x, top_y;
    double weight, x, y;             /* weighted by contrast */
    double area, ux, uy, xx, yy, xy; /* of the region, unweighted, about the top */
} spot_sums;

static void find_tops(const uf_measure_input *in, uf_plane score, uf_labels basins, spot_sums *sums)
{
    for (int k = 0; k <= basins.count; k++)
        sums[k] = (spot_sums){.least_gap = INFINITY, .near_peak = -INFINITY};
    for (int y = 0; y < basins.height; y++) {
        const int32_t *row = uf_labels_row(basins, y);
        for (int x = 0; x < basins.width; x++) {
            if (!row[x] || uf_plane_row(score, y)[x] <= sums[row[x]].top)
                continue;
            spot_sums *s = &sums[row[x]];
            s->top = uf_plane_row(score, y)[x];
            s->cell = uf_labels_row(in->cells->labels, y)[x];
            s->top_x = x;
            s->top_y = y;
        }
    }
}

static void add_pixel(const uf_measure_input *in, float contrast, int x, int y, spot_sums *s)
{
    double dx = x - s->top_x, dy = y - s->top_y;
    s->weight += (double)contrast;
    s->x += (double)contrast * dx;
    s->y += (double)contrast * dy;
    s->area++;
    s->ux += dx;
    s->uy += dy;
    s->xx += dx * dx;
    s->yy += dy * dy;
    s->xy += dx * dy;
    float gap = uf_plane_row(in->gaps->smooth_gap_nm, y)[x], near = uf_plane_row(in->gaps->near_adu, y)[x];
    s->least_gap = gap < s->least_gap ? gap : s->least_gap;
    s->near_peak = near > s->near_peak ? near : s->near_peak;
}

/* No spot reaches farther from its top than the longest one is long. */
static int region_reach(const uf_measure_input *in)
{
    return (int)(in->settings->spots.max_length_um / in->plan->pixel_size_um) + 1;
}

/* Grows the region of candidate `number` from its top over unclaimed pixels of its cell; claimed holds whose each
 * pixel is. `waiting` has room for every pixel within `reach` of the top. */
static void grow_region(const uf_measure_input *in, uf_plane narrow, uf_labels claimed, int number, int reach,
                        int *waiting, spot_sums *s)
{
    float least = 0.5f * uf_plane_row(narrow, s->top_y)[s->top_x];
    float highest = uf_plane_row(in->gaps->smooth_gap_nm, s->top_y)[s->top_x] + least;
    int count = 0, done = 0, width = claimed.width;
    waiting[count++] = s->top_y * width + s->top_x;
    uf_labels_row(claimed, s->top_y)[s->top_x] = number;
    while (done < count) {
        int x = waiting[done] % width, y = waiting[done] / width;
        done++;
        add_pixel(in, uf_plane_row(narrow, y)[x], x, y, s);
        for (int v = y - 1; v <= y + 1; v++)
            for (int u = x - 1; u <= x + 1; u++) {
                if (u < 0 || v < 0 || u >= width || v >= claimed.height || abs(u - s->top_x) > reach ||
                    abs(v - s->top_y) > reach || uf_labels_row(claimed, v)[u] ||
                    uf_labels_row(in->cells->labels, v)[u] != s->cell || uf_plane_row(narrow, v)[u] < least ||
                    uf_plane_row(in->gaps->smooth_gap_nm, v)[u] > highest)
                    continue;
                uf_labels_row(claimed, v)[u] = number;
                waiting[count++] = v * width + u;
            }
    }
}

/* Regions of all candidates, which never share a pixel: basins are numbered from the highest score down, so the
 * clearer spot takes first. */
static uf_status grow_regions(uf_work *work, const uf_measure_input *in, uf_plane narrow, uf_labels basins,
                              spot_sums *sums, uf_error *error)
{
    int *waiting;
    int reach = region_reach(in);
    size_t side = 2 * (size_t)reach + 1;
    uf_status status = uf_take(work, side * side, sizeof *waiting, "spots", &waiting, error);
    if (status != UF_OK)
        return status;
    for (int y = 0; y < basins.height; y++)
        memset(uf_labels_row(basins, y), 0, (size_t)basins.width * sizeof(int32_t));
    for (int k = 1; k <= basins.count; k++)
        if (sums[k].top > 0.0f && !uf_labels_row(basins, sums[k].top_y)[sums[k].top_x])
            grow_region(in, narrow, basins, k, reach, waiting, &sums[k]);
    return UF_OK;
}

/* Contrast that an error of the fall at the outline does not reach at this place. */
static double needed_at_rim(const uf_measure_input *in, const spot_sums *s)
{
    double distance_px = (double)uf_plane_row(in->cells->distance_px, s->top_y)[s->top_x];
    double share = 1 - distance_px * in->plan->pixel_size_um / rim_reach_um;
    return share > 0 ? share * rim_error * uf_gap_per_ln(in->plan, (double)(s->least_gap + s->top)) : 0;
}

static int is_spot(const uf_measure_input *in, const spot_sums *s, const float *needed, const uf_spot *spot)
{
    const uf_settings *settings = in->settings;
    return (double)s->top >= needed_at_rim(in, s) &&
           s->top >= needed_at(needed + (size_t)s->cell * GAP_STEPS, s->least_gap) &&
           spot->length_um >= settings->spots.min_length_um && spot->length_um <= settings->spots.max_length_um;
}

static uf_spot make_spot(const uf_measure_input *in, const spot_sums *s)
{
    double px = in->plan->pixel_size_um, mx = s->ux / s->area, my = s->uy / s->area;
    uf_shape shape;
    uf_shape_ellipse(s->xx / s->area - mx * mx + 1.0 / 12, s->yy / s->area - my * my + 1.0 / 12,
                     s->xy / s->area - mx * my, &shape);
    uf_spot spot = {.cell = s->cell, .x_px = s->top_x + s->x / s->weight, .y_px = s->top_y + s->y / s->weight};
    spot.x_um = spot.x_px * px;
    spot.y_um = spot.y_px * px;
    spot.area_um2 = s->area * px * px;
    spot.length_um = shape.axis_long_px * px;
    spot.width_um = shape.axis_short_px * px;
    spot.orientation_deg = shape.orientation_deg;
    spot.gap_nm = in->plan->has_gap ? (double)s->least_gap : (double)NAN;
    spot.contrast_nm = in->plan->has_gap ? (double)s->top : (double)NAN;
    spot.near_peak_adu = (double)s->near_peak;
    int x = (int)lround(spot.x_px), y = (int)lround(spot.y_px);
    spot.rim_distance_um = fmax(0, ((double)uf_plane_row(in->cells->distance_px, y)[x] - 0.5)) * px;
    return spot;
}

static int by_cell(const void *a, const void *b)
{
    const uf_spot *s = a, *t = b;
    if (s->cell != t->cell)
        return s->cell < t->cell ? -1 : 1;
    if (s->y_px != t->y_px)
        return s->y_px < t->y_px ? -1 : 1;
    return (s->x_px > t->x_px) - (s->x_px < t->x_px);
}

/* ---- the cells' columns ---------------------------------------------------------------------- */

/* Length of the mean vector of doubled angles, with the part that chance gives taken out: for n random
 * directions the square of the length is 1/n on average, so sqrt((n R^2 - 1)/(n - 1)), 0 when negative. */
static double alignment(const uf_spot *spots, int count)
{
    if (count < 5)
        return (double)NAN;
    double c = 0, s = 0, n = count;
    for (int k = 0; k < count; k++) {
        double doubled = spots[k].orientation_deg * UF_PI / 90.0;
        c += cos(doubled);
        s += sin(doubled);
    }
    double corrected = ((c * c + s * s) / n - 1) / (n - 1);
    return corrected > 0 ? sqrt(corrected) : 0;
}

static void fill_cell(uf_cell *row, uf_spot *spots, int count, double *scratch)
{
    double area = 0;
    row->spot_count = count;
    row->spots_per_100um2 = 100 * count / row->spread_area_um2;
    for (int k = 0; k < count; k++) {
        spots[k].spot = k + 1;
        area += spots[k].area_um2;
        scratch[k] = spots[k].area_um2;
    }
    row->spot_area_total_um2 = area;
    row->spot_area_median_um2 = uf_median(scratch, (size_t)count);
    for (int k = 0; k < count; k++)
        scratch[k] = spots[k].length_um;
    row->spot_length_median_um = uf_median(scratch, (size_t)count);
    row->spot_alignment = alignment(spots, count);
}

static uf_status fill_cells(uf_work *work, uf_cell *rows, int cells, uf_spot *spots, int count, uf_error *error)
{
    double *scratch;
    uf_status status = uf_take(work, (size_t)count + 1, sizeof *scratch, "spots", &scratch, error);
    if (status != UF_OK)
        return status;
    for (int k = 0, from = 0; k < cells; k++) {
        int to = from;
        while (to < count && spots[to].cell == rows[k].cell)
            to++;
        fill_cell(&rows[k], spots + from, to - from, scratch);
        from = to;
    }
    return UF_OK;
}

/* ---- all of it ------------------------------------------------------------------------------- */

/* Score, cut and parted into basins. `needed` has a table for each cell. */
static uf_status find_basins(uf_work *work, const uf_measure_input *in, const float *needed, uf_plane narrow,
                             uf_plane score, uf_labels *basins, uf_error *error)
{
    uf_status status = uf_contrast_find(work, in->gaps->smooth_gap_nm, in->plan->pixel_size_um, least_contrast_nm / 2,
                                        narrow, score, error);
    if (status != UF_OK)
        return status;
    cut_score(in, narrow, score, needed, *basins);
    return uf_basins(work, score, one_spot_saddle, basins, error);
}

static int collect(const uf_measure_input *in, const float *needed, const spot_sums *sums, int basins, uf_spot *spots)
{
    int count = 0;
    for (int k = 1; k <= basins; k++) {
        if (!(sums[k].area > 0))
            continue;
        uf_spot spot = make_spot(in, &sums[k]);
        if (is_spot(in, &sums[k], needed, &spot))
            spots[count++] = spot;
    }
    qsort(spots, (size_t)count, sizeof *spots, by_cell);
    return count;
}

static uf_status find_spots(uf_work *work, const uf_measure_input *in, const uf_cell *rows, uf_spot **spots,
                            int *count, uf_error *error)
{
    int cells = in->cells->labels.count, width = in->near->image.width, height = in->near->image.height;
    uf_plane narrow, score;
    uf_labels basins;
    float *needed;
    spot_sums *sums;
    uf_status status = uf_plane_take(work, width, height, &narrow, error);
    if (status == UF_OK)
        status = uf_plane_take(work, width, height, &score, error);
    if (status == UF_OK)
        status = uf_labels_take(work, width, height, &basins, error);
    if (status == UF_OK)
        status = uf_take(work, ((size_t)cells + 1) * GAP_STEPS, sizeof *needed, "spots", &needed, error);
    for (int k = 1; status == UF_OK && k <= cells; k++)
        tabulate_needed(in, &rows[k - 1], needed + (size_t)k * GAP_STEPS);
    if (status == UF_OK)
        status = find_basins(work, in, needed, narrow, score, &basins, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)basins.count + 1, sizeof *sums, "spots", &sums, error);
    if (status == UF_OK)
        status = uf_take(work, (size_t)basins.count + 1, sizeof **spots, "spots", spots, error);
    if (status != UF_OK)
        return status;
    find_tops(in, score, basins, sums);
    status = grow_regions(work, in, narrow, basins, sums, error);
    if (status == UF_OK)
        *count = collect(in, needed, sums, basins.count, *spots);
    return status;
}

/* The list outlives the arena's scratch, so it has memory of its own. */
static uf_status keep(const uf_spot *found, int count, uf_spot **spots, uf_error *error)
{
    *spots = malloc(((size_t)count + 1) * sizeof **spots);
    if (!*spots)
        return uf_fail_memory(error, "spots");
    memcpy(*spots, found, (size_t)count * sizeof **spots);
    return UF_OK;
}

uf_status uf_measure_spots(uf_work *work, const uf_measure_input *input, uf_cell *rows, uf_spot **spots, int *count,
                           uf_error *error)
{
    uf_spot *found;
    *count = 0;
    *spots = NULL;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = find_spots(work, input, rows, &found, count, error);
    if (status == UF_OK)
        status = fill_cells(work, rows, input->cells->labels.count, found, *count, error);
    if (status == UF_OK)
        status = keep(found, *count, spots, error);
    uf_arena_back(&work->arena, mark);
    return status;
}
