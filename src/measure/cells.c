/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>
#include <string.h>

#include "base/constants.h"
#include "fit/robust.h"
#include "image/components.h"
#include "measure/intervals.h"
#include "measure/measure.h"
#include "measure/shape.h"
#include "optics/detection.h"

typedef struct cell_job {
    const uf_measure_input *in;
    uf_mask contact;
    uf_box *boxes;
    float *gaps, *core_gaps; /* resolved gaps of one cell */
    double um2;              /* of one pixel */
} cell_job;

/* Sums over the pixels of one cell. */
typedef struct tally {
    int64_t pixels, resolved, core_pixels, core_resolved, above_reference, saturated, clipped, rim, touching;
    int64_t focal, close, far;
    double dye, volume_nm;
} tally;

static int on_image_edge(uf_box box, uf_labels labels)
{
    return box.x0 == 0 || box.y0 == 0 || box.x1 == labels.width || box.y1 == labels.height;
}

/* ---- one pass over the pixels ---------------------------------------------------------------- */

static int histogram_bin(float gap)
{
    float bin = floorf((gap - (float)UF_GAP_HISTOGRAM_FROM_NM) / (float)UF_GAP_BIN_NM);
    return bin < 0.0f ? 0 : bin >= (float)(UF_GAP_BINS - 1) ? UF_GAP_BINS - 1 : (int)bin;
}

static void tally_gap(const cell_job *job, float gap, float noise_gap, tally *t, uf_cell *row)
{
    const uf_settings *s = job->in->settings;
    row->gap_histogram[histogram_bin(gap)]++;
    t->volume_nm += (double)gap;
    if ((double)gap <= s->contact.focal_nm)
        t->focal++;
    else if ((double)gap <= s->contact.close_nm)
        t->close++;
    else
        t->far++;
    if (gap < noise_gap)
        t->above_reference++;
}

/* 1 when a direct neighbour belongs to another cell. */
static int touches_other(uf_labels labels, int x, int y, int label)
{
    const int32_t *row = uf_labels_row(labels, y);
    int left = x ? row[x - 1] : 0, right = x + 1 < labels.width ? row[x + 1] : 0;
    int above = y ? uf_labels_row(labels, y - 1)[x] : 0;
    int below = y + 1 < labels.height ? uf_labels_row(labels, y + 1)[x] : 0;
    return (left && left != label) || (right && right != label) || (above && above != label) ||
           (below && below != label);
}

static int has_fault(const uf_measure_input *in, int x, int y, uf_pixel_fault fault)
{
    const uf_mask near = in->near->saturated, wide = in->wide->saturated;
    return (near.data && uf_mask_row(near, y)[x] == fault) || (wide.data && uf_mask_row(wide, y)[x] == fault);
}

static tally tally_cell(cell_job *job, int label, uf_cell *row)
{
    const uf_measure_input *in = job->in;
    uf_box box = job->boxes[label];
    uf_labels labels = in->cells->labels;
    float core_px = (float)(2.0 * 2.3548 * in->plan->psf_sigma_um / in->plan->pixel_size_um) + 0.5f;
    float rim_px = (float)(in->settings->contact.rim_um / in->plan->pixel_size_um) + 0.5f;
    float below_zero = (float)(-3.0 * uf_gap_noise_nm(in->plan, in->plan->restore_variance, in->near, in->wide,
                                                      row->near_mean_adu + 1e-9, row->dye_mean_adu + 1e-9));
    tally t = {0};
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *label_row = uf_labels_row(labels, y);
        const float *gap = uf_plane_row(in->gaps->gap_nm, y), *distance = uf_plane_row(in->cells->distance_px, y);
        const uint8_t *state = uf_mask_row(in->gaps->state, y);
        for (int x = box.x0; x < box.x1; x++) {
            if (label_row[x] != label)
                continue;
            int is_core = distance[x] > core_px, is_resolved = state[x] == UF_GAP_RESOLVED;
            t.pixels++;
            t.dye += (double)uf_plane_row(in->gaps->dye_adu, y)[x];
            t.rim += distance[x] <= rim_px;
            t.core_pixels += is_core;
            t.saturated += has_fault(in, x, y, UF_PIXEL_SATURATED);
            t.clipped += has_fault(in, x, y, UF_PIXEL_CLIPPED);
            if (distance[x] < 1.5f)
                t.touching += touches_other(labels, x, y, label);
            if (!is_resolved)
                continue;
            job->gaps[t.resolved++] = gap[x];
            if (is_core)
                job->core_gaps[t.core_resolved++] = gap[x];
            tally_gap(job, gap[x], below_zero, &t, row);
        }
    }
    return t;
}

