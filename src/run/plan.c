/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plan.h"

#include <math.h>

#include "run/series_plan.h"

/* Emission is redder than excitation by about this (common practice, no source), and a diffraction-limited
 * image of a point is close to a Gaussian of sigma 0.21 wavelength / NA (Zhang, Zerubia and Olivo-Marin 2007,
 * Appl. Opt. 46:1819; value from memory). */
static const double stokes_shift = 1.06, psf_per_wavelength = 0.21;
static const double usual_na = 1.45;

static double angle_index(const uf_settings *s)
{
    return isnan(s->interface.angle_n) ? s->interface.substrate_n : s->interface.angle_n;
}

static void find_na(const uf_settings *s, uf_bench *b)
{
    b->depth_sd_nm = (double)NAN;
    if (!isnan(s->interface.na_effective)) {
        b->na_effective = s->interface.na_effective;
        b->na_effective_sd = s->interface.na_effective_sd;
    } else if (!isnan(s->interface.depth_nm)) {
        b->na_effective = uf_na_from_depth(s->interface.depth_nm, b->wavelength_nm, b->medium_n);
        b->na_effective_sd = 0;
        b->depth_sd_nm = s->interface.depth_sd_nm;
    } else {
        double n = angle_index(s), sd = s->interface.angle_sd_deg;
        b->na_effective = uf_na_from_angle(s->interface.angle_deg, n);
        double up = uf_na_from_angle(fmin(90, s->interface.angle_deg + sd), n);
        double down = uf_na_from_angle(fmax(0, s->interface.angle_deg - sd), n);
        /* An angle quoted in the substrate moves with the substrate's index. */
        double by_index = isnan(s->interface.angle_n) ? b->na_effective / n * s->interface.substrate_n_sd : 0;
        b->na_effective_sd = hypot((up - down) / 2, by_index);
    }
}

uf_status uf_bench_make(const uf_settings *s, uf_bench *bench, uf_error *error)
{
    static const double p_fractions[] = {
        [UF_POLARIZATION_S] = 0, [UF_POLARIZATION_P] = 1, [UF_POLARIZATION_MIXED] = 0.5};
    *bench = (uf_bench){.wavelength_nm = s->light.wavelength_nm,
                        .substrate_n = s->interface.substrate_n,
                        .medium_n = s->interface.medium_n,
                        .cell_n = s->interface.cell_n,
                        .substrate_n_sd = s->interface.substrate_n_sd,
                        .medium_n_sd = s->interface.medium_n_sd,
                        .cell_n_sd = s->interface.cell_n_sd,
                        .p_fraction = p_fractions[s->light.polarization],
                        .objective_na = (double)NAN};
    if (s->interface.geometry == UF_GEOMETRY_OBJECTIVE)
        bench->objective_na = s->interface.objective_na;
    find_na(s, bench);
    bench->na_effective = uf_round_digits(bench->na_effective, 12);
    return uf_bench_check(bench, error);
}

static uf_status find_pixel_size(const uf_settings *s, double image_pixel_um, double *size, uf_error *error)
{
    *size = isnan(s->pixel.size_um) ? image_pixel_um : s->pixel.size_um;
    if (!isnan(*size))
        return UF_OK;
    return uf_fail(error, UF_INPUT,
                   "neither the instrument file nor the image says how large a pixel is; add size_um to [pixel]");
}

uf_field_model uf_field_of(const uf_settings *s)
{
    return s->decay.model == UF_DECAY_LAYERED ? UF_FIELD_LAYERED : UF_FIELD_EXPONENTIAL;
}

uf_stray uf_stray_of(const uf_settings *s)
{
    return (uf_stray){s->decay.scattered_fraction, s->decay.scattered_depth_nm};
}

/* The plain exponential has its closed form; every other table is walked. */
static uf_status make_decay(const uf_settings *s, uf_plan *plan, uf_error *error)
{
    plan->model = uf_field_of(s);
    plan->stray = uf_stray_of(s);
    if (plan->model != UF_FIELD_EXPONENTIAL || plan->stray.fraction > 0)
        return uf_decay_make(&plan->decay, &plan->bench, plan->model, plan->stray, error);
    uf_decay_exponential(&plan->decay, plan->depth_nm);
    return UF_OK;
}

uf_status uf_plan_make(const uf_settings *s, double image_pixel_um, uf_plan *plan, uf_error *error)
{
    *plan = (uf_plan){0};
    uf_status status = uf_settings_check(s, error);
    if (status == UF_OK)
        status =
            s->series.angles_deg.count ? uf_series_plan_bench(s, plan, error) : uf_bench_make(s, &plan->bench, error);
    if (status == UF_OK)
        status = find_pixel_size(s, image_pixel_um, &plan->pixel_size_um, error);
    if (status != UF_OK)
        return status;
    const uf_bench *b = &plan->bench;
    plan->depth_nm = uf_round_digits(uf_depth_nm(b->wavelength_nm, b->na_effective, b->medium_n), 12);
    plan->depth_sd_nm = uf_round_digits(uf_depth_sd(b), 12);
    status = make_decay(s, plan, error);
    if (status != UF_OK)
        return status;
    double na = isnan(s->interface.objective_na) ? usual_na : s->interface.objective_na;
    plan->psf_sigma_um = uf_round_digits(psf_per_wavelength * stokes_shift * b->wavelength_nm * 1e-3 / na, 12);
    if (plan->series.count) {
        plan->reference_ratio = (double)NAN;
        uf_series_plan_limits(s, plan);
        return UF_OK;
    }
    plan->reference_gap_nm = s->reference.gap_nm;
    double at_zero = s->reference.ratio * exp(-uf_decay_ln(&plan->decay, s->reference.gap_nm));
    plan->reference_ratio = uf_round_digits(at_zero, 12);
    plan->reference_sd = s->reference.ratio_sd / s->reference.ratio;
    plan->normalisation_sd = s->reference.normalisation_sd;
    if (plan->model == UF_FIELD_EXPONENTIAL)
        plan->layered_effect_nm = uf_round_digits(uf_layered_effect_nm(b, s->contact.cutoff_nm), 9);
    return UF_OK;
}
