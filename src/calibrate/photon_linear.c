/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How far the camera is linear. */
#include <math.h>

#include "calibrate/photon_parts.h"
#include "fit/linear.h"

/* Departure that ends the linear range; in this program 1 % of a ratio is about 1 nm of gap. */
static const double linear_share = 0.01;

enum { LEAST_EXPOSURES = 4, LEAST_ON_LINE = 3 };

/* ---- light against exposure ------------------------------------------------------------------ */

/* A line of signal against exposure. */
typedef struct exposure_line {
    int exposures; /* different ones that it was fitted to; 0: there is no line */
    double rate, rate_sd, intercept;
} exposure_line;

/* Whether the k-th point from below can lie on the line. */
static int has_exposure(const uf_photon_fitting *f, int k)
{
    uf_point_use use = f->fits[f->order[k]].use;
    return !isnan(f->points[f->order[k]].exposure_ms) && (use == UF_POINT_USED || use == UF_POINT_NEAR_FULL);
}

/* Different exposures among the lowest `most` points. */
static int different_exposures(const uf_photon_fitting *f, int most)
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
static exposure_line line_through(const uf_photon_fitting *f, int most)
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
static double worst_departure(const uf_photon_fitting *f, int most, const exposure_line *line)
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
static exposure_line longest_line(const uf_photon_fitting *f, uf_photon_transfer *t)
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
static void linear_by_variance(const uf_photon_fitting *f, uf_photon_transfer *t)
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

void uf_photon_find_linear_range(uf_photon_fitting *f, uf_photon_transfer *t)
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