/* ---- contact patches ------------------------------------------------------------------------- */

typedef struct patches {
    double count, largest_px, contact_px, contact_rim_px, border_px;
} patches;

/* Pixels of one cell at or under the cutoff, as a mask of its box. */
static void mark_contact(const cell_job *job, int label, uf_mask mask)
{
    const uf_measure_input *in = job->in;
    uf_box box = job->boxes[label];
    float cutoff = (float)in->settings->contact.cutoff_nm;
    float bright = (float)in->settings->contact.near_threshold_adu; /* NaN: nothing is */
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *labels = uf_labels_row(in->cells->labels, y);
        const float *gap = uf_plane_row(in->gaps->gap_nm, y), *near = uf_plane_row(in->gaps->near_adu, y);
        const uint8_t *state = uf_mask_row(in->gaps->state, y);
        uint8_t *row = uf_mask_row(mask, y - box.y0);
        for (int x = box.x0; x < box.x1; x++) {
            int touches = in->plan->has_gap ? state[x] == UF_GAP_RESOLVED && gap[x] <= cutoff : near[x] >= bright;
            row[x - box.x0] = labels[x] == label && touches;
        }
    }
}

/* Length of the kept patches' borders: transitions along rows and columns times pi / 4 (Crofton, two directions). */
static double border_length(uf_labels patch_of, const int64_t *areas, double least)
{
    int64_t transitions = 0;
    for (int y = 0; y <= patch_of.height; y++) {
        const int32_t *here = y < patch_of.height ? uf_labels_row(patch_of, y) : NULL;
        const int32_t *above = y ? uf_labels_row(patch_of, y - 1) : NULL;
        int left = 0;
        for (int x = 0; x < patch_of.width; x++) {
            int kept = here && here[x] && (double)areas[here[x]] >= least;
            int kept_above = above && above[x] && (double)areas[above[x]] >= least;
            transitions += (kept != left) + (kept != kept_above);
            left = kept;
        }
        transitions += left;
    }
    return UF_PI / 4 * (double)transitions;
}

/* Keeps the patches that are large enough, in the field's contact map, and sums them up. */
static void keep_patches(const cell_job *job, int label, uf_labels patch_of, const int64_t *areas, patches *sums)
{
    uf_box box = job->boxes[label];
    double least = job->in->settings->contact.min_patch_um2 / job->um2;
    float rim_px = (float)(job->in->settings->contact.rim_um / job->in->plan->pixel_size_um) + 0.5f;
    for (int k = 1; k <= patch_of.count; k++)
        if ((double)areas[k] >= least) {
            sums->count++;
            sums->contact_px += (double)areas[k];
            sums->largest_px = fmax(sums->largest_px, (double)areas[k]);
        }
    sums->border_px = border_length(patch_of, areas, least);
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *patch = uf_labels_row(patch_of, y - box.y0);
        const float *distance = uf_plane_row(job->in->cells->distance_px, y);
        uint8_t *contact = uf_mask_row(job->contact, y);
        for (int x = box.x0; x < box.x1; x++) {
            int k = patch[x - box.x0];
            if (!k || (double)areas[k] < least)
                continue;
            contact[x] = 1;
            sums->contact_rim_px += distance[x] <= rim_px;
        }
    }
}

