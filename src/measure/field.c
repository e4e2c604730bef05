/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>

#include "measure/measure.h"
#include "optics/detection.h"

static double sum_or_zero(double sum, double value)
{
    return isnan(value) ? sum : sum + value;
}

/* ---- flags ----------------------------------------------------------------------------------- */

static const double least_near_focus = 0.35, least_wide_focus = 0.25, most_unevenness = 0.25, least_free = 0.05;
static const double least_signal_sigmas = 10, most_too_bright = 0.2, swapped_variation = 1.5;

typedef double cell_value(const uf_measure_input *input, const uf_cell *row);

static double too_bright_share(const uf_measure_input *input, const uf_cell *row)
{
    (void)input;
    return row->above_reference_fraction;
}

/* The weaker channel's mean over its noise, at the scale of the point spread function. */
static double signal_sigmas(const uf_measure_input *input, const uf_cell *row)
{
    double near = row->near_mean_adu / uf_smoothed_sd(input->plan, input->near, 0);
    double wide = row->wide_mean_adu / uf_smoothed_sd(input->plan, input->wide, 0);
    return near < wide ? near : wide;
}

/* How much more unevenly wide is spread over the cell than near. */
static double variation_ratio(const uf_measure_input *input, const uf_cell *row)
{
    (void)input;
    return row->wide_variation / row->near_variation;
}

/* Share of cells whose value exceeds the limit: more than half of them is more than half of the field. */
static int most_cells_exceed(const uf_measure_input *input, const uf_cell *rows, int count, cell_value *value,
                             double limit)
{
    int above = 0;
    for (int k = 0; k < count; k++)
        above += value(input, &rows[k]) > limit;
    return 2 * above > count;
}

static double free_share(uf_labels labels)
{
    int64_t free = 0;
    for (int y = 0; y < labels.height; y++)
        for (int x = 0; x < labels.width; x++)
            free += !uf_labels_row(labels, y)[x];
    return (double)free / ((double)labels.width * labels.height);
}

static uf_flags flag_if(int condition, uf_flag flag)
{
    return condition ? 1u << flag : 0;
}

/* What the channels are like, cells or not. */
static uf_flags channel_flags(const uf_measure_input *input, const uf_field *field)
{
    const uf_channel *near = input->near, *wide = input->wide;
    return flag_if(near->saturated_fraction > 0 || wide->saturated_fraction > 0, UF_FLAG_SATURATED) |
           flag_if(near->clipped_fraction > 0.01 || wide->clipped_fraction > 0.01, UF_FLAG_CLIPPED) |
           flag_if(near->display_scaled || wide->display_scaled, UF_FLAG_DISPLAY_SCALED) |
           flag_if(input->plan->has_gap && fabs(input->plan->layered_effect_nm) > 3, UF_FLAG_LAYERED_EFFECT) |
           flag_if(input->plan->bench.na_effective <= input->plan->bench.cell_n, UF_FLAG_NOT_REFLECTED) |
           flag_if(field->near_unevenness > most_unevenness || field->wide_unevenness > most_unevenness,
                   UF_FLAG_UNEVEN);
}

/* What may be why nothing was found: an overexposed field is no count of zero. */
static const uf_flags told_of_empty = 1u << UF_FLAG_SATURATED | 1u << UF_FLAG_CLIPPED | 1u << UF_FLAG_DISPLAY_SCALED;

/* An empty field is empty, and flags that are about cells are not for it. */
static uf_flags field_flags(const uf_measure_input *input, const uf_cell *rows, int count, const uf_field *field)
{
    if (!count)
        return 1u << UF_FLAG_EMPTY | (channel_flags(input, field) & told_of_empty);
    /* A membrane's wide image is the evener one; cytosol is not. */
    int swapped = input->plan->signal == UF_SIGNAL_RATIO &&
                  most_cells_exceed(input, rows, count, variation_ratio, swapped_variation);
    int too_bright = most_cells_exceed(input, rows, count, too_bright_share, most_too_bright);
    return channel_flags(input, field) |
           flag_if(field->near_focus < least_near_focus || field->wide_focus < least_wide_focus,
                   UF_FLAG_OUT_OF_FOCUS) |
           flag_if(free_share(input->cells->labels) < least_free, UF_FLAG_CROWDED) |
           flag_if(!most_cells_exceed(input, rows, count, signal_sigmas, least_signal_sigmas), UF_FLAG_LOW_SIGNAL) |
           flag_if(swapped, UF_FLAG_CHANNELS_SWAPPED) | flag_if(too_bright && !swapped, UF_FLAG_NEAR_TOO_BRIGHT);
}

void uf_measure_field(const uf_measure_input *input, const uf_cell *rows, int spots, uf_field *field)
{
    uf_labels labels = input->cells->labels;
    double px = input->plan->pixel_size_um, contact = 0;
    int reported = 0;
    field->cells = labels.count;
    field->cells_counted = 0;
    field->spots = spots;
    field->field_area_mm2 = (double)labels.width * labels.height * px * px * 1e-6;
    for (int k = 0; k < labels.count; k++) {
        field->cells_counted += rows[k].box_x0 > 0 && rows[k].box_y0 > 0;
        contact = sum_or_zero(contact, rows[k].contact_area_um2);
        reported += !isnan(rows[k].contact_area_um2);
    }
    field->cells_per_mm2 = field->cells_counted / field->field_area_mm2;
    field->contact_um2_per_mm2 = reported || !labels.count ? contact / field->field_area_mm2 : (double)NAN;
    field->near_background_adu = input->near->background_adu;
    field->wide_background_adu = input->wide->background_adu;
    field->near_noise_adu = input->near->noise_adu;
    field->wide_noise_adu = input->wide->noise_adu;
    field->near_saturated_fraction = input->near->saturated_fraction;
    field->wide_saturated_fraction = input->wide->saturated_fraction;
    /* What a series finds for itself is no reference that anything was measured against. */
    int has_reference = input->plan->has_gap && !input->plan->series.count;
    field->reference_ratio = has_reference ? input->plan->reference_ratio : (double)NAN;
    field->depth_nm = input->plan->depth_nm;
    field->flags |= field_flags(input, rows, labels.count, field);
}
