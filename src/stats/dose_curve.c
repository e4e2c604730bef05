/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/dose_curve.h"

#include <math.h>

static const double ln10 = 2.30258509299404568402;

/* Slope and place are fitted through a tanh that keeps them in range and is next to the identity in the middle: a
 * step between two doses has no steepest slope, a curve without plateau no farthest EC50. */
static const double slope_reach = 2.99573227355399099344; /* ln 20 */
static const double decades_beyond = 3;

static double squash(double at, double reach)
{
    return reach * tanh(at / reach);
}

static double squash_slope(double at, double reach)
{
    double t = tanh(at / reach);
    return 1 - t * t;
}

static double unsquash(double value, double reach)
{
    return reach * atanh(fmin(0.999, fmax(-0.999, value / reach)));
}

/* ---- the curve -------------------------------------------------------------------------------- */

/* How far the effect is gone at a dose, 0 .. 1. */
static double gone(double log_dose, double log10_ec50, double hill_slope)
{
    return 1 / (1 + exp(hill_slope * ln10 * (log10_ec50 - log_dose))); /* dose 0: exp(+inf), 0 */
}

/* Parameters in the fit's order: zero, full, then place unless held, then slope unless held. */
typedef struct curve_job {
    const uf_dose_data *data;
    int place_held;
    double middle, reach; /* of the place */
    double held;
} curve_job;

static int parameters_of(const curve_job *job)
{
    return 4 - job->place_held - job->data->slope_fixed;
}

static double place_of(const curve_job *job, const double *p)
{
    return job->place_held ? job->held : job->middle + squash(p[2], job->reach);
}

static double slope_of(const curve_job *job, const double *p)
{
    return job->data->slope_fixed ? 1 : exp(squash(p[job->place_held ? 2 : 3], slope_reach));
}

static void residuals(void *context, const double *p, double *r)
{
    const curve_job *job = context;
    double place = place_of(job, p), slope = slope_of(job, p);
    for (size_t k = 0; k < job->data->count; k++)
        r[k] = p[0] + (p[1] - p[0]) * gone(job->data->log_dose[k], place, slope) - job->data->response[k];
}

static void slopes(void *context, const double *p, double *j)
{
    const curve_job *job = context;
    double place = place_of(job, p), slope = slope_of(job, p);
    int count = parameters_of(job);
    for (size_t k = 0; k < job->data->count; k++, j += count) {
        double log_dose = job->data->log_dose[k], g = gone(log_dose, place, slope);
        double steep = (p[1] - p[0]) * g * (1 - g) * slope * ln10;
        int next = 2;
        j[0] = 1 - g;
        j[1] = g;
        if (!job->place_held)
            j[next++] = -steep * squash_slope(p[2], job->reach);
        if (!job->data->slope_fixed)
            j[next] = isinf(log_dose) ? 0 : steep * (log_dose - place) * squash_slope(p[next], slope_reach);
    }
}

/* ---- starts ----------------------------------------------------------------------------------- */

typedef struct start {
    double zero, full, place, slope, rss;
} start;

/* The plateaus by linear least squares, place and slope given. Where all doses are equally far gone there is no
 * second plateau. */
static start plateaus_at(const uf_dose_data *d, double place, double slope)
{
    double n = (double)d->count, g_mean = 0, y_mean = 0, gg = 0, gy = 0, rss = 0;
    for (size_t k = 0; k < d->count; k++) {
        g_mean += gone(d->log_dose[k], place, slope) / n;
        y_mean += d->response[k] / n;
    }
    for (size_t k = 0; k < d->count; k++) {
        double g = gone(d->log_dose[k], place, slope) - g_mean;
        gg += g * g;
        gy += g * (d->response[k] - y_mean);
    }
    double rise = gg > 1e-14 ? gy / gg : 0;
    for (size_t k = 0; k < d->count; k++) {
        double off = d->response[k] - y_mean - rise * (gone(d->log_dose[k], place, slope) - g_mean);
        rss += off * off;
    }
    double zero = y_mean - rise * g_mean;
    return (start){zero, zero + rise, place, slope, rss};
}

enum { STARTS = 4, PLACES = 17, SLOPES = 4 };
static const double start_slopes[SLOPES] = {0.5, 1, 2.2, 6};