static uf_status find_patches(uf_work *work, const cell_job *job, int label, patches *sums, uf_error *error)
{
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_box box = job->boxes[label];
    uf_mask mask;
    uf_labels patch_of;
    int64_t *areas;
    *sums = (patches){0};
    uf_status status = uf_mask_take(work, box.x1 - box.x0, box.y1 - box.y0, &mask, error);
    if (status == UF_OK)
        status = uf_labels_take(work, mask.width, mask.height, &patch_of, error);
    if (status == UF_OK) {
        mark_contact(job, label, mask);
        status = uf_components(work, mask, UF_EIGHT_NEIGHBOURS, &patch_of, error);
    }
    if (status == UF_OK)
        status = uf_take(work, (size_t)patch_of.count + 1, sizeof *areas, "contact patches", &areas, error);
    if (status == UF_OK) {
        uf_label_areas(patch_of, areas);
        keep_patches(job, label, patch_of, areas, sums);
    }
    uf_arena_back(&work->arena, mark);
    return status;
}

/* ---- filling a row --------------------------------------------------------------------------- */

static void fill_shape(const cell_job *job, const uf_shape *shape, uf_cell *row)
{
    double px = job->in->plan->pixel_size_um;
    row->x_px = shape->x_px;
    row->y_px = shape->y_px;
    row->x_um = shape->x_px * px;
    row->y_um = shape->y_px * px;
    row->spread_area_um2 = shape->area_px * job->um2;
    row->perimeter_um = shape->perimeter_px * px;
    row->circularity = 2 * sqrt(UF_PI * shape->area_px) / shape->perimeter_px;
    row->caliper_max_um = shape->caliper_max_px * px;
    row->caliper_min_um = shape->caliper_min_px * px;
    row->elongation = shape->caliper_max_px / shape->caliper_min_px;
    /* The hull joins the middles of pixel edges, so a figure of a few pixels may exceed it. */
    row->convex_fill = fmin(1, shape->area_px / shape->hull_area_px);
    row->orientation_deg = shape->orientation_deg;
}

/* Miles 1974; Lantuejoul 1980. A cell as wide as the field cannot lie wholly inside another field. */
static void fill_edge(const cell_job *job, int label, uf_cell *row)
{
    uf_labels labels = job->in->cells->labels;
    uf_box box = job->boxes[label];
    double width = labels.width, height = labels.height;
    row->edge = on_image_edge(box, labels);
    row->edge_weight = (double)NAN;
    if (!row->edge)
        row->edge_weight = width * height / ((width - (box.x1 - box.x0)) * (height - (box.y1 - box.y0)));
    row->used = !row->edge || job->in->settings->cells.edge_cells == UF_EDGE_KEEP;
    row->used_reason = row->used ? NULL : "edge";
    row->flags |= row->edge ? 1u << UF_FLAG_EDGE : 0;
}

static void fill_gaps(cell_job *job, const tally *t, uf_cell *row)
{
    static const double q[] = {0.05, 0.25, 0.5, 0.75, 0.95};
    static const double half[] = {0.5};
    double values[5];
    uf_quantiles(job->gaps, (size_t)t->resolved, (size_t)t->pixels, q, values, 5);
    row->gap_p05_nm = values[0];
    row->gap_p25_nm = values[1];
    row->gap_median_nm = values[2];
    row->gap_p75_nm = values[3];
    row->gap_p95_nm = values[4];
    uf_quantiles(job->core_gaps, (size_t)t->core_resolved, (size_t)t->core_pixels, half, &row->gap_core_median_nm, 1);
    row->band_focal_um2 = (double)t->focal * job->um2;
    row->band_close_um2 = (double)t->close * job->um2;
    row->band_far_um2 = (double)t->far * job->um2;
    row->unresolved_um2 = (double)(t->pixels - t->resolved) * job->um2;
    row->cleft_volume_um3 = t->volume_nm * 1e-3 * job->um2;
    row->above_reference_fraction = (double)NAN;
    if (t->resolved && !job->in->plan->series.count)
        row->above_reference_fraction = (double)t->above_reference / (double)t->resolved;
    row->gap_kind = job->in->plan->is_relative ? UF_GAP_RELATIVE : UF_GAP_ABSOLUTE;
}

