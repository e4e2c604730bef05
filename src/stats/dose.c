/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/dose.h"

#include <math.h>
#include <stdlib.h>

#include "fit/distribution.h"
#include "fit/robust.h"
#include "stats/dose_curve.h"
#include "stats/summary.h"
#include "stats/variance.h"

enum { PURE_DEGREES_LEAST = 3, MOST_HALVINGS = 60 };
static const double farthest_decades = 2.5, slope_steepest = 15, slope_flattest = 1 / 15.0, misfit_level = 0.01;

const char *uf_dose_status_word(uf_dose_status status)
{
    static const char *const words[] = {"ok", "above-range", "below-range", "flat", "not-bracketed", "no-fit"};
    return words[status];
}

/* ---- what there is to fit ----------------------------------------------------------------------- */

static int counts(const uf_dose_point *p)
{
    return p->dose >= 0 && isfinite(p->dose) && isfinite(p->response);
}

/* The data, and each point's dose by number: different doses ascending from 0. */
typedef struct dose_job {
    uf_dose_data data;
    double *doses; /* sorted, each once */
    int *group;
    int groups;
    double level;
} dose_job;

static void job_free(dose_job *job)
{
    free(job->data.log_dose);
    free(job->data.response);
    free(job->doses);
    free(job->group);
}

static void number_doses(dose_job *job, const uf_dose_point *points, size_t count)
{
    size_t n = 0;
    for (size_t k = 0; k < count; k++)
        if (counts(points + k))
            job->doses[n++] = points[k].dose;
    uf_sort(job->doses, n);
    for (size_t k = 0; k < n; k++)
        if (!k || job->doses[k] > job->doses[job->groups - 1])
            job->doses[job->groups++] = job->doses[k];
    n = 0;
    for (size_t k = 0; k < count; k++)
        if (counts(points + k))
            for (int g = 0; g < job->groups; g++)
                if (job->doses[g] == points[k].dose)
                    job->group[n++] = g;
}

static int job_new(dose_job *job, const uf_dose_point *points, size_t count)
{
    uf_dose_data *d = &job->data;
    d->log_dose = calloc(count + 1, sizeof *d->log_dose);
    d->response = calloc(count + 1, sizeof *d->response);
    job->doses = calloc(count + 1, sizeof *job->doses);
    job->group = calloc(count + 1, sizeof *job->group);
    if (!d->log_dose || !d->response || !job->doses || !job->group)
        return 0;
    for (size_t k = 0; k < count; k++)
        if (counts(points + k)) {
            d->log_dose[d->count] = points[k].dose > 0 ? log10(points[k].dose) : -INFINITY;
            d->response[d->count++] = points[k].response;
        }
    number_doses(job, points, count);
    return 1;
}

static void describe_doses(dose_job *job, uf_dose_fit *fit)
{
    int has_zero = job->groups > 0 && job->doses[0] <= 0;
    fit->points = job->data.count;
    fit->doses = job->groups - has_zero;
    if (fit->doses) {
        fit->dose_min = job->doses[has_zero];
        fit->dose_max = job->doses[job->groups - 1];
        job->data.log_low = log10(fit->dose_min);
        job->data.log_high = log10(fit->dose_max);
    }
    if (fit->doses < UF_DOSES_FOR_SLOPE) {
        fit->notes |= UF_NOTE_SLOPE_FIXED;
        job->data.slope_fixed = 1;
    }
}

/* ---- any effect? -------------------------------------------------------------------------------- */

/* The curve has `parameters`, a constant one. */
static void test_against_constant(const dose_job *job, const uf_curve *curve, int parameters, uf_dose_fit *fit)
{
    uf_moments m = uf_moments_of(job->data.response, NULL, job->data.count);
    double df = (double)job->data.count - parameters, constant = m.sd * m.sd * ((double)m.count - 1);
    fit->notes |= UF_NOTE_NO_PURE_ERROR;
    fit->effect_f = df > 0 ? (constant - curve->rss) / (parameters - 1) / (curve->rss / df) : (double)NAN;
    fit->effect_p = uf_f_above(fit->effect_f, parameters - 1, df);
}