static void keep_start(start *best, start s)
{
    for (int k = 0; k < STARTS; k++)
        if (!(best[k].rss <= s.rss)) {
            for (int j = STARTS - 1; j > k; j--)
                best[j] = best[j - 1];
            best[k] = s;
            return;
        }
}

/* Places from one decade below the doses to one above. */
static void find_starts(const uf_dose_data *d, start *best)
{
    for (int k = 0; k < STARTS; k++)
        best[k].rss = (double)NAN;
    for (int i = 0; i < PLACES; i++)
        for (int j = 0; j < (d->slope_fixed ? 1 : SLOPES); j++) {
            double place = d->log_low - 1 + i * (d->log_high - d->log_low + 2) / (PLACES - 1);
            keep_start(best, plateaus_at(d, place, d->slope_fixed ? 1 : start_slopes[j]));
        }
}

/* ---- fits ------------------------------------------------------------------------------------- */

static void take_fit(const curve_job *job, const uf_nonlinear_fit *fit, uf_curve *curve)
{
    int slope_at = job->place_held ? 2 : 3;
    *curve = (uf_curve){fit->value[0],
                        fit->value[1],
                        place_of(job, fit->value),
                        slope_of(job, fit->value),
                        {(double)NAN, (double)NAN, (double)NAN, (double)NAN},
                        fit->sum_of_squares,
                        1};
    for (int k = 0; k < 2; k++)
        curve->se[k] = fit->residual_sd * sqrt(fit->covariance[k][k]);
    if (!job->place_held)
        curve->se[2] = fit->residual_sd * sqrt(fit->covariance[2][2]) * squash_slope(fit->value[2], job->reach);
    if (!job->data->slope_fixed)
        curve->se[3] = fit->residual_sd * sqrt(fit->covariance[slope_at][slope_at]) * curve->hill_slope *
                       squash_slope(fit->value[slope_at], slope_reach);
}

static uf_status fit_from(curve_job *job, start from, uf_curve *curve, uf_error *error)
{
    uf_nonlinear problem = {parameters_of(job), job->data->count, residuals, slopes, job};
    uf_nonlinear_fit fit = {.value = {from.zero, from.full}};
    int next = 2;
    if (!job->place_held)
        fit.value[next++] = unsquash(from.place - job->middle, job->reach);
    if (!job->data->slope_fixed)
        fit.value[next] = unsquash(log(from.slope), slope_reach);
    uf_status status = uf_nonlinear_solve(&problem, &fit, error);
    if (status == UF_OK && isfinite(fit.sum_of_squares) && (fit.converged || fit.sum_of_squares < from.rss) &&
        (!curve->found || fit.sum_of_squares < curve->rss))
        take_fit(job, &fit, curve);
    return status;
}

uf_status uf_curve_best(const uf_dose_data *data, uf_curve *curve, uf_error *error)
{
    curve_job job = {.data = data,
                     .middle = (data->log_low + data->log_high) / 2,
                     .reach = (data->log_high - data->log_low) / 2 + decades_beyond};
    start starts[STARTS];
    uf_status status = UF_OK;
    curve->found = 0;
    find_starts(data, starts);
    for (int k = 0; k < STARTS && status == UF_OK; k++)
        if (isfinite(starts[k].rss))
            status = fit_from(&job, starts[k], curve, error);
    return status;
}

uf_status uf_curve_at(const uf_dose_data *data, double log10_ec50, double near, uf_curve *curve, uf_error *error)
{
    curve_job job = {.data = data, .place_held = 1, .held = log10_ec50};
    start best = plateaus_at(data, log10_ec50, data->slope_fixed ? 1 : near);
    curve->found = 0;
    if (data->slope_fixed) { /* linear: nothing left to search */
        *curve = (uf_curve){.zero = best.zero,
                            .full = best.full,
                            .log10_ec50 = log10_ec50,
                            .hill_slope = 1,
                            .rss = best.rss,
                            .found = 1};
        return UF_OK;
    }
    for (int j = 0; j < SLOPES; j++) {
        start s = plateaus_at(data, log10_ec50, start_slopes[j]);
        if (s.rss < best.rss)
            best = s;
    }
    return fit_from(&job, best, curve, error);
}
