/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which points of a photon transfer series tell its slope. */
#include <math.h>

#include "calibrate/photon_parts.h"

/* Pixels at full scale bend mean and variance by about their share; a thousandth is less than a line's usual sd. */
static const double saturated_most = 0.001;

/* A variance is past the top when it is lower than a darker point's by three sd and by 2 %: less may be the lamp. */
static const double drop_sigma = 3, drop_share = 0.02;

/* Part of a saturation seen up to which the line is fitted (EMVA 1288). */
static const double share_of_saturation = 0.7;

/* Levels closer together than this tell a slope by the dark frames alone. */
static const double levels_apart = 1.5;

static void sort_by_signal(uf_photon_fitting *f)
{
    for (int k = 0; k < f->count; k++) {
        int at = k;
        for (; at > 0 && f->points[f->order[at - 1]].signal_adu > f->points[k].signal_adu; at--)
            f->order[at] = f->order[at - 1];
        f->order[at] = k;
    }
}

/* The point whose variance is largest, those past it by a drop, and all that are brighter than the first of them. */
static void find_the_top(uf_photon_fitting *f)
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

double uf_photon_lowest_saturation(const uf_photon_fitting *f)
{
    double lowest = (double)NAN;
    for (int k = 0; k < f->count; k++)
        lowest = fmin(lowest, f->points[k].saturation_adu); /* fmin passes over NaN */
    return lowest;
}

/* Least and largest signal of the points in use; 0 for none. */
int uf_photon_range_used(const uf_photon_fitting *f, double *least, double *most)
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
static void keep_away_from_full(uf_photon_fitting *f)
{
    double full = fmin(f->top_signal, uf_photon_lowest_saturation(f) - f->dark->offset_adu), least = 0, most = 0;
    if (isnan(full))
        return;
    for (int k = 0; k < f->count; k++)
        if (f->fits[k].use == UF_POINT_USED && f->points[k].high_adu > share_of_saturation * full)
            f->fits[k].use = UF_POINT_NEAR_FULL;
    if (uf_photon_range_used(f, &least, &most) && most >= levels_apart * least)
        return;
    for (int k = 0; k < f->count; k++)
        if (f->fits[k].use == UF_POINT_NEAR_FULL)
            f->fits[k].use = UF_POINT_USED;
}

static int points_of(const uf_photon_fitting *f, uf_point_use use)
{
    int count = 0;
    for (int k = 0; k < f->count; k++)
        count += f->fits[k].use == use;
    return count;
}

static uf_status nothing_to_fit(const uf_photon_fitting *f, double least, double most, uf_error *error)
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
                       n, uf_photon_lowest_saturation(f));
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

uf_status uf_photon_choose_points(uf_photon_fitting *f, uf_error *error)
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
    if (!uf_photon_range_used(f, &least, &most) || most < levels_apart * least)
        return nothing_to_fit(f, least, most, error);
    f->scale = most;
    return UF_OK;
}
