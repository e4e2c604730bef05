/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "measure/intervals.h"

#include <math.h>

#include "optics/detection.h"
#include "optics/systematic.h"

static const double two_sided_95 = 1.959963984540054;
/* Of an outline against background, and of the border between two touching cells, along their whole length at once
 * (seen on simulated scenes, `make truth`). */
static const double outline_sd_um = 0.03, border_sd_um = 0.25;

/* Blur that restoring leaves moves the border of contact by about this share of the point spread function's sigma,
 * inwards where contact is narrow (seen on simulated scenes with point spread functions of 0.75 to 1.5 of the assumed). */
static const double blur_share = 0.1;

double uf_area_under(const uf_cell *row, double gap_nm)
{
    double at = (gap_nm - UF_GAP_HISTOGRAM_FROM_NM) / UF_GAP_BIN_NM, sum = 0;
    for (int k = 0; k < UF_GAP_BINS && k < at; k++)
        sum += k + 1 <= at ? (double)row->gap_histogram[k] : (double)row->gap_histogram[k] * (at - k);
    return sum;
}

/* The near signal that a gap stands for in a cell of this mean dye. */
static double near_at(const uf_plan *plan, double gap_nm, double dye_adu)
{
    return dye_adu * plan->reference_ratio * exp(uf_decay_ln(&plan->decay, gap_nm));
}

/* 1 sigma that both backgrounds' uncertainties, halos included, move a gap by. */
static double background_part(const uf_measure_input *in, const uf_cell *row, double gap_nm)
{
    double dye = row->dye_mean_adu, near = near_at(in->plan, gap_nm, dye);
    if (!(dye > 0) || !(near > 0))
        return 0;
    if (in->plan->series.count) {
        uf_field_kind kind = {&in->plan->bench, in->plan->law.model, in->plan->law.stray};
        return uf_series_background_nm(&in->plan->series, &kind, in->near, near, gap_nm);
    }
    double of_near = hypot(in->near->background_sd_adu, in->near->halo_sd_adu) / near;
    double of_wide = hypot(in->wide->background_sd_adu, in->wide->halo_sd_adu) / dye;
    return uf_gap_per_ln(in->plan, gap_nm) * hypot(of_near, in->plan->signal == UF_SIGNAL_NEAR ? 0 : of_wide);
}

/* Area (1 sigma) by which the outline may be wrong. */
static double outline_area_sd(const uf_cell *row)
{
    return hypot(outline_sd_um * row->perimeter_um, border_sd_um * row->touching_um);
}

/* Area by which blur may have moved borders between close and far. */
static double blur_area_sd(const uf_measure_input *in, const uf_cell *row)
{
    return blur_share * in->plan->psf_sigma_um * row->contact_border_um;
}

/* What wrong area does to the median: area taken off one end moves the middle by half of it, area moved across the middle
 * by all of it; and the fewer pixels have gaps near the median, the farther it then goes. */
static double median_by_area(const uf_measure_input *in, const uf_cell *row)
{
    const double reach_nm = 10;
    double px = in->plan->pixel_size_um, gap = row->gap_median_nm;
    double around = uf_area_under(row, gap + reach_nm) - uf_area_under(row, gap - reach_nm);
    double area_per_nm = around * px * px / (2 * reach_nm),
           wrong = hypot(outline_area_sd(row) / 2, blur_area_sd(in, row));
    return area_per_nm > 0 ? fmin(wrong / area_per_nm, reach_nm) : reach_nm;
}

static void fill_gap_sds(const uf_measure_input *in, uf_cell *row)
{
    double gap = row->gap_median_nm, px = in->plan->pixel_size_um;
    row->gap_random_nm = row->gap_systematic_nm = (double)NAN;
    if (isnan(gap))
        return;
    double pixels = row->spread_area_um2 / (px * px);
    double near = near_at(in->plan, gap, row->dye_mean_adu);
    double noise = uf_gap_noise_nm(in->plan, in->plan->restore_variance, in->near, in->wide, near, row->dye_mean_adu);
    double median_part = isnan(noise) ? 0 : 1.2533 * noise / sqrt(pixels);
    row->gap_random_nm = hypot(hypot(median_part, background_part(in, row, gap)), median_by_area(in, row));
    row->gap_systematic_nm = uf_systematic_nm(in->plan, gap);
}

/* Pixels within a noise sigma of the cutoff fall to either side by chance: their number's standard deviation.
 * The variance of a sum of coin tosses over a band of even density n a nm and normal noise s is n s / sqrt pi.
 * The gaps of a series are smoothed, by a factor f of the variance: s sqrt f, tossed in groups of 1 / f. */
static double chance_pixels(const uf_measure_input *in, const uf_cell *row, double cutoff)
{
    double near = near_at(in->plan, cutoff, row->dye_mean_adu);
    double noise = uf_gap_noise_nm(in->plan, in->plan->restore_variance, in->near, in->wide, near, row->dye_mean_adu);
    double density = (uf_area_under(row, cutoff + 2) - uf_area_under(row, cutoff - 2)) / 4;
    double smoothing = in->plan->series.count ? uf_psf_smoothing(in->plan) : 1;
    return isnan(noise) ? 0 : sqrt(density * noise / sqrt(smoothing) / 1.7724538509055159);
}

void uf_fill_intervals(const uf_measure_input *in, uf_cell *row)
{
    double cutoff = in->settings->contact.cutoff_nm, um2 = in->plan->pixel_size_um * in->plan->pixel_size_um;
    fill_gap_sds(in, row);
    row->contact_area_low_um2 = row->contact_area_high_um2 = (double)NAN;
    row->attachment_fraction_low = row->attachment_fraction_high = (double)NAN;
    if (isnan(row->contact_area_um2))
        return;
    double moved = two_sided_95 * hypot(uf_systematic_nm(in->plan, cutoff), background_part(in, row, cutoff));
    double at = uf_area_under(row, cutoff);
    double below = (at - uf_area_under(row, cutoff - moved)) * um2;
    double above = (uf_area_under(row, cutoff + moved) - at) * um2;
    double chance = two_sided_95 * chance_pixels(in, row, cutoff) * um2;
    double edge_area = two_sided_95 * outline_area_sd(row);
    double outline = edge_area * row->attachment_fraction;
    double blur = two_sided_95 * blur_area_sd(in, row);
    double other = hypot(hypot(chance, outline), blur);
    double area = row->spread_area_um2, contact = row->contact_area_um2;
    row->contact_area_low_um2 = fmax(0, contact - hypot(below, other));
    row->contact_area_high_um2 = fmin(area + edge_area, contact + hypot(above, other));
    row->attachment_fraction_low = fmax(0, (contact - hypot(below, other)) / area);
    row->attachment_fraction_high = fmin(1, (contact + hypot(above, other)) / area);
}