/* What the curve leaves beyond the scatter within doses. */
static void test_misfit(const dose_job *job, const uf_curve *curve, int parameters, const uf_one_way *between,
                        uf_dose_fit *fit)
{
    double pure = between->ms_within * between->df_within, df = (double)(job->groups - parameters);
    if (!curve->found || !(df > 0) || !(between->ms_within > 0))
        return;
    fit->misfit_p = uf_f_above(fmax(0, curve->rss - pure) / df / between->ms_within, df, between->df_within);
    if (fit->misfit_p < misfit_level)
        fit->notes |= UF_NOTE_MISFIT;
}

static uf_status test_effect(const dose_job *job, const uf_curve *curve, int parameters, uf_dose_fit *fit,
                             uf_error *error)
{
    uf_one_way between;
    uf_status status =
        uf_one_way_fit(job->data.response, job->group, job->data.count, job->groups, 0.95, &between, error);
    if (status != UF_OK)
        return status;
    if (between.df_within >= PURE_DEGREES_LEAST) {
        test_misfit(job, curve, parameters, &between, fit);
        fit->effect_f = between.ms_within > 0 ? between.f : between.ms_between > 0 ? INFINITY : (double)NAN;
        fit->effect_p = between.ms_within > 0 ? between.p : between.ms_between > 0 ? 0 : 1;
    } else if (curve->found)
        test_against_constant(job, curve, parameters, fit);
    return UF_OK;
}

/* ---- profile ------------------------------------------------------------------------------------ */

/* Rss of the best curve through a given EC50, over the limit that an interval allows, less 1. */
static uf_status over_limit(const dose_job *job, const uf_curve *best, double place, double limit, double *over,
                            uf_error *error)
{
    uf_curve curve;
    uf_status status = uf_curve_at(&job->data, place, best->hill_slope, &curve, error);
    *over = curve.found ? curve.rss / limit - 1 : (double)NAN;
    return status;
}

/* Where the profile passes the limit between an EC50 inside and one outside, by regula falsi with the staying end's
 * weight halved (Dowell and Jarratt 1971, BIT 11:168). */
static uf_status find_crossing(const dose_job *job, const uf_curve *best, double inside, double outside,
                               double over_in, double over_out, double limit, double *end, uf_error *error)
{
    int kept = 0;
    double over = over_out;
    *end = outside;
    for (int k = 0; k < MOST_HALVINGS && fabs(outside - inside) > 1e-9 && fabs(over) > 1e-10; k++) {
        *end = (inside * over_out - outside * over_in) / (over_out - over_in);
        uf_status status = over_limit(job, best, *end, limit, &over, error);
        if (status != UF_OK)
            return status;
        if (over < 0) {
            inside = *end;
            over_in = over;
            over_out /= kept < 0 ? 2 : 1;
            kept = -1;
        } else {
            outside = *end;
            over_out = over;
            over_in /= kept > 0 ? 2 : 1;
            kept = 1;
        }
    }
    return UF_OK;
}

/* One end of the profile interval as log10 EC50; NaN when it lies farther than the doses can tell. */
static uf_status profile_end(const dose_job *job, const uf_curve *best, double side, double limit, double *end,
                             uf_error *error)
{
    double farthest = (side > 0 ? job->data.log_high : job->data.log_low) + side * farthest_decades;
    double step = isfinite(best->se[2]) ? fmin(0.5, fmax(1e-3, 2 * best->se[2])) : 0.1;
    double inside = best->log10_ec50, over_in = best->rss / limit - 1;
    *end = (double)NAN;
    while (side * (farthest - inside) > 1e-9) {
        double outside = side * fmin(side * (inside + side * step), side * farthest), over;
        uf_status status = over_limit(job, best, outside, limit, &over, error);
        if (status != UF_OK || isnan(over))
            return status;
        if (over >= 0)
            return find_crossing(job, best, inside, outside, over_in, over, limit, end, error);
        inside = outside;
        over_in = over;
        step *= 1.6;
    }
    return UF_OK;
}

/* Both ends at a two-sided level. */
static uf_status profile_interval(const dose_job *job, const uf_curve *best, double df, double level, double *low,
                                  double *high, uf_error *error)
{
    *low = *high = (double)NAN;
    if (!(df > 0) || !(best->rss > 0))
        return UF_OK;
    double limit = best->rss * (1 + uf_f_quantile(level, 1, df) / df);
    uf_status status = profile_end(job, best, -1, limit, low, error);
    return status == UF_OK ? profile_end(job, best, 1, limit, high, error) : status;
}

