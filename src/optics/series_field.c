/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "optics/series_field.h"

#include <math.h>

/* ---- fields ---------------------------------------------------------------------------------- */

static double field_without_stray(const uf_bench *bench, uf_field_model model, double gap_nm)
{
    if (model == UF_FIELD_LAYERED)
        return uf_layered_intensity(bench, gap_nm);
    double depth = uf_depth_nm(bench->wavelength_nm, bench->na_effective, bench->medium_n);
    return uf_interface_intensity(bench) * exp(-gap_nm / depth);
}

double uf_absolute_excitation(const uf_field_kind *kind, double na_effective, double gap_nm)
{
    uf_bench page = *kind->bench;
    uf_stray stray = kind->stray;
    page.na_effective = na_effective;
    double field = field_without_stray(&page, kind->model, gap_nm);
    if (!(stray.fraction > 0))
        return field;
    double at_contact = field_without_stray(&page, kind->model, 0);
    return (1 - stray.fraction) * field + stray.fraction * at_contact * exp(-gap_nm / stray.depth_nm);
}

/* Derivative by differences of second order, one-sided at contact. */
static double slope_at(const uf_field_kind *kind, double na, double gap_nm)
{
    const double step = 0.05;
    double here = uf_absolute_excitation(kind, na, gap_nm), above = uf_absolute_excitation(kind, na, gap_nm + step);
    if (gap_nm >= step)
        return (above - uf_absolute_excitation(kind, na, gap_nm - step)) / (2 * step);
    return (-3 * here + 4 * above - uf_absolute_excitation(kind, na, gap_nm + 2 * step)) / (2 * step);
}

void uf_series_field(const uf_series *series, const uf_field_kind *kind, double gap_nm, double *field, double *slope)
{
    double from = gap_nm > 0 ? gap_nm : 0;
    for (int k = 0; k < series->count; k++) {
        double na = series->na_effective[k], value = uf_absolute_excitation(kind, na, from);
        double relative_slope = slope_at(kind, na, from) / value;
        field[k] = series->power[k] * value * exp(relative_slope * (gap_nm - from));
        slope[k] = field[k] * relative_slope;
    }
}

/* Cosine of the angle between the pages at a gap and at contact, weighed by photon noise at contact. */
static double likeness(const uf_series *series, const uf_field_kind *kind, double gap_nm)
{
    double both = 0, here = 0, contact = 0;
    for (int k = 0; k < series->count; k++) {
        double at_contact = series->power[k] * uf_absolute_excitation(kind, series->na_effective[k], 0);
        double at_gap = series->power[k] * uf_absolute_excitation(kind, series->na_effective[k], gap_nm);
        both += at_gap;
        here += at_gap * at_gap / at_contact;
        contact += at_contact;
    }
    return both / sqrt(here * contact);
}

double uf_series_farthest(const uf_series *series, const uf_field_kind *kind)
{
    const double step = 5;
    double gap = step, last = likeness(series, kind, gap);
    while (gap < UF_SERIES_FARTHEST_NM) {
        double next = likeness(series, kind, gap + step);
        if (next >= last)
            break;
        last = next;
        gap += step;
    }
    return gap;
}

/* ---- the fit --------------------------------------------------------------------------------- */

typedef struct moments {
    double tt, ts, ss; /* a, b, c of uf_series_gain */
} moments;

static moments moments_of(int count, const double *field, const double *slope, const double *weight)
{
    moments m = {0};
    for (int k = 0; k < count; k++) {
        m.tt += weight[k] * field[k] * field[k];
        m.ts += weight[k] * field[k] * slope[k];
        m.ss += weight[k] * slope[k] * slope[k];
    }
    return m;
}

void uf_series_gain(int count, const double *field, const double *slope, const double *weight, double *gain_nm)
{
    moments m = moments_of(count, field, slope, weight);
    double determinant = m.tt * m.ss - m.ts * m.ts;
    for (int k = 0; k < count; k++)
        gain_nm[k] = determinant > 0 ? weight[k] * (m.tt * slope[k] - m.ts * field[k]) / determinant : 0;
}

