/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The photon transfer line through the points of all pairs. */
#include <math.h>

#include "calibrate/camera_parts.h"
#include "fit/chi_square.h"
#include "fit/linear.h"

/* Pixels at full scale bend mean and variance by about their share; a thousandth is less than a line's usual sd. */
static const double saturated_most = 0.001;

/* A variance is past the top when it is lower than a darker point's by three sd and by 2 %: less may be the lamp. */
static const double drop_sigma = 3, drop_share = 0.02;

/* Part of a saturation seen up to which the line is fitted (EMVA 1288). */
static const double share_of_saturation = 0.7;

/* Levels closer together than this tell a slope by the dark frames alone; below three times, with little to check
 * it. */
static const double levels_apart = 1.5, levels_well_apart = 3;

/* Departure that ends the linear range; in this program 1 % of a ratio is about 1 nm of gap. */
static const double linear_share = 0.01;

enum { LEAST_EXPOSURES = 4, LEAST_ON_LINE = 3, ROUNDS = 50 };

/* What the parts of the fit hand on. */
typedef struct fitting {
    const uf_dark *dark;
    const uf_photon_point *points;
    int count;
    int order[UF_PHOTON_POINTS_MOST]; /* by signal, upwards */
    uf_point_fit *fits;
    double top_signal, top_mean; /* of the point of the largest variance, when others lie past it; else NaN */
    double scale;                /* largest signal used: regressors are of order one */
    double foot_adu2;            /* variance where there is no light */
} fitting;

/* ---- which points ---------------------------------------------------------------------------- */

static void sort_by_signal(fitting *f)
{
    for (int k = 0; k < f->count; k++) {
        int at = k;
        for (; at > 0 && f->points[f->order[at - 1]].signal_adu > f->points[k].signal_adu; at--)
            f->order[at] = f->order[at - 1];
        f->order[at] = k;
    }
}

/* The point whose variance is largest, those past it by a drop, and all that are brighter than the first of them. */
static void find_the_top(fitting *f)
{
    const uf_photon_point *top = NULL;
    int past = 0;
    for (int k = 0; k < f->count; k++) {
        const uf_photon_point *p = f->points + f->order[k];
        uf_point_fit *fit = f->fits + f->order[k];
        if (fit->use != UF_POINT_USED)
            continue;
        if (top && p->variance_adu2 < top->variance_adu2) {
            double drop = top->variance_adu2 - p->variance_adu2;
            past |= drop > drop_sigma * hypot(top->variance_sd_adu2, p->variance_sd_adu2) &&
                    drop > drop_share * top->variance_adu2;
        }
        if (past)
            fit->use = UF_POINT_PAST_THE_TOP;
        else if (!top || p->variance_adu2 > top->variance_adu2)
            top = p;
    }
    if (past) {
        f->top_signal = top->signal_adu;
        f->top_mean = top->mean_adu;
    }
}

static double lowest_saturation(const fitting *f)
{
    double lowest = (double)NAN;
    for (int k = 0; k < f->count; k++)
        lowest = fmin(lowest, f->points[k].saturation_adu); /* fmin passes over NaN */
    return lowest;
}

/* Least and largest signal of the points in use; 0 for none. */
static int range_used(const fitting *f, double *least, double *most)
{
    int used = 0;
    for (int k = 0; k < f->count; k++) {
        const uf_photon_point *p = f->points + f->order[k];
        if (f->fits[f->order[k]].use != UF_POINT_USED)
            continue;
        *least = used++ ? *least : p->signal_adu;
        *most = p->signal_adu;
    }
    return used;
}

/* Leaves out what is near a saturation that was seen, unless too little would be left to fit. */
static void keep_away_from_full(fitting *f)
{
    double full = fmin(f->top_signal, lowest_saturation(f) - f->dark->offset_adu), least = 0, most = 0;
    if (isnan(full))
        return;
    for (int k = 0; k < f->count; k++)
        if (f->fits[k].use == UF_POINT_USED && f->points[k].high_adu > share_of_saturation * full)
            f->fits[k].use = UF_POINT_NEAR_FULL;
    if (range_used(f, &least, &most) && most >= levels_apart * least)
        return;
    for (int k = 0; k < f->count; k++)
        if (f->fits[k].use == UF_POINT_NEAR_FULL)
            f->fits[k].use = UF_POINT_USED;
}

static int points_of(const fitting *f, uf_point_use use)
{
    int count = 0;
    for (int k = 0; k < f->count; k++)
        count += f->fits[k].use == use;
    return count;
}