/* No gap, nothing that is made of gaps. */
static void blank_gaps(uf_cell *row)
{
    double *const values[] = {&row->gap_p05_nm,
                              &row->gap_p25_nm,
                              &row->gap_median_nm,
                              &row->gap_p75_nm,
                              &row->gap_p95_nm,
                              &row->gap_core_median_nm,
                              &row->band_focal_um2,
                              &row->band_close_um2,
                              &row->band_far_um2,
                              &row->unresolved_um2,
                              &row->cleft_volume_um3,
                              &row->above_reference_fraction,
                              &row->gap_random_nm,
                              &row->gap_systematic_nm,
                              &row->gap_limit_nm,
                              &row->contact_area_low_um2,
                              &row->contact_area_high_um2,
                              &row->attachment_fraction_low,
                              &row->attachment_fraction_high,
                              &row->contact_area_minus10_um2,
                              &row->contact_area_plus10_um2};
    for (size_t k = 0; k < sizeof values / sizeof values[0]; k++)
        *values[k] = (double)NAN;
    row->gap_kind = UF_GAP_NONE;
}

/* Whether contact is reported: not below the detection limit, and without a gap only by a threshold. */
static int has_contact(const cell_job *job, const uf_cell *row)
{
    return job->in->plan->has_gap ? !(row->flags >> UF_FLAG_TOO_DIM & 1u)
                                  : !isnan(job->in->settings->contact.near_threshold_adu);
}

static void fill_contact(const cell_job *job, const tally *t, const patches *p, uf_cell *row)
{
    double cutoff = job->in->settings->contact.cutoff_nm;
    row->rim_area_fraction = (double)t->rim / (double)t->pixels;
    if (!has_contact(job, row)) {
        row->contact_area_um2 = row->attachment_fraction = row->contact_area_minus10_um2 = (double)NAN;
        row->contact_area_plus10_um2 = row->contact_patches = row->largest_patch_um2 = (double)NAN;
        row->contact_in_rim_fraction = (double)NAN;
        return;
    }
    row->contact_area_um2 = p->contact_px * job->um2;
    row->attachment_fraction = p->contact_px / (double)t->pixels;
    row->contact_border_um = p->border_px * job->in->plan->pixel_size_um;
    row->contact_patches = p->count;
    row->largest_patch_um2 = p->largest_px * job->um2;
    row->contact_in_rim_fraction = p->contact_px > 0 ? p->contact_rim_px / p->contact_px : (double)NAN;
    /* Other cutoffs by the histogram, as differences, so that all three leave out the same small patches. */
    double at = uf_area_under(row, cutoff), px2 = job->um2;
    row->contact_area_minus10_um2 = fmax(0, row->contact_area_um2 - (at - uf_area_under(row, cutoff - 10)) * px2);
    row->contact_area_plus10_um2 = row->contact_area_um2 + (uf_area_under(row, cutoff + 10) - at) * px2;
}

static void fill_flags(const cell_job *job, const tally *t, uf_cell *row)
{
    if (t->saturated)
        row->flags |= 1u << UF_FLAG_SATURATED;
    /* A pixel or two at 0 is chance; a hundredth is a floor that takes noise off one side. */
    if (100 * t->clipped > t->pixels)
        row->flags |= 1u << UF_FLAG_CLIPPED;
    row->touching_um = (double)t->touching * job->in->plan->pixel_size_um;
    if (t->touching)
        row->flags |= 1u << UF_FLAG_TOUCHING;
    if (job->in->plan->has_gap && 4 * (t->pixels - t->resolved) > t->pixels)
        row->flags |= 1u << UF_FLAG_UNRESOLVED;
    row->gap_limit_nm = uf_gap_limit_nm(job->in->plan, job->in->settings->contact.detection_sigma, job->in->near,
                                        job->in->wide, t->dye / (double)t->pixels);
    if (job->in->plan->has_gap && row->gap_limit_nm < job->in->settings->contact.cutoff_nm)
        row->flags |= 1u << UF_FLAG_TOO_DIM;
    if (row->gap_limit_nm < 0) /* not even a dye that touches would be seen: no gap says where the limit lies */
        row->gap_limit_nm = (double)NAN;
}

