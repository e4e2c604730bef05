/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>

#include "measure/measure.h"

static double sum_or_zero(double sum, double value)
{
    return isnan(value) ? sum : sum + value;
}

void uf_measure_field(const uf_measure_input *input, const uf_cell *rows, int spots, uf_field *field)
{
    uf_labels labels = input->cells->labels;
    double px = input->plan->pixel_size_um, contact = 0;
    field->cells = labels.count;
    field->cells_counted = 0;
    field->spots = spots;
    field->field_area_mm2 = (double)labels.width * labels.height * px * px * 1e-6;
    for (int k = 0; k < labels.count; k++) {
        field->cells_counted += rows[k].box_x0 > 0 && rows[k].box_y0 > 0;
        contact = sum_or_zero(contact, rows[k].contact_area_um2);
    }
    field->cells_per_mm2 = field->cells_counted / field->field_area_mm2;
    field->contact_um2_per_mm2 = contact / field->field_area_mm2;
    field->near_background_adu = input->near->background_adu;
    field->wide_background_adu = input->wide->background_adu;
    field->near_noise_adu = input->near->noise_adu;
    field->wide_noise_adu = input->wide->noise_adu;
    field->near_saturated_fraction = input->near->saturated_fraction;
    field->wide_saturated_fraction = input->wide->saturated_fraction;
    field->near_focus = field->wide_focus = field->near_unevenness = field->wide_unevenness = (double)NAN;
    field->pedestal_fraction = (double)NAN;
    /* What a series finds for itself is no reference that anything was measured against. */
    field->reference_ratio = input->plan->series.count ? (double)NAN : input->plan->reference_ratio;
    field->depth_nm = input->plan->depth_nm;
    if (!labels.count)
        field->flags |= 1u << UF_FLAG_EMPTY;
    if (input->near->saturated_fraction > 0 || input->wide->saturated_fraction > 0)
        field->flags |= 1u << UF_FLAG_SATURATED;
    if (input->near->display_scaled || input->wide->display_scaled)
        field->flags |= 1u << UF_FLAG_DISPLAY_SCALED;
    if (fabs(input->plan->layered_effect_nm) > 3)
        field->flags |= 1u << UF_FLAG_LAYERED_EFFECT;
}
