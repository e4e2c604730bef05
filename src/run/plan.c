/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plan.h"

#include <math.h>

#include "base/constants.h"
#include "image/restore.h"
#include "optics/refractive.h"
#include "optics/systematic.h"
#include "run/decay_law.h"
#include "run/series_plan.h"

/* Emission is redder than excitation by about this (common practice, no source), and a diffraction-limited
 * image of a point is close to a Gaussian of sigma 0.21 wavelength / NA (Zhang, Zerubia and Olivo-Marin 2007,
 * Appl. Opt. 46:1819; value from memory). */
static const double stokes_shift = 1.06, psf_per_wavelength = 0.21;
static const double usual_na = 1.45;

/* Real point spread functions are wider than the ideal one by about a fifth (common practice, no source). */
static const double real_over_ideal = 1.2;

/* Indices given as numbers are taken as they are; those given by name come from their formulas. */
static uf_status find_indices(const uf_settings *s, uf_bench *b, uf_error *error)
{
    double nm = s->light.wavelength_nm;
    int named = s->interface.substrate != UF_SETTING_NOT_GIVEN || s->interface.medium != UF_SETTING_NOT_GIVEN;
    if (named && (nm < 300 || nm > 1100))
        return uf_fail(error, UF_INPUT,
                       "indices by name are known from 300 to 1100 nm, not at %.4g nm; give substrate_n and medium_n",
                       nm);
    b->substrate_n = s->interface.substrate_n;
    b->medium_n = s->interface.medium_n;
    b->medium_n_sd = s->interface.medium_n_sd;
    if (s->interface.substrate != UF_SETTING_NOT_GIVEN)
        b->substrate_n = uf_round_digits(uf_glass_n((uf_glass)s->interface.substrate, nm), 12);
    if (s->interface.medium == UF_SETTING_NOT_GIVEN)
        return UF_OK;
    uf_medium medium = (uf_medium)s->interface.medium;
    b->medium_n = uf_round_digits(uf_medium_n(medium, nm, s->interface.temperature_c), 12);
    b->medium_n_sd = fmax(b->medium_n_sd, uf_medium_n_sd(medium));
    return UF_OK;
}

static void find_na(const uf_settings *s, uf_bench *b)
{
    double n = isnan(s->interface.angle_n) ? b->substrate_n : s->interface.angle_n;
    if (!isnan(s->interface.na_effective)) {
        b->na_effective = s->interface.na_effective;
        b->na_effective_sd = s->interface.na_effective_sd;
    } else if (!isnan(s->interface.depth_nm)) {
        b->na_effective = uf_na_from_depth(s->interface.depth_nm, b->wavelength_nm, b->medium_n);
        b->na_effective_sd = 0;
        b->depth_sd_nm = s->interface.depth_sd_nm;
    } else {
        double sd = s->interface.angle_sd_deg;
        b->na_effective = uf_na_from_angle(s->interface.angle_deg, n);
        double up = uf_na_from_angle(fmin(90, s->interface.angle_deg + sd), n);
        double down = uf_na_from_angle(fmax(0, s->interface.angle_deg - sd), n);
        /* An angle quoted in the substrate moves with the substrate's index. */
        double by_index = isnan(s->interface.angle_n) ? b->na_effective / n * s->interface.substrate_n_sd : 0;
        b->na_effective_sd = hypot((up - down) / 2, by_index);
    }
}

uf_status uf_bench_without_angle(const uf_settings *s, uf_bench *bench, uf_error *error)
{
    static const double p_fractions[] = {
        [UF_POLARIZATION_S] = 0, [UF_POLARIZATION_P] = 1, [UF_POLARIZATION_MIXED] = 0.5};
    *bench = (uf_bench){.wavelength_nm = s->light.wavelength_nm,
                        .cell_n = s->interface.cell_n,
                        .substrate_n_sd = s->interface.substrate_n_sd,
                        .cell_n_sd = s->interface.cell_n_sd,
                        .p_fraction = p_fractions[s->light.polarization],
                        .coating_n = s->interface.coating_n,
                        .coating_nm = isnan(s->interface.coating_nm) ? 0 : s->interface.coating_nm,
                        .na_effective = (double)NAN,
                        .depth_sd_nm = (double)NAN,
                        .objective_na = (double)NAN};
    if (isnan(s->interface.coating_n) != isnan(s->interface.coating_nm))
        return uf_fail(error, UF_INPUT, "a coating needs both coating_n and coating_nm in [interface]");
    if (s->interface.geometry == UF_GEOMETRY_OBJECTIVE)
        bench->objective_na = s->interface.objective_na;
    return find_indices(s, bench, error);
}

uf_status uf_bench_make(const uf_settings *s, uf_bench *bench, uf_error *error)
{
    uf_status status = uf_bench_without_angle(s, bench, error);
    if (status != UF_OK)
        return status;
    find_na(s, bench);
    bench->na_effective = uf_round_digits(bench->na_effective, 12);
    if (s->interface.angle_deg < UF_PI / 2)
        return uf_fail(error, UF_INPUT, "angle_deg = %.4g: angles are in degrees (%.4g radians are %.2f deg)",
                       s->interface.angle_deg, s->interface.angle_deg, s->interface.angle_deg * 180 / UF_PI);
    return uf_bench_check(bench, error);
}

double uf_psf_sigma_um(const uf_settings *s)
{
    double na = isnan(s->interface.objective_na) ? usual_na : s->interface.objective_na;
    return uf_round_digits(psf_per_wavelength * stokes_shift * s->light.wavelength_nm * 1e-3 / na, 12);
}