/* Means first: the noise that tells "above the reference" from scatter is taken at them. */
static void fill_means(const cell_job *job, int label, uf_cell *row)
{
    const uf_measure_input *in = job->in;
    uf_box box = job->boxes[label];
    double near = 0, wide = 0, dye = 0, near2 = 0, wide2 = 0, pixels = 0, background = in->wide->background_adu;
    for (int y = box.y0; y < box.y1; y++) {
        const int32_t *labels = uf_labels_row(in->cells->labels, y);
        const float *near_row = uf_plane_row(in->gaps->near_adu, y), *wide_row = uf_plane_row(in->wide->image, y);
        for (int x = box.x0; x < box.x1; x++)
            if (labels[x] == label) {
                double n = (double)near_row[x], w = (double)wide_row[x] - background;
                near += n;
                wide += w;
                dye += (double)uf_plane_row(in->gaps->dye_adu, y)[x];
                near2 += n * n;
                wide2 += w * w;
                pixels++;
            }
    }
    row->near_mean_adu = near / pixels;
    row->wide_mean_adu = wide / pixels;
    row->dye_mean_adu = dye / pixels;
    row->near_variation = sqrt(fmax(0, near2 / pixels - pow(near / pixels, 2))) / fabs(near / pixels);
    row->wide_variation = sqrt(fmax(0, wide2 / pixels - pow(wide / pixels, 2))) / fabs(wide / pixels);
    row->ratio_mean = row->near_mean_adu / row->wide_mean_adu;
}

/* ---- moved between the two images? ----------------------------------------------------------- */

static const double step_um = 0.8;     /* how far beside the outline is looked */
static const double moved_share = 0.6; /* of the rim's light that lies beside it */

enum { DIRECTIONS = 8 };

/* Near light just inside and just outside the outline, by direction. */
typedef struct strips {
    double inside[DIRECTIONS], outside[DIRECTIONS];
    int pixels[DIRECTIONS];
} strips;

/* One pixel of the cell: where a step leaves all cells, it and the place it leads to belong to that direction's strips. */
static void add_to_strips(const uf_measure_input *in, int x, int y, const int *dx, const int *dy, strips *s)
{
    uf_labels labels = in->cells->labels;
    for (int k = 0; k < DIRECTIONS; k++) {
        int u = x + dx[k], v = y + dy[k];
        if (u < 0 || v < 0 || u >= labels.width || v >= labels.height || uf_labels_row(labels, v)[u])
            continue;
        s->inside[k] += (double)uf_plane_row(in->gaps->near_adu, y)[x];
        s->outside[k] += (double)uf_plane_row(in->gaps->near_adu, v)[u];
        s->pixels[k]++;
    }
}

/* A still cell leaves only blur beside its outline; a dim rim tells nothing. */
static int has_moved(const cell_job *job, int label)
{
    const uf_measure_input *in = job->in;
    double step_px = step_um / in->plan->pixel_size_um;
    uf_box box = job->boxes[label];
    int dx[DIRECTIONS], dy[DIRECTIONS], moved = 0;
    strips s = {0};
    for (int k = 0; k < DIRECTIONS; k++) {
        dx[k] = (int)lround(step_px * cos(2 * UF_PI * k / DIRECTIONS));
        dy[k] = (int)lround(step_px * sin(2 * UF_PI * k / DIRECTIONS));
    }
    for (int y = box.y0; y < box.y1; y += 2) {
        const int32_t *labels = uf_labels_row(in->cells->labels, y);
        const float *distance = uf_plane_row(in->cells->distance_px, y);
        for (int x = box.x0; x < box.x1; x += 2)
            if (labels[x] == label && (double)distance[x] <= step_px + 1)
                add_to_strips(in, x, y, dx, dy, &s);
    }
    for (int k = 0; k < DIRECTIONS; k++) {
        double least = 3 * in->near->noise_adu * s.pixels[k];
        moved |= s.outside[k] > least && s.outside[k] > moved_share * fmax(s.inside[k], least);
    }
    return moved;
}