double uf_series_line(const uf_series *series, const uf_field_kind *kind, const double *signal)
{
    const uf_bench *b = kind->bench;
    double sx = 0, sy = 0, sxx = 0, sxy = 0, n = series->count;
    for (int k = 0; k < series->count; k++) {
        double na = series->na_effective[k];
        double x = 1 / uf_depth_nm(b->wavelength_nm, na, b->medium_n);
        double y = log(signal[k] / (series->power[k] * uf_absolute_excitation(kind, na, 0)));
        sx += x;
        sy += y;
        sxx += x * x;
        sxy += x * y;
    }
    return -(n * sxy - sx * sy) / (n * sxx - sx * sx);
}

/* Signals minus A times fields, with the best A; returns A. */
static double residuals(int count, const double *signal, const double *field, const double *weight, double *residual)
{
    double it = 0, tt = 0;
    for (int k = 0; k < count; k++) {
        it += weight[k] * signal[k] * field[k];
        tt += weight[k] * field[k] * field[k];
    }
    for (int k = 0; k < count; k++)
        residual[k] = signal[k] - it / tt * field[k];
    return it / tt;
}

double uf_series_fit(const uf_series *series, const uf_field_kind *kind, const double *signal, const double *weight,
                     double *reduced_chi_square)
{
    enum { MOST_STEPS = 50 };
    const double longest_nm = 30, close_nm = 1e-7;
    double field[UF_SERIES_MOST], slope[UF_SERIES_MOST], gain[UF_SERIES_MOST], residual[UF_SERIES_MOST];
    int count = series->count;
    double gap = uf_series_line(series, kind, signal), step = longest_nm, sum = 0;
    for (int turn = 0; turn < MOST_STEPS && fabs(step) > close_nm && !isnan(gap); turn++) {
        uf_series_field(series, kind, gap, field, slope);
        double a = residuals(count, signal, field, weight, residual);
        uf_series_gain(count, field, slope, weight, gain);
        step = 0;
        for (int k = 0; k < count; k++)
            step += gain[k] * residual[k] / a;
        step = fmax(-longest_nm, fmin(longest_nm, step));
        gap += step;
    }
    if (!reduced_chi_square || isnan(gap))
        return gap;
    uf_series_field(series, kind, gap, field, slope);
    (void)residuals(count, signal, field, weight, residual);
    for (int k = 0; k < count; k++)
        sum += weight[k] * residual[k] * residual[k];
    *reduced_chi_square = count > 2 ? sum / (count - 2) : (double)NAN;
    return gap;
}

/* ---- how sure -------------------------------------------------------------------------------- */

/* sqrt(sum of (gain_k sd_k)^2) with the noise's own weights; sd_k the noise, or a background's uncertainty. */
static double spread(const uf_series *series, const uf_field_kind *kind, const uf_channel *widest, double near_adu,
                     double gap_nm, int of_background)
{
    double field[UF_SERIES_MOST], slope[UF_SERIES_MOST], weight[UF_SERIES_MOST] = {0}, gain[UF_SERIES_MOST];
    double sum = 0;
    if (!(near_adu > 0))
        return (double)NAN;
    uf_series_field(series, kind, gap_nm, field, slope);
    double a = near_adu / field[series->widest];
    for (int k = 0; k < series->count; k++)
        weight[k] = 1 / fmax(1e-12, uf_noise_variance(&widest->noise, widest->background_adu + a * field[k]));
    uf_series_gain(series->count, field, slope, weight, gain);
    for (int k = 0; k < series->count; k++) {
        double sd2 = of_background ? widest->background_sd_adu * widest->background_sd_adu : 1 / weight[k];
        sum += gain[k] * gain[k] * sd2;
    }
    return sqrt(sum) / a;
}

double uf_series_noise_nm(const uf_series *series, const uf_field_kind *kind, const uf_channel *widest,
                          double near_adu, double gap_nm)
{
    return spread(series, kind, widest, near_adu, gap_nm, 0);
}

double uf_series_background_nm(const uf_series *series, const uf_field_kind *kind, const uf_channel *widest,
                               double near_adu, double gap_nm)
{
    return spread(series, kind, widest, near_adu, gap_nm, 1);
}

double uf_series_systematic(const uf_series *series, double gap_nm)
{
    double at = fmax(0, fmin(UF_SERIES_GAPS - 1, gap_nm / UF_SERIES_GAP_STEP_NM));
    int k = at >= UF_SERIES_GAPS - 1 ? UF_SERIES_GAPS - 2 : (int)at;
    return series->systematic_nm[k] + (at - k) * (series->systematic_nm[k + 1] - series->systematic_nm[k]);
}
