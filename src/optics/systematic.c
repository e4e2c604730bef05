/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "optics/systematic.h"

#include <math.h>

#include "base/text.h"
#include "optics/detection.h"

/* What the plan reads where the truth obeys `moved`, minus the truth; NaN where that has no evanescent field. */
static double misreading(const uf_plan *plan, const uf_bench *moved, double gap_nm)
{
    double zero = plan->reference_gap_nm;
    double here = uf_relative_excitation(moved, &plan->law, gap_nm);
    double at_reference = uf_relative_excitation(moved, &plan->law, zero);
    if (!(here > 0) || !(at_reference > 0) ||
        isnan(uf_depth_nm(moved->wavelength_nm, moved->na_effective, moved->medium_n)))
        return (double)NAN;
    return uf_decay_gap(&plan->decay, log(here / at_reference) + uf_decay_ln(&plan->decay, zero)) - gap_nm;
}

/* Half the difference of the readings with one input moved by its sd to either side. */
static double part_of(const uf_plan *plan, double na_sd, double medium_sd, double cell_sd, double gap_nm)
{
    double readings[2];
    for (int side = 0; side < 2; side++) {
        uf_bench moved = plan->bench;
        double sign = side ? 1 : -1;
        moved.na_effective += sign * na_sd;
        moved.medium_n += sign * medium_sd;
        moved.cell_n += sign * cell_sd;
        readings[side] = misreading(plan, &moved, gap_nm);
    }
    if (isnan(readings[0]))
        return isnan(readings[1]) ? 0 : readings[1];
    return isnan(readings[1]) ? readings[0] : (readings[1] - readings[0]) / 2;
}

/* n sin(angle)'s sd; of a measured depth the one that moves it so far, the medium's index being in the figure already. */
static double aperture_sd(const uf_bench *b)
{
    if (isnan(b->depth_sd_nm))
        return b->na_effective_sd;
    double depth = uf_depth_nm(b->wavelength_nm, b->na_effective, b->medium_n);
    double shorter = uf_na_from_depth(depth - b->depth_sd_nm, b->wavelength_nm, b->medium_n);
    double longer = uf_na_from_depth(depth + b->depth_sd_nm, b->wavelength_nm, b->medium_n);
    return isnan(shorter) ? b->na_effective - longer : (shorter - longer) / 2;
}

void uf_optics_sd_fill(uf_plan *plan)
{
    const uf_bench *b = &plan->bench;
    double na_sd = aperture_sd(b), medium_sd = isnan(b->depth_sd_nm) ? b->medium_n_sd : 0;
    double cell_sd = plan->law.model == UF_FIELD_LAYERED ? b->cell_n_sd : 0;
    for (int k = 0; k < UF_OPTICS_SD_GAPS; k++) {
        double gap = k * UF_OPTICS_SD_STEP_NM;
        double by_angle = part_of(plan, na_sd, 0, 0, gap), by_medium = part_of(plan, 0, medium_sd, 0, gap);
        double by_cell = part_of(plan, 0, 0, cell_sd, gap);
        plan->optics_sd_nm[k] =
            uf_round_digits(sqrt(by_angle * by_angle + by_medium * by_medium + by_cell * by_cell), 9);
    }
}

static double optics_sd_at(const uf_plan *plan, double gap_nm)
{
    double at = fmin(fmax(gap_nm / UF_OPTICS_SD_STEP_NM, 0), UF_OPTICS_SD_GAPS - 1);
    int k = at >= UF_OPTICS_SD_GAPS - 1 ? UF_OPTICS_SD_GAPS - 2 : (int)at;
    return plan->optics_sd_nm[k] + (at - k) * (plan->optics_sd_nm[k + 1] - plan->optics_sd_nm[k]);
}

double uf_systematic_nm(const uf_plan *plan, double gap_nm)
{
    if (plan->series.count)
        return uf_series_systematic(&plan->series, gap_nm);
    double per_ln = uf_gap_per_ln(plan, gap_nm);
    double ratio = per_ln * hypot(plan->reference_sd, plan->normalisation_sd);
    double zero = per_ln / uf_gap_per_ln(plan, plan->reference_gap_nm) * plan->reference_gap_sd_nm;
    return hypot(hypot(ratio, zero), optics_sd_at(plan, gap_nm));
}