static uf_status nothing_to_fit(const fitting *f, double least, double most, uf_error *error)
{
    int dark = points_of(f, UF_POINT_NO_LIGHT), full = points_of(f, UF_POINT_SATURATED), n = f->count;
    if (dark == n)
        return uf_fail(
            error, UF_INPUT,
            "no light in any of the %d pairs of flats: none is more than %.3g ADU above the dark frames (%.6g "
            "ADU); were the flats taken with the shutter open?",
            n, uf_least_light_adu(f->dark), f->dark->offset_adu);
    if (full == n)
        return uf_fail(error, UF_INPUT, "all %d pairs of flats are saturated (at %.6g ADU); take shorter exposures",
                       n, lowest_saturation(f));
    if (full + dark == n)
        return uf_fail(error, UF_INPUT,
                       "of %d pairs of flats %d are saturated and %d have no light; add exposures in between", n,
                       full, dark);
    return uf_fail(
        error, UF_INPUT,
        "the usable pairs of flats have signals from %.5g to %.5g ADU (%d saturated or past the top, %d without "
        "light); the slope needs several levels: add exposures, from a few per cent to two thirds of full scale",
        least, most, full + points_of(f, UF_POINT_PAST_THE_TOP), dark);
}

static uf_status choose_points(fitting *f, uf_error *error)
{
    double least = 0, most = 0, light = uf_least_light_adu(f->dark);
    for (int k = 0; k < f->count; k++) {
        const uf_photon_point *p = f->points + k;
        int saturated = p->saturated_fraction > saturated_most || !(p->pixels > 0);
        f->fits[k] =
            (uf_point_fit){.departure = (double)NAN, .departure_sigma = (double)NAN, .linearity = (double)NAN};
        f->fits[k].use = saturated                  ? UF_POINT_SATURATED
                         : !(p->signal_adu > light) ? UF_POINT_NO_LIGHT
                                                    : UF_POINT_USED;
    }
    sort_by_signal(f);
    find_the_top(f);
    keep_away_from_full(f);
    if (!range_used(f, &least, &most) || most < levels_apart * least)
        return nothing_to_fit(f, least, most, error);
    f->scale = most;
    return UF_OK;
}

/* ---- the line -------------------------------------------------------------------------------- */

/* Sd of a point's variance at the line: what it is of the measured variance, in the same proportion. The mean's own
 * uncertainty is no part of it: for photons, mean and variance of a pair err together, and what the mean adds to the
 * distance from the line the covariance takes away (kappa_3 = kappa_2 for Poisson counts). */
static double sd_at_line(const fitting *f, const uf_photon_point *p, double slope)
{
    double line = f->foot_adu2 + slope * p->signal_adu;
    return p->variance_adu2 > 0 ? line * p->variance_sd_adu2 / p->variance_adu2 : 0;
}

static double above_foot(const fitting *f, const uf_photon_point *p)
{
    return p->variance_adu2 - f->foot_adu2;
}

/* Sums of the normal equations at the weights of `slope`; the line goes through the foot with one parameter. */
static uf_linear sums_at(const fitting *f, double slope, int parameters)
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

static double start_slope(const fitting *f)
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
static uf_status fit_line(fitting *f, uf_photon_transfer *t, uf_error *error)
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
static void fit_free_line(const fitting *f, uf_photon_transfer *t)
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
static uf_status fit_without_dark(fitting *f, uf_photon_transfer *t, uf_error *error)
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

static void fill_departures(fitting *f, const uf_photon_transfer *t)
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

/* ---- light against exposure ------------------------------------------------------------------ */

/* A line of signal against exposure. */
typedef struct exposure_line {
    int exposures; /* different ones that it was fitted to; 0: there is no line */
    double rate, rate_sd, intercept;
} exposure_line;

/* Whether the k-th point from below can lie on the line. */
static int has_exposure(const fitting *f, int k)
{
    uf_point_use use = f->fits[f->order[k]].use;
    return !isnan(f->points[f->order[k]].exposure_ms) && (use == UF_POINT_USED || use == UF_POINT_NEAR_FULL);
}

/* Different exposures among the lowest `most` points. */
static int different_exposures(const fitting *f, int most)
{
    int count = 0;
    for (int k = 0; k < most; k++) {
        int is_new = has_exposure(f, k);
        for (int j = 0; is_new && j < k; j++)
            is_new = !has_exposure(f, j) || f->points[f->order[j]].exposure_ms != f->points[f->order[k]].exposure_ms;
        count += is_new;
    }
    return count;
}

/* Through the lowest `most` points, relative weights. The intercept is what a shutter takes to open; two exposures
 * cannot tell it. */
static exposure_line line_through(const fitting *f, int most)
{
    exposure_line line = {0};
    uf_linear_fit fit = {0};
    double longest = 0;
    int exposures = different_exposures(f, most);
    uf_linear sums = {.parameters = exposures > 2 ? 2 : 1};
    for (int k = 0; k < most; k++)
        if (has_exposure(f, k))
            longest = fmax(longest, f->points[f->order[k]].exposure_ms);
    for (int k = 0; k < most; k++) {
        const uf_photon_point *p = f->points + f->order[k];
        double x[2] = {p->exposure_ms / longest, 1};
        if (has_exposure(f, k))
            uf_linear_add(&sums, x, p->signal_adu, 1 / (p->signal_adu * p->signal_adu));
    }
    if (exposures > 1 && uf_linear_solve(&sums, &fit) && fit.value[0] > 0)
        line = (exposure_line){exposures, fit.value[0] / longest, fit.sd[0] / longest, fit.value[1]};
    return line;
}