static uf_status find_pixel_size(const uf_settings *s, double image_pixel_um, double *size, uf_error *error)
{
    *size = isnan(s->pixel.size_um) ? image_pixel_um : s->pixel.size_um;
    if (!isnan(*size))
        return UF_OK;
    return uf_fail(error, UF_INPUT,
                   "neither the instrument file nor the image says how large a pixel is; add size_um to [pixel]");
}

/* Dye all through the cell above the gap: each field is weighed by how deep it reaches into the cell, the evanescent one
 * by its depth there, the stray light by its own. */
static uf_status weigh_stray_by_depth(uf_plan *plan, uf_error *error)
{
    const uf_bench *b = &plan->bench;
    double in_cell = uf_depth_nm(b->wavelength_nm, b->na_effective, b->cell_n), share = plan->law.stray.fraction;
    if (isnan(in_cell))
        return uf_fail(
            error, UF_INPUT,
            "label = cytosol needs light that is totally reflected by the cell: n sin(angle) %.4f is not above "
            "cell_n %.4f",
            b->na_effective, b->cell_n);
    double stray = share * plan->law.stray.depth_nm;
    plan->law.stray.fraction = uf_round_digits(stray / ((1 - share) * in_cell + stray), 12);
    return UF_OK;
}

/* The plain exponential has its closed form; every other table is walked. */
static uf_status make_decay(const uf_settings *s, uf_plan *plan, uf_error *error)
{
    uf_status status = uf_decay_law_make(s, &plan->law, error);
    if (status != UF_OK)
        return status;
    if (s->cells.label == UF_LABEL_CYTOSOL)
        status = weigh_stray_by_depth(plan, error);
    if (status != UF_OK)
        return status;
    if (plan->law.model != UF_FIELD_EXPONENTIAL || plan->law.stray.fraction > 0)
        return uf_decay_make(&plan->decay, &plan->bench, &plan->law, error);
    uf_decay_exponential(&plan->decay, plan->depth_nm);
    return UF_OK;
}

/* A film is one layer in the wide image, a cell two; and above the film is medium, above the gap of a cell the cell. So
 * at gap 0 a cell shows half the ratio, times what the cell adds to the field there. */
static double film_to_cell(const uf_settings *s, const uf_plan *plan)
{
    uf_decay_law under_medium = plan->law;
    if (under_medium.model == UF_FIELD_LAYERED)
        under_medium.model = UF_FIELD_EXPONENTIAL;
    double at_film = uf_relative_excitation(&plan->bench, &under_medium, s->reference.gap_nm);
    double cell_adds = uf_layered_intensity(&plan->bench, 0) / uf_interface_intensity(&plan->bench);
    return s->reference.ratio / at_film / 2 * cell_adds;
}

/* Exposures that are not told count as the reference's own. */
static double exposure_change(const uf_settings *s, uf_channel_name channel)
{
    double now = s->camera[channel].exposure_ms, then = s->reference.exposure_ms[channel];
    return isnan(now) || isnan(then) ? 1 : now / then;
}

double uf_exposure_factor(const uf_settings *s)
{
    int near_alone = s->cells.label != UF_LABEL_MEMBRANE;
    return exposure_change(s, UF_NEAR) / (near_alone ? 1 : exposure_change(s, UF_WIDE));
}

/* An assumed reference is found in each field (gap/own_reference.h); until then its ratio is not known. */
static void set_reference(const uf_settings *s, uf_plan *plan)
{
    int measured = s->reference.from == UF_SETTING_NOT_GIVEN;
    plan->has_gap = s->cells.label != UF_LABEL_ADHESION_PROTEIN;
    plan->signal = s->cells.label == UF_LABEL_MEMBRANE ? UF_SIGNAL_RATIO : UF_SIGNAL_NEAR;
    plan->is_relative = !measured || s->reference.gap_is == UF_GAP_ASSUMED || s->cells.label == UF_LABEL_CYTOSOL;
    plan->reference_from_cell = !measured || !plan->has_gap;
    plan->reference_gap_nm = s->reference.gap_nm;
    plan->reference_gap_sd_nm = s->reference.gap_sd_nm;
    plan->normalisation_sd = s->reference.normalisation_sd;
    plan->reference_ratio = (double)NAN;
    if (plan->reference_from_cell)
        return;
    double at_zero = s->reference.kind == UF_REFERENCE_FILM
                         ? film_to_cell(s, plan)
                         : s->reference.ratio * exp(-uf_decay_ln(&plan->decay, s->reference.gap_nm));
    plan->reference_ratio = uf_round_digits(at_zero * uf_exposure_factor(s), 12);
    plan->reference_sd = s->reference.ratio_sd / s->reference.ratio;
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
    plan->psf_sigma_um = uf_psf_sigma_um(s);
    plan->restore_gain = 1 + real_over_ideal * real_over_ideal;
    plan->restore_variance =
        uf_round_digits(uf_restore_variance(plan->psf_sigma_um / plan->pixel_size_um, plan->restore_gain), 12);
    if (plan->series.count) {
        plan->reference_ratio = (double)NAN;
        plan->has_gap = 1;
        uf_series_plan_limits(s, plan);
        return UF_OK;
    }
    set_reference(s, plan);
    uf_optics_sd_fill(plan);
    if (plan->law.model == UF_FIELD_EXPONENTIAL)
        plan->layered_effect_nm = uf_round_digits(uf_layered_effect_nm(b, s->contact.cutoff_nm), 9);
    return UF_OK;
}