/* ---- verdict ------------------------------------------------------------------------------------ */

static void take_curve(const uf_curve *c, double df, uf_dose_fit *fit)
{
    fit->zero = c->zero;
    fit->full = c->full;
    fit->log10_ec50 = c->log10_ec50;
    fit->hill_slope = c->hill_slope;
    fit->zero_se = c->se[0];
    fit->full_se = c->se[1];
    fit->log10_ec50_se = c->se[2];
    fit->hill_slope_se = c->se[3];
    fit->bottom = fmin(c->zero, c->full);
    fit->top = fmax(c->zero, c->full);
    fit->direction = (c->full > c->zero) - (c->full < c->zero);
    fit->rss = c->rss;
    fit->df = df;
    fit->residual_sd = df > 0 ? sqrt(c->rss / df) : (double)NAN;
    if (c->hill_slope > slope_steepest || c->hill_slope < slope_flattest)
        fit->notes |= UF_NOTE_SLOPE_AT_LIMIT;
}

/* Intervals and status of a curve that shows an effect. */
static uf_status judge(const dose_job *job, const uf_curve *c, uf_dose_fit *fit, uf_error *error)
{
    double low, high, one_sided = 2 * job->level - 1;
    uf_status status = profile_interval(job, c, fit->df, job->level, &low, &high, error);
    if (status != UF_OK)
        return status;
    fit->ec50 = pow(10, c->log10_ec50);
    fit->ec50_low = pow(10, low);
    fit->ec50_high = pow(10, high);
    int above = c->log10_ec50 > job->data.log_high, below = c->log10_ec50 < job->data.log_low;
    if (!above && !below && !isnan(low) && !isnan(high)) {
        fit->status = UF_DOSE_OK;
        return UF_OK;
    }
    fit->status = above ? UF_DOSE_ABOVE_RANGE : below ? UF_DOSE_BELOW_RANGE : UF_DOSE_NOT_BRACKETED;
    if (above || below)
        fit->ec50 = (double)NAN;
    status = profile_interval(job, c, fit->df, one_sided, &low, &high, error);
    /* A bound on one side only: within the doses, the side that the two-sided interval leaves open stays open. */
    fit->ec50_low = below || (!above && isnan(fit->ec50_low)) ? (double)NAN : pow(10, low);
    fit->ec50_high = above || (!below && isnan(fit->ec50_high)) ? (double)NAN : pow(10, high);
    return status;
}

static uf_status fit_job(const dose_job *job, double alpha, uf_dose_fit *fit, uf_error *error)
{
    int parameters = job->data.slope_fixed ? 3 : 4;
    uf_curve curve = {.found = 0};
    uf_status status = UF_OK;
    if (fit->doses && job->groups >= parameters && job->data.count >= (size_t)parameters)
        status = uf_curve_best(&job->data, &curve, error);
    if (status == UF_OK)
        status = test_effect(job, &curve, parameters, fit, error);
    if (status != UF_OK)
        return status;
    if (fit->effect_p > alpha)
        fit->status = UF_DOSE_FLAT;
    if (!curve.found || fit->status == UF_DOSE_FLAT)
        return UF_OK;
    take_curve(&curve, (double)job->data.count - parameters, fit);
    return judge(job, &curve, fit, error);
}

uf_status uf_dose_fit_one(const uf_dose_point *points, size_t count, double alpha, double level, uf_dose_fit *fit,
                          uf_error *error)
{
    double nan = (double)NAN;
    dose_job job = {.level = level};
    *fit =
        (uf_dose_fit){.status = UF_DOSE_NO_FIT, .dose_min = nan, .dose_max = nan, .effect_f = nan, .effect_p = nan};
    fit->zero = fit->full = fit->log10_ec50 = fit->hill_slope = fit->bottom = fit->top = nan;
    fit->zero_se = fit->full_se = fit->log10_ec50_se = fit->hill_slope_se = nan;
    fit->ec50 = fit->ec50_low = fit->ec50_high = fit->rss = fit->df = fit->residual_sd = fit->misfit_p = nan;
    uf_status status = job_new(&job, points, count) ? UF_OK : uf_fail_memory(error, "a dose curve");
    if (status == UF_OK) {
        describe_doses(&job, fit);
        status = fit_job(&job, alpha, fit, error);
    }
    job_free(&job);
    return status;
}

