/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * near, wide -> offset, dark, bad pixels, flat -> background and noise -> shift (the wide image is resampled,
 * never the near) -> cells -> ratio -> gap -> contact, spots -> rows. Data flows one way.
 */
#include "run/field.h"

#include <math.h>
#include <stdlib.h>

#include "correct/halo.h"
#include "correct/quality.h"
#include "correct/shift.h"
#include "fit/robust.h"
#include "gap/gap.h"
#include "gap/series.h"
#include "image/smooth.h"
#include "segment/segment.h"

/* Beyond this distance from cells their halo is gone from the background. */
static const double clear_um = 4.0;

/* A field's own shift may differ this far from the bench's before it is worth a look. */
static const double shift_tolerance_px = 1.0;

uf_status uf_field_correct(uf_work *work, const uf_raw_channel *raw, uf_channel *channel, uf_error *error)
{
    uf_status status = uf_correct_channel(work, raw, channel, error);
    return status == UF_OK ? uf_background_first(work, channel, error) : status;
}

/* Which shift to use: the bench's, or this field's own where asked for and where it can be trusted. */
static void choose_shift(const uf_settings *s, const uf_shift_estimate *found, uf_field *field)
{
    field->shift_dx_px = s->shift.dx_px;
    field->shift_dy_px = s->shift.dy_px;
    field->shift_score = (double)NAN;
    if (s->shift.estimate == UF_ESTIMATE_NO)
        return;
    field->shift_score = found->score;
    double differs = hypot(found->dx_px - s->shift.dx_px, found->dy_px - s->shift.dy_px);
    if (found->trusted && s->shift.estimate == UF_ESTIMATE_YES) {
        field->shift_dx_px = found->dx_px;
        field->shift_dy_px = found->dy_px;
    } else if (found->trusted && differs > shift_tolerance_px)
        field->flags |= 1u << UF_FLAG_SHIFT_DIFFERS;
    else if (!found->trusted && s->shift.estimate == UF_ESTIMATE_YES)
        field->flags |= 1u << UF_FLAG_SHIFT_UNSURE;
}

/* The faults of a pixel after the shift: those of the pixels around the place it was interpolated at, the worst first. Beyond
 * the border nothing is known to be wrong. */
static uint8_t shifted_fault(uf_mask mask, int x, int y)
{
    uint8_t fault = UF_PIXEL_FINE;
    for (int v = y; v <= y + 1; v++)
        for (int u = x; u <= x + 1; u++) {
            int inside = u >= 0 && v >= 0 && u < mask.width && v < mask.height;
            uint8_t here = inside ? uf_mask_row(mask, v)[u] : (uint8_t)UF_PIXEL_FINE;
            fault = here == UF_PIXEL_SATURATED || fault == UF_PIXEL_FINE ? here : fault;
        }
    return fault;
}

/* Which pixels lie must move with the image. A shift by whole pixels has one source, not four. */
static uf_status shift_faults(uf_work *work, double dx, double dy, uf_mask *mask, uf_error *error)
{
    uf_mask before = *mask;
    if (!before.data)
        return UF_OK;
    uf_status status = uf_mask_take(work, before.width, before.height, mask, error);
    int whole = dx == floor(dx) && dy == floor(dy), x0 = (int)floor(dx), y0 = (int)floor(dy);
    for (int y = 0; status == UF_OK && y < before.height; y++)
        for (int x = 0; x < before.width; x++) {
            int inside = x + x0 >= 0 && y + y0 >= 0 && x + x0 < before.width && y + y0 < before.height;
            uf_mask_row(*mask, y)[x] = !whole   ? shifted_fault(before, x + x0, y + y0)
                                       : inside ? uf_mask_row(before, y + y0)[x + x0]
                                                : (uint8_t)UF_PIXEL_FINE;
        }
    return status;
}