/* ---- one cell -------------------------------------------------------------------------------- */

static uf_status measure_cell(uf_work *work, cell_job *job, int label, uf_cell *row, uf_error *error)
{
    uf_box box = job->boxes[label];
    uf_shape shape;
    patches p = {0};
    memset(row, 0, sizeof *row);
    row->cell = label;
    row->box_x0 = box.x0;
    row->box_y0 = box.y0;
    row->box_x1 = box.x1;
    row->box_y1 = box.y1;
    uf_status status = uf_shape_of(work, job->in->cells->labels, label, box, &shape, error);
    if (status != UF_OK)
        return status;
    fill_shape(job, &shape, row);
    fill_edge(job, label, row);
    fill_means(job, label, row);
    if (has_moved(job, label))
        row->flags |= 1u << UF_FLAG_MOVED;
    tally t = tally_cell(job, label, row);
    fill_flags(job, &t, row);
    fill_gaps(job, &t, row);
    if (has_contact(job, row)) /* what is not reported is not on the contact map either */
        status = find_patches(work, job, label, &p, error);
    if (status != UF_OK)
        return status;
    fill_contact(job, &t, &p, row);
    uf_fill_intervals(job->in, row);
    if (!job->in->plan->has_gap)
        blank_gaps(row);
    return UF_OK;
}

static size_t largest_area(uf_labels labels, const int64_t *areas)
{
    int64_t most = 1;
    for (int k = 1; k <= labels.count; k++)
        most = areas[k] > most ? areas[k] : most;
    return (size_t)most;
}

static uf_status take_scratch(uf_work *work, uf_labels labels, cell_job *job, uf_error *error)
{
    size_t places = (size_t)labels.count + 1;
    int64_t *areas;
    uf_status status = uf_take(work, places, sizeof *areas, "cells", &areas, error);
    if (status == UF_OK)
        status = uf_take(work, places, sizeof *job->boxes, "cells", &job->boxes, error);
    if (status != UF_OK)
        return status;
    uf_label_areas(labels, areas);
    uf_label_boxes(labels, job->boxes);
    size_t most = largest_area(labels, areas);
    status = uf_take(work, most, sizeof(float), "cells", &job->gaps, error);
    return status == UF_OK ? uf_take(work, most, sizeof(float), "cells", &job->core_gaps, error) : status;
}

uf_status uf_measure_cells(uf_work *work, const uf_measure_input *input, uf_cell **rows, uf_mask *contact,
                           uf_error *error)
{
    uf_labels labels = input->cells->labels;
    double px = input->plan->pixel_size_um;
    cell_job job = {.in = input, .um2 = px * px};
    uf_status status = uf_take(work, (size_t)labels.count + 1, sizeof **rows, "cells", rows, error);
    if (status == UF_OK)
        status = uf_mask_take(work, labels.width, labels.height, contact, error);
    if (status != UF_OK)
        return status;
    for (int y = 0; y < contact->height; y++)
        memset(uf_mask_row(*contact, y), 0, (size_t)contact->width);
    job.contact = *contact;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    status = take_scratch(work, labels, &job, error);
    for (int k = 1; status == UF_OK && k <= labels.count; k++)
        status = measure_cell(work, &job, k, &(*rows)[k - 1], error);
    uf_arena_back(&work->arena, mark);
    return status;
}