/* ---- over replicates ---------------------------------------------------------------------------- */

typedef struct tally {
    size_t flat, above, below, inside;
} tally;

static tally tally_of(const uf_dose_fit *fits, size_t count)
{
    tally t = {0};
    for (size_t k = 0; k < count; k++) {
        t.flat += fits[k].status == UF_DOSE_FLAT ? 1 : 0;
        t.above += fits[k].status == UF_DOSE_ABOVE_RANGE ? 1 : 0;
        t.below += fits[k].status == UF_DOSE_BELOW_RANGE ? 1 : 0;
        t.inside += fits[k].status == UF_DOSE_OK || fits[k].status == UF_DOSE_NOT_BRACKETED ? 1 : 0;
    }
    return t;
}

/* What a replicate puts into the mean: its log10 EC50, or the end of its doses when that only bounds it. */
static double log_value(const uf_dose_fit *fit)
{
    switch (fit->status) {
    case UF_DOSE_OK:
    case UF_DOSE_NOT_BRACKETED:
        return fit->log10_ec50;
    case UF_DOSE_ABOVE_RANGE:
        return log10(fit->dose_max);
    case UF_DOSE_BELOW_RANGE:
        return log10(fit->dose_min);
    default:
        return (double)NAN;
    }
}

static void mean_of_fits(const uf_dose_fit *fits, size_t count, uf_dose_combined *c, double *mean)
{
    double n = 0, squares = 0, slope = 0;
    *mean = 0;
    for (size_t k = 0; k < count; k++)
        if (!isnan(log_value(fits + k))) {
            n++;
            *mean += log_value(fits + k);
            slope += log(fits[k].hill_slope);
        }
    *mean /= n;
    for (size_t k = 0; k < count; k++)
        if (!isnan(log_value(fits + k)))
            squares += pow(log_value(fits + k) - *mean, 2);
    c->used = (size_t)n;
    c->hill_slope = exp(slope / n);
    c->log10_sd = n > 1 ? sqrt(squares / (n - 1)) : (double)NAN;
}

static void set_bounds(uf_dose_combined *c, tally t, double mean, double level)
{
    double n = (double)c->used, error = c->log10_sd / sqrt(n);
    double two_sided = uf_t_factor(level, n - 1) * error, one_sided = uf_t_factor(2 * level - 1, n - 1) * error;
    int enough = c->used >= UF_REPLICATES_LEAST;
    if (!enough)
        c->notes |= UF_NOTE_TOO_FEW;
    if (!t.above && !t.below) {
        c->status = UF_DOSE_OK;
        c->ec50 = pow(10, mean);
        if (enough) {
            c->ec50_low = pow(10, mean - two_sided);
            c->ec50_high = pow(10, mean + two_sided);
        }
        return;
    }
    c->notes |= UF_NOTE_CENSORED;
    c->status = 2 * t.above >= c->used && !t.below   ? UF_DOSE_ABOVE_RANGE
                : 2 * t.below >= c->used && !t.above ? UF_DOSE_BELOW_RANGE
                                                     : UF_DOSE_NOT_BRACKETED;
    if (enough && !t.below)
        c->ec50_low = pow(10, mean - one_sided);
    if (enough && !t.above)
        c->ec50_high = pow(10, mean + one_sided);
}

uf_dose_combined uf_dose_combine(const uf_dose_fit *fits, size_t count, double level)
{
    double nan = (double)NAN, mean;
    uf_dose_combined c = {UF_DOSE_NO_FIT, 0, count, 0, nan, nan, nan, nan, nan};
    tally t = tally_of(fits, count);
    if (2 * t.flat > count || (t.flat && !(t.above + t.below + t.inside))) {
        c.status = UF_DOSE_FLAT;
        return c;
    }
    if (!(t.above + t.below + t.inside))
        return c;
    mean_of_fits(fits, count, &c, &mean);
    if (count > 1) {
        set_bounds(&c, t, mean, level);
        return c;
    }
    return (uf_dose_combined){fits->status, fits->notes,     1, 1, fits->ec50, fits->ec50_low, fits->ec50_high,
                              nan,          fits->hill_slope};
}
