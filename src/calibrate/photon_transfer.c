/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The photon transfer line through the points of all pairs. */
#include <math.h>

#include "calibrate/photon_parts.h"
#include "fit/chi_square.h"
#include "fit/linear.h"

/* With less between the brightest and the darkest point in use there is little to check a line by. */
static const double levels_well_apart = 3;

enum { ROUNDS = 50 };

/* ---- the line -------------------------------------------------------------------------------- */

/* Sd of a point's variance at the line: what it is of the measured variance, in the same proportion. The mean's own
 * uncertainty is no part of it: for photons, mean and variance of a pair err together, and what the mean adds to the
 * distance from the line the covariance takes away (kappa_3 = kappa_2 for Poisson counts). */
static double sd_at_line(const uf_photon_fitting *f, const uf_photon_point *p, double slope)
{
    double line = f->foot_adu2 + slope * p->signal_adu;
    return p->variance_adu2 > 0 ? line * p->variance_sd_adu2 / p->variance_adu2 : 0;
}

static double above_foot(const uf_photon_fitting *f, const uf_photon_point *p)
{
    return p->variance_adu2 - f->foot_adu2;
}

/* Sums of the normal equations at the weights of `slope`; the line goes through the foot with one parameter. */
static uf_linear sums_at(const uf_photon_fitting *f, double slope, int parameters)
{
    uf_linear sums = {.parameters = parameters};
    for (int k = 0; k < f->count; k++) {
        const uf_photon_point *p = f->points + f->order[k];
        double sd = sd_at_line(f, p, slope), x[2] = {p->signal_adu / f->scale, 1};
        if (f->fits[f->order[k]].use == UF_POINT_USED && sd > 0)
            uf_linear_add(&sums, x, above_foot(f, p), 1 / (sd * sd));
    }
    return sums;
}

static double start_slope(const uf_photon_fitting *f)
{
    double x = 0, y = 0;
    for (int k = 0; k < f->count; k++)
        if (f->fits[k].use == UF_POINT_USED) {
            x += f->points[k].signal_adu;
            y += above_foot(f, f->points + k);
        }
    return y / x;
}

/* Through the foot that the dark frames give; weights hang on the line, so again and again. */
static uf_status fit_line(uf_photon_fitting *f, uf_photon_transfer *t, uf_error *error)
{
    uf_linear sums = {0};
    double slope = start_slope(f);
    for (int round = 0; round < ROUNDS && slope > 0; round++) {
        double before = slope;
        sums = sums_at(f, slope, 1);
        slope = sums.xx[0][0] > 0 ? sums.xy[0] / sums.xx[0][0] / f->scale : (double)NAN;
        if (fabs(slope - before) < 1e-13 * before)
            break;
    }
    if (!(slope > 0))
        return uf_fail(
            error, UF_INPUT,
            "the flats' variance does not rise with their light: it is no higher than in the dark; raw frames "
            "are needed, not averaged or denoised ones");
    t->points_used = (int)sums.rows;
    t->chi_square = fmax(0, sums.yy - sums.xy[0] * sums.xy[0] / sums.xx[0][0]);
    double degrees = t->points_used - 1, stretch = degrees > 0 ? fmax(1, t->chi_square / degrees) : 1;
    t->chi_square_p = uf_chi_square_above(t->chi_square, degrees);
    /* An error of the foot moves all points alike: up or down, or along the line. */
    double lever = 0;
    for (int k = 0; k < f->count; k++) {
        const uf_photon_point *p = f->points + k;
        if (f->fits[k].use == UF_POINT_USED)
            lever += p->signal_adu / f->scale / pow(sd_at_line(f, p, slope), 2);
    }
    lever /= sums.xx[0][0] * f->scale;
    double from_points = sqrt(stretch / sums.xx[0][0]) / f->scale;
    double from_foot = lever * hypot(f->dark->variance_sd_adu2, slope * f->dark->offset_sd_adu);
    t->slope_adu = slope;
    t->slope_sd_adu = hypot(from_points, from_foot);
    return UF_OK;
}

/* The same with a free intercept, to see whether it points at the dark frames. */
static void fit_free_line(const uf_photon_fitting *f, uf_photon_transfer *t)
{
    uf_linear sums = sums_at(f, t->slope_adu, 2);
    uf_linear_fit fit;
    t->line_offset_adu = t->line_offset_sd_adu = (double)NAN;
    if (!uf_linear_solve(&sums, &fit) || !(fit.value[0] > 0))
        return;
    double weight = sums.weight / sums.rows, reduced = fit.residual_sd * fit.residual_sd * weight;
    double stretch = reduced > 0 ? sqrt(fmax(1, 1 / reduced)) : 1;
    double slope = fit.value[0] / f->scale;
    t->line_offset_adu = f->dark->offset_adu - fit.value[1] / slope;
    t->line_offset_sd_adu = hypot(fit.sd[1] * stretch / slope, f->dark->variance_sd_adu2 / slope);
}