static uf_status align(uf_work *work, const uf_settings *settings, uf_field_result *r, uf_error *error)
{
    uf_shift_estimate found = {0};
    uf_status status = UF_OK;
    if (r->one_image) {
        r->field.shift_dx_px = r->field.shift_dy_px = r->field.shift_score = (double)NAN;
        return UF_OK;
    }
    if (settings->shift.estimate != UF_ESTIMATE_NO)
        status = uf_shift_find(work, &r->near, &r->wide, &found, error);
    if (status != UF_OK)
        return status;
    choose_shift(settings, &found, &r->field);
    if (r->field.shift_dx_px == 0 && r->field.shift_dy_px == 0)
        return UF_OK;
    status = uf_shift(work, r->wide.image, r->field.shift_dx_px, r->field.shift_dy_px, r->wide.image, error);
    if (status == UF_OK)
        status = shift_faults(work, r->field.shift_dx_px, r->field.shift_dy_px, &r->wide.saturated, error);
    uf_plane nuclei = r->nuclei.image;
    if (status == UF_OK && nuclei.data)
        status = uf_shift(work, nuclei, r->field.shift_dx_px, r->field.shift_dy_px, nuclei, error);
    return status;
}

static uf_status find_cells(uf_work *work, const uf_plan *plan, const uf_settings *settings, uf_field_result *r,
                            uf_error *error)
{
    double clear_px = clear_um / plan->pixel_size_um;
    uf_labels nuclei = {0};
    uf_status status = UF_OK;
    if (r->nuclei.image.data)
        status = uf_segment_nuclei(work, &r->nuclei, plan->pixel_size_um, &nuclei, error);
    if (status == UF_OK)
        status = uf_segment(work, &r->wide, settings, plan->pixel_size_um, r->mask, nuclei, &r->cells, error);
    if (status == UF_OK)
        status = uf_background_refine(work, &r->cells, clear_px, &r->near, error);
    for (int k = 0; status == UF_OK && k < plan->series.count; k++)
        status = uf_background_refine(work, &r->cells, clear_px, &r->pages[k], error);
    if (status == UF_OK)
        status = uf_background_refine(work, &r->cells, clear_px, &r->wide, error);
    return status;
}

/* Haze is the wide image's own light fallen beside the cells; the pedestal is the same light under the near image. */
static uf_status remove_halos(uf_work *work, const uf_plan *plan, uf_field_result *r, uf_error *error)
{
    uf_halo haze, pedestal, of_page;
    uf_status status = uf_halo_remove(work, &r->wide, &r->cells, plan->pixel_size_um, &r->wide, &haze, error);
    for (int k = 0; status == UF_OK && k < plan->series.count; k++) {
        status = uf_halo_remove(work, &r->wide, &r->cells, plan->pixel_size_um, &r->pages[k], &of_page, error);
        if (k == plan->series.widest) { /* the near channel is this page: the same pixels */
            pedestal = of_page;
            r->near.background_adu = r->pages[k].background_adu;
            r->near.background_sd_adu = r->pages[k].background_sd_adu;
            r->near.halo_sd_adu = r->pages[k].halo_sd_adu;
        }
    }
    if (status == UF_OK && !plan->series.count)
        status = uf_halo_remove(work, &r->wide, &r->cells, plan->pixel_size_um, &r->near, &pedestal, error);
    if (status != UF_OK)
        return status;
    r->field.haze_fraction = haze.share;
    r->field.pedestal_fraction = pedestal.share;
    r->field.near_unevenness = pedestal.slope;
    r->field.wide_unevenness = haze.slope;
    return UF_OK;
}

/* Where blank fields say what shines without cells, that is the background, and not what is found between these cells. */
static void take_blank(const uf_settings *s, uf_channel_name which, uf_channel *channel)
{
    if (isnan(s->camera[which].background_adu))
        return;
    channel->background_adu = s->camera[which].background_adu;
    channel->background_sd_adu = s->camera[which].background_sd_adu;
}

static uf_status judge_focus(uf_work *work, const uf_plan *plan, uf_field_result *r, uf_error *error)
{
    double psf_px = plan->psf_sigma_um / plan->pixel_size_um;
    uf_status status = uf_focus_of(work, &r->near, r->cells.labels, psf_px, &r->field.near_focus, error);
    return status == UF_OK ? uf_focus_of(work, &r->wide, r->cells.labels, psf_px, &r->field.wide_focus, error)
                           : status;
}

/* ---- gaps ------------------------------------------------------------------------------------ */

/* Beyond this the pages do not obey the field in force: an angle, index or power is wrong. */
static const double implausible_chi_square = 3.0;

