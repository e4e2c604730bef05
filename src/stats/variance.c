/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/variance.h"

#include <assert.h>
#include <math.h>
#include <stdlib.h>

#include "fit/distribution.h"

double uf_design_effect(double cluster_size, double icc)
{
    return 1 + (cluster_size - 1) * icc;
}

/* ---- one level -------------------------------------------------------------------------------- */

/* Means of the groups (second pass included) and of all; n is their sizes. */
static double take_means(const double *values, const int *group, size_t count, int groups, double *n, double *mean)
{
    double total = 0, all = 0, rest = 0;
    for (size_t k = 0; k < count; k++)
        if (!isnan(values[k])) {
            n[group[k]]++;
            total++;
            all += values[k];
        }
    all /= total;
    for (size_t k = 0; k < count; k++)
        if (!isnan(values[k])) {
            mean[group[k]] += values[k] - all; /* less the rough mean: no digits lost to a large common part */
            rest += values[k] - all;
        }
    for (int g = 0; g < groups; g++)
        mean[g] = n[g] > 0 ? all + mean[g] / n[g] : (double)NAN;
    return all + rest / total;
}

static void set_icc(uf_one_way *fit, double level)
{
    double m = fit->group_size, tail = (1 - level) / 2;
    double low = fit->f / uf_f_quantile(1 - tail, fit->df_between, fit->df_within);
    double high = fit->f * uf_f_quantile(1 - tail, fit->df_within, fit->df_between);
    fit->icc_signed = (fit->ms_between - fit->ms_within) / (fit->ms_between + (m - 1) * fit->ms_within);
    fit->icc_low = (low - 1) / (low + m - 1);
    fit->icc_high = (high - 1) / (high + m - 1);
    fit->icc = fmax(0, fit->icc_signed);
    if (fit->icc_signed < 0)
        fit->notes |= UF_NOTE_NEGATIVE_AS_ZERO;
}

static void set_mean_squares(uf_one_way *fit, double between, double within)
{
    double total = between + within;
    fit->df_between = (double)fit->groups - 1;
    fit->df_within = (double)fit->count - (double)fit->groups;
    if (fit->df_within > 0) {
        fit->ms_within = within / fit->df_within;
        fit->residual_sd = sqrt(fit->ms_within);
    }
    if (fit->df_between > 0)
        fit->ms_between = between / fit->df_between;
    if (!(fit->df_within > 0) || !(fit->df_between > 0)) {
        fit->notes |= UF_NOTE_TOO_FEW;
        return;
    }
    fit->r_squared = total > 0 ? between / total : (double)NAN;
    if (!(fit->ms_within > 0))
        fit->notes |= UF_NOTE_NO_SPREAD;
    else
        fit->f = fit->ms_between / fit->ms_within;
    fit->p = uf_f_above(fit->f, fit->df_between, fit->df_within);
}

static void fit_from_means(const double *values, const int *group, size_t count, int groups, const double *n,
                           const double *mean, double all, double level, uf_one_way *fit)
{
    double between = 0, within = 0, total = 0, squares = 0;
    for (int g = 0; g < groups; g++)
        if (n[g] > 0) {
            fit->groups++;
            total += n[g];
            squares += n[g] * n[g];
            between += n[g] * pow(mean[g] - all, 2);
        }
    for (size_t k = 0; k < count; k++)
        if (!isnan(values[k]))
            within += pow(values[k] - mean[group[k]], 2);
    fit->count = (size_t)total;
    set_mean_squares(fit, between, within);
    if (fit->groups > 1)
        fit->group_size = (total - squares / total) / ((double)fit->groups - 1);
    if (!isnan(fit->f))
        set_icc(fit, level);
}

uf_status uf_one_way_fit(const double *values, const int *group, size_t count, int groups, double level,
                         uf_one_way *fit, uf_error *error)
{
    double nan = (double)NAN;
    assert(groups >= 0);
    *fit = (uf_one_way){0, 0, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, 0};
    double *n = calloc((size_t)groups + 1, sizeof *n), *mean = calloc((size_t)groups + 1, sizeof *mean);
    uf_status status = n && mean ? UF_OK : uf_fail_memory(error, "an analysis of variance");
    if (status == UF_OK) {
        double all = take_means(values, group, count, groups, n, mean);
        fit_from_means(values, group, count, groups, n, mean, all, level, fit);
    }
    free(n);
    free(mean);
    return status;
}