/* Where rounding hides the dark noise, it does not add the same in the dark as in the light: the points
 * themselves have to tell where the line begins. */
static uf_status fit_without_dark(uf_photon_fitting *f, uf_photon_transfer *t, uf_error *error)
{
    double intercept = (f->dark->offset_adu - t->line_offset_adu) * t->slope_adu;
    if (!f->dark->noise_is_bound || isnan(intercept))
        return UF_OK;
    double own_share = t->line_offset_sd_adu / f->scale; /* the slope of a line whose foot errs by that much */
    f->foot_adu2 += intercept;
    uf_status status = fit_line(f, t, error);
    t->slope_sd_adu = hypot(t->slope_sd_adu, t->slope_adu * own_share);
    return status;
}

static void fill_departures(uf_photon_fitting *f, const uf_photon_transfer *t)
{
    for (int k = 0; k < f->count; k++) {
        const uf_photon_point *p = f->points + k;
        double line = t->slope_adu * p->signal_adu, sd = sd_at_line(f, p, t->slope_adu);
        if (f->fits[k].use == UF_POINT_NO_LIGHT)
            continue;
        f->fits[k].departure = above_foot(f, p) / line - 1;
        f->fits[k].departure_sigma = sd > 0 ? (above_foot(f, p) - line) / sd : (double)NAN;
    }
}

/* ---- full scale and notes -------------------------------------------------------------------- */

static void find_full_scale(const uf_photon_fitting *f, uf_photon_transfer *t)
{
    double piled_up = uf_photon_lowest_saturation(f);
    t->full_scale_adu = (double)NAN;
    t->full_scale_from = UF_FULL_SCALE_UNSEEN;
    if (!isnan(f->top_mean)) {
        t->full_scale_adu = f->top_mean;
        t->full_scale_from = UF_FULL_SCALE_TOP;
    } else if (!isnan(piled_up)) {
        t->full_scale_adu = piled_up;
        t->full_scale_from = UF_FULL_SCALE_PILED_UP;
    }
}

/* Neighbours of a raw frame know nothing of each other. A correlation of 0.03 on all four sides hides a tenth of
 * the variance, which would be a tenth of the gain. */
static const double correlated = 0.03;

static unsigned note_points(const uf_photon_fitting *f, uf_photon_transfer *t)
{
    unsigned notes = 0;
    double least = 0, most = 0, worst = 0, brightest = 0, along = 0, down = 0, pixels = 0;
    for (int k = 0; k < f->count; k++) {
        const uf_photon_point *p = f->points + k;
        if (f->fits[k].use != UF_POINT_USED)
            continue;
        along += p->pixels * p->correlation_x;
        down += p->pixels * p->correlation_y;
        pixels += p->pixels;
        worst = fmax(worst, fabs(f->fits[k].departure));
        brightest = fmax(brightest, p->variance_adu2);
        notes |= fabs(p->flicker) > 0.05 ? UF_CAMERA_FLICKER : 0u;
    }
    (void)uf_photon_range_used(f, &least, &most);
    t->correlation = fmax(fabs(along), fabs(down)) / pixels;
    notes |= t->correlation > correlated + 3 / sqrt(pixels) ? UF_CAMERA_CORRELATED : 0u;
    notes |= t->chi_square_p < 0.001 && worst > 0.02 ? UF_CAMERA_LINE_BENDS : 0u;
    notes |= most < levels_well_apart * least ? UF_CAMERA_NARROW_RANGE : 0u;
    notes |= brightest < 2 * f->dark->variance_adu2 ? UF_CAMERA_LOW_SIGNAL : 0u;
    return notes;
}

static unsigned take_notes(const uf_photon_fitting *f, uf_photon_transfer *t)
{
    const uf_dark *dark = f->dark;
    unsigned notes = note_points(f, t);
    double away = fabs(t->line_offset_adu - dark->offset_adu);
    notes |= dark->noise_is_bound ? UF_CAMERA_ROUNDING : 0u;
    notes |= dark->clipped_share > 0.001 ? UF_CAMERA_DARK_CLIPPED : 0u;
    notes |= dark->frames->count < UF_MEDIAN_NOISE_FRAMES ? UF_CAMERA_FEW_DARKS : 0u;
    notes |= !dark->noise_is_bound && away > 4 * t->line_offset_sd_adu && away > dark->noise_rms_adu
                 ? UF_CAMERA_OFFSETS_DISAGREE
                 : 0u;
    return notes;
}