/* The median reduced chi-square over a lattice of resolved pixels. */
static uf_status judge_series(uf_work *work, uf_field_result *r, uf_error *error)
{
    enum { SAMPLE = 1 << 16 };
    const uf_gap_map *gaps = &r->gaps;
    int width = gaps->state.width, height = gaps->state.height;
    int step = (int)ceil(sqrt((double)width * height / SAMPLE));
    size_t count = 0;
    double *values;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = uf_take(work, SAMPLE, sizeof *values, "the series", &values, error);
    if (status != UF_OK)
        return status;
    for (int y = step / 2; y < height; y += step)
        for (int x = step / 2; x < width && count < SAMPLE; x += step) {
            double value = (double)uf_plane_row(gaps->chi_square, y)[x];
            if (uf_mask_row(gaps->state, y)[x] == UF_GAP_RESOLVED && !isnan(value))
                values[count++] = value;
        }
    r->field.series_chi_square = uf_median(values, count);
    if (r->field.series_chi_square > implausible_chi_square)
        r->field.flags |= 1u << UF_FLAG_SERIES_MISFIT;
    uf_arena_back(&work->arena, mark);
    return UF_OK;
}

/* Gaps by ratio or by series. A reference that is found in the field is what `own` gets beside all else of the plan. */
static uf_status find_gaps(uf_work *work, const uf_plan *plan, double detection_sigma, uf_field_result *r,
                           uf_plan *own, uf_error *error)
{
    *own = *plan;
    r->field.series_chi_square = (double)NAN;
    if (!plan->series.count)
        return uf_gap_find(work, own, detection_sigma, &r->near, &r->wide, &r->cells, &r->gaps, error);
    uf_status status = uf_gap_find_series(work, own, detection_sigma, r->pages, &r->wide, &r->cells, &r->gaps, error);
    return status == UF_OK ? judge_series(work, r, error) : status;
}

/* Where no gap is reported none is drawn or written either. */
static void forget_gaps(uf_gap_map *gaps)
{
    for (int y = 0; y < gaps->gap_nm.height; y++)
        for (int x = 0; x < gaps->gap_nm.width; x++)
            uf_plane_row(gaps->gap_nm, y)[x] = NAN;
}

static uf_status measure(uf_work *work, const uf_plan *plan, const uf_settings *settings, uf_field_result *r,
                         uf_error *error)
{
    uf_measure_input in = {plan, settings, &r->near, &r->wide, &r->cells, &r->gaps};
    int spots = 0;
    uf_status status = uf_measure_cells(work, &in, &r->rows, &r->contact, error);
    if (status == UF_OK)
        status = uf_measure_spots(work, &in, r->rows, &r->spots, &spots, error);
    if (status == UF_OK)
        uf_measure_field(&in, r->rows, spots, &r->field);
    if (status == UF_OK && !plan->has_gap)
        forget_gaps(&r->gaps);
    return status;
}

uf_status uf_field_run(uf_work *work, const uf_plan *plan, const uf_settings *settings, uf_field_result *result,
                       uf_error *error)
{
    uf_plan own;
    uf_status status = align(work, settings, result, error);
    if (status == UF_OK)
        status = find_cells(work, plan, settings, result, error);
    if (status == UF_OK)
        status = remove_halos(work, plan, result, error);
    if (status == UF_OK && !plan->series.count) {
        take_blank(settings, UF_NEAR, &result->near);
        take_blank(settings, UF_WIDE, &result->wide);
    }
    if (status == UF_OK)
        status = judge_focus(work, plan, result, error);
    if (status == UF_OK)
        status = find_gaps(work, plan, settings->contact.detection_sigma, result, &own, error);
    if (status == UF_OK)
        status = measure(work, &own, settings, result, error);
    result->reference_ratio = status == UF_OK ? own.reference_ratio : (double)NAN;
    /* An empty field has no shift to be sure of. */
    if (status == UF_OK && !result->field.cells)
        result->field.flags &= ~(1u << UF_FLAG_SHIFT_UNSURE | 1u << UF_FLAG_SHIFT_DIFFERS);
    if (status == UF_OK)
        result->field.status = result->field.flags ? UF_FIELD_FLAGGED : UF_FIELD_OK;
    return status;
}

void uf_field_result_free(uf_field_result *result)
{
    free(result->spots);
    result->spots = NULL;
}