static double off_line(const uf_photon_point *p, const exposure_line *line)
{
    return p->signal_adu / (line->rate * p->exposure_ms + line->intercept) - 1;
}

/* The largest departure of the lowest `most` points from the line, that of the dark level granted. */
static double worst_departure(const fitting *f, int most, const exposure_line *line)
{
    double worst = 0;
    for (int k = 0; k < most; k++) {
        const uf_photon_point *p = f->points + f->order[k];
        if (has_exposure(f, k))
            worst = fmax(worst, fabs(off_line(p, line)) - 2 * f->dark->offset_sd_adu / p->signal_adu);
    }
    return worst;
}

/* ---- the linear range ------------------------------------------------------------------------ */

/* The longest line from below that misses no point by 1 %. Where there is none, the line through all is kept to show
 * how they depart. */
static exposure_line longest_line(const fitting *f, uf_photon_transfer *t)
{
    t->linear_to_adu = t->linear_departure = (double)NAN;
    for (int most = f->count; different_exposures(f, most) >= LEAST_ON_LINE; most--) {
        exposure_line line = line_through(f, most);
        double worst = line.exposures ? worst_departure(f, most, &line) : INFINITY;
        if (worst > linear_share || !has_exposure(f, most - 1))
            continue;
        t->linear_to_adu = f->points[f->order[most - 1]].mean_adu;
        t->linear_departure = worst;
        return line;
    }
    return line_through(f, f->count);
}

/* Up to where the variance leaves its line, two of its sd granted. */
static void linear_by_variance(const fitting *f, uf_photon_transfer *t)
{
    t->linear_to_adu = t->linear_departure = (double)NAN;
    for (int k = 0; k < f->count; k++) {
        const uf_point_fit *fit = f->fits + f->order[k];
        if (fit->use == UF_POINT_NO_LIGHT)
            continue;
        double off = fabs(fit->departure), sd = fabs(fit->departure / fit->departure_sigma);
        int full = fit->use == UF_POINT_SATURATED || fit->use == UF_POINT_PAST_THE_TOP;
        if (full || (off > 0 && off > linear_share + 2 * sd))
            return;
        t->linear_to_adu = f->points[f->order[k]].mean_adu;
        t->linear_departure = fmax(t->linear_departure, off); /* fmax passes over NaN */
    }
}

static void find_linear_range(fitting *f, uf_photon_transfer *t)
{
    int by_exposure = different_exposures(f, f->count) >= LEAST_EXPOSURES;
    exposure_line line = by_exposure ? longest_line(f, t) : line_through(f, f->count);
    t->linear_from = by_exposure ? UF_LINEAR_BY_EXPOSURE : UF_LINEAR_BY_VARIANCE;
    t->rate_adu_per_ms = line.exposures ? line.rate : (double)NAN;
    t->rate_sd_adu_per_ms = line.exposures ? line.rate_sd : (double)NAN;
    for (int k = 0; k < f->count && line.exposures; k++)
        if (f->fits[k].use != UF_POINT_NO_LIGHT)
            f->fits[k].linearity = off_line(f->points + k, &line);
    if (!by_exposure)
        linear_by_variance(f, t);
}

/* ---- full scale and notes -------------------------------------------------------------------- */

static void find_full_scale(const fitting *f, uf_photon_transfer *t)
{
    double piled_up = lowest_saturation(f);
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

static unsigned note_points(const fitting *f, uf_photon_transfer *t)
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
    (void)range_used(f, &least, &most);
    t->correlation = fmax(fabs(along), fabs(down)) / pixels;
    notes |= t->correlation > correlated + 3 / sqrt(pixels) ? UF_CAMERA_CORRELATED : 0u;
    notes |= t->chi_square_p < 0.001 && worst > 0.02 ? UF_CAMERA_LINE_BENDS : 0u;
    notes |= most < levels_well_apart * least ? UF_CAMERA_NARROW_RANGE : 0u;
    notes |= brightest < 2 * f->dark->variance_adu2 ? UF_CAMERA_LOW_SIGNAL : 0u;
    return notes;
}

static unsigned take_notes(const fitting *f, uf_photon_transfer *t)
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

static uf_status fit_all(fitting *f, double excess_noise, uf_photon_transfer *t, uf_error *error)
{
    uf_status status = choose_points(f, error);
    if (status == UF_OK)
        status = fit_line(f, t, error);
    if (status != UF_OK)
        return status;
    fit_free_line(f, t);
    status = fit_without_dark(f, t, error);
    if (status != UF_OK)
        return status;
    fill_departures(f, t);
    find_linear_range(f, t);
    find_full_scale(f, t);
    uf_photon_transfer_set_excess(t, f->dark, excess_noise, 0);
    t->notes = take_notes(f, t);
    return UF_OK;
}

uf_status uf_photon_transfer_fit(const uf_dark *dark, const uf_photon_point *points, int count, double excess_noise,
                                 uf_photon_transfer *transfer, uf_point_fit *fits, uf_error *error)
{
    uf_point_fit own[UF_PHOTON_POINTS_MOST];
    fitting f = {.dark = dark,
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