/* ---- all of it ------------------------------------------------------------------------------- */

void uf_photon_transfer_set_excess(uf_photon_transfer *t, const uf_dark *dark, double excess_noise, double sd)
{
    double gain = excess_noise * excess_noise / t->slope_adu;
    double share = hypot(t->slope_sd_adu / t->slope_adu, 2 * sd / excess_noise);
    t->excess_noise = excess_noise;
    t->excess_noise_sd = sd;
    t->gain_e_per_adu = gain;
    t->gain_sd_e_per_adu = gain * share;
    t->read_noise_e = dark->noise_adu * gain;
    t->read_noise_sd_e = hypot(dark->noise_sd_adu * gain, t->read_noise_e * share); /* NaN for a bound */
    t->read_noise_rms_e = dark->noise_rms_adu * gain;
    t->full_scale_e = (t->full_scale_adu - t->offset_adu) * gain;
}

static uf_status fit_all(uf_photon_fitting *f, double excess_noise, uf_photon_transfer *t, uf_error *error)
{
    uf_status status = uf_photon_choose_points(f, error);
    if (status == UF_OK)
        status = fit_line(f, t, error);
    if (status != UF_OK)
        return status;
    fit_free_line(f, t);
    status = fit_without_dark(f, t, error);
    if (status != UF_OK)
        return status;
    fill_departures(f, t);
    uf_photon_find_linear_range(f, t);
    find_full_scale(f, t);
    uf_photon_transfer_set_excess(t, f->dark, excess_noise, 0);
    t->notes = take_notes(f, t);
    return UF_OK;
}

uf_status uf_photon_transfer_fit(const uf_dark *dark, const uf_photon_point *points, int count, double excess_noise,
                                 uf_photon_transfer *transfer, uf_point_fit *fits, uf_error *error)
{
    uf_point_fit own[UF_PHOTON_POINTS_MOST];
    uf_photon_fitting f = {.dark = dark,
                           .foot_adu2 = dark->variance_adu2,
                           .points = points,
                           .count = count,
                           .fits = fits ? fits : own,
                           .top_signal = (double)NAN,
                           .top_mean = (double)NAN};
    *transfer = (uf_photon_transfer){.offset_adu = dark->offset_adu, .offset_sd_adu = dark->offset_sd_adu};
    if (count < 1 || count > UF_PHOTON_POINTS_MOST)
        return uf_fail(error, UF_INPUT, "%d pairs of flats; give 2 to %d, at several exposures", count,
                       UF_PHOTON_POINTS_MOST);
    if (!(excess_noise >= 1))
        return uf_fail(error, UF_INPUT, "an excess noise factor of %g; it is 1 without multiplication, else above",
                       excess_noise);
    return fit_all(&f, excess_noise, transfer, error);
}

uf_status uf_excess_noise(const uf_photon_transfer *with, const uf_photon_transfer *without, uf_excess *excess,
                          uf_error *error)
{
    *excess = (uf_excess){0};
    if (isnan(with->rate_adu_per_ms) || isnan(without->rate_adu_per_ms))
        return uf_fail(
            error, UF_INPUT,
            "the set %s multiplication has fewer than 2 exposures with times; the excess noise needs the light "
            "of both sets: give the exposures in ms",
            isnan(with->rate_adu_per_ms) ? "with" : "without");
    double rates = with->rate_adu_per_ms / without->rate_adu_per_ms, slopes = with->slope_adu / without->slope_adu;
    double rates_share = hypot(with->rate_sd_adu_per_ms / with->rate_adu_per_ms,
                               without->rate_sd_adu_per_ms / without->rate_adu_per_ms);
    double dim_share = without->slope_sd_adu / without->slope_adu,
           bright_share = with->slope_sd_adu / with->slope_adu;
    excess->multiplication = rates;
    excess->noise = sqrt(slopes / rates);
    excess->noise_sd = excess->noise / 2 * hypot(rates_share, hypot(dim_share, bright_share));
    excess->gain_e_per_adu = 1 / (without->slope_adu * rates);
    excess->gain_sd_e_per_adu = excess->gain_e_per_adu * hypot(rates_share, dim_share);
    if (excess->noise + 3 * excess->noise_sd < 1)
        return uf_fail(
            error, UF_INPUT,
            "an excess noise factor of %.3f +/- %.3f, below 1; the two sets are not of the same light, or those "
            "called without multiplication had some",
            excess->noise, excess->noise_sd);
    return UF_OK;
}
