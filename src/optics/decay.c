/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "optics/decay.h"

#include <math.h>

#include "base/text.h"

/* The table runs from ln = 0 to ln = -16, an excitation of 1e-7: far below any camera's detection limit. */
static const double deepest_ln = 16.0;

void uf_decay_exponential(uf_decay *decay, double depth_nm)
{
    double step = deepest_ln / (UF_DECAY_NODES - 1);
    decay->depth_nm = depth_nm;
    decay->lookup.first_ln = 0.0f;
    decay->lookup.inverse_step = (float)(1.0 / step);
    for (int k = 0; k < UF_DECAY_NODES; k++)
        decay->lookup.gap_nm[k] = (float)(depth_nm * step * k);
}

static double ln_between(const uf_decay_points *points, double gap_nm)
{
    int k = 1;
    while (k < points->count - 1 && points->gap_nm[k] < gap_nm)
        k++;
    double share = (gap_nm - points->gap_nm[k - 1]) / (points->gap_nm[k] - points->gap_nm[k - 1]);
    return points->ln_relative[k - 1] + share * (points->ln_relative[k] - points->ln_relative[k - 1]);
}

static double field_at(const uf_bench *bench, const uf_decay_law *law, double gap_nm)
{
    switch (law->model) {
    case UF_FIELD_LAYERED:
        return uf_layered_intensity(bench, gap_nm) / uf_layered_intensity(bench, 0);
    case UF_FIELD_TABLE:
        return exp(ln_between(&law->points, gap_nm));
    case UF_FIELD_EXPONENTIAL:
        break;
    }
    return exp(-gap_nm / uf_depth_nm(bench->wavelength_nm, bench->na_effective, bench->medium_n));
}

double uf_relative_excitation(const uf_bench *bench, const uf_decay_law *law, double gap_nm)
{
    const uf_stray *stray = &law->stray;
    double scattered = stray->fraction > 0 ? stray->fraction * exp(-gap_nm / stray->depth_nm) : 0;
    return (1 - stray->fraction) * field_at(bench, law, gap_nm) + scattered;
}

static const double walk_nm = 0.25, farthest_nm = 20000;

uf_status uf_decay_make(uf_decay *decay, const uf_bench *bench, const uf_decay_law *law, uf_error *error)
{
    uf_gap_lookup *lookup = &decay->lookup;
    double step = deepest_ln / (UF_DECAY_NODES - 1), gap = 0, ln = 0;
    decay->depth_nm = uf_round_digits(uf_depth_nm(bench->wavelength_nm, bench->na_effective, bench->medium_n), 12);
    lookup->first_ln = 0.0f;
    lookup->inverse_step = (float)(1.0 / step);
    lookup->gap_nm[0] = 0.0f;
    int node = 1;
    while (node < UF_DECAY_NODES && gap < farthest_nm) {
        double next = log(uf_relative_excitation(bench, law, gap + walk_nm));
        if (!(next < ln))
            return uf_fail(error, UF_INPUT,
                           "the excitation does not fall with the gap at %.4g nm in this model; a steeper angle or "
                           "model = exponential is needed",
                           gap);
        for (; node < UF_DECAY_NODES && next <= -step * node; node++)
            lookup->gap_nm[node] = (float)uf_round_digits(gap + walk_nm * (-step * node - ln) / (next - ln), 9);
        gap += walk_nm;
        ln = next;
    }
    /* Beyond any gap that matters the last slope goes on. */
    for (; node < UF_DECAY_NODES; node++)
        lookup->gap_nm[node] = 2 * lookup->gap_nm[node - 1] - lookup->gap_nm[node - 2];
    return UF_OK;
}

double uf_decay_gap(const uf_decay *decay, double ln_relative)
{
    const uf_gap_lookup *lookup = &decay->lookup;
    double at = ((double)lookup->first_ln - ln_relative) * (double)lookup->inverse_step;
    int last = UF_DECAY_NODES - 2;
    int node = !(at > 0) ? 0 : at > last ? last : (int)at; /* NaN stays NaN by the last line */
    double low = (double)lookup->gap_nm[node], high = (double)lookup->gap_nm[node + 1];
    return low + (at - node) * (high - low);
}

double uf_decay_ln(const uf_decay *decay, double gap_nm)
{
    const uf_gap_lookup *lookup = &decay->lookup;
    int low = 0, high = UF_DECAY_NODES - 1;
    while (high - low > 1) {
        int middle = (low + high) / 2;
        if ((double)lookup->gap_nm[middle] <= gap_nm)
            low = middle;
        else
            high = middle;
    }
    double a = (double)lookup->gap_nm[low], b = (double)lookup->gap_nm[low + 1];
    double at = low + (gap_nm - a) / (b - a);
    return (double)lookup->first_ln - at / (double)lookup->inverse_step;
}

double uf_layered_effect_nm(const uf_bench *bench, double gap_nm)
{
    double depth = uf_depth_nm(bench->wavelength_nm, bench->na_effective, bench->medium_n);
    double relative = uf_layered_intensity(bench, gap_nm) / uf_layered_intensity(bench, 0.0);
    return -depth * log(relative) - gap_nm;
}
