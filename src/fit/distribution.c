/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "fit/distribution.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_integration.h>
#include <gsl/gsl_sf_gamma.h>
#include <math.h>

/* ---- by GSL ----------------------------------------------------------------------------------- */

double uf_t_factor(double level, double df)
{
    gsl_set_error_handler_off();
    return df > 0 ? gsl_cdf_tdist_Pinv(0.5 + level / 2, df) : (double)NAN;
}

double uf_t_below(double t, double df)
{
    gsl_set_error_handler_off();
    return df > 0 ? gsl_cdf_tdist_P(t, df) : (double)NAN;
}

double uf_t_beyond(double t, double df)
{
    gsl_set_error_handler_off();
    return df > 0 ? 2 * gsl_cdf_tdist_Q(fabs(t), df) : (double)NAN;
}

double uf_f_above(double f, double df1, double df2)
{
    gsl_set_error_handler_off();
    return df1 > 0 && df2 > 0 ? gsl_cdf_fdist_Q(f, df1, df2) : (double)NAN;
}

double uf_f_quantile(double p, double df1, double df2)
{
    gsl_set_error_handler_off();
    return df1 > 0 && df2 > 0 ? gsl_cdf_fdist_Pinv(p, df1, df2) : (double)NAN;
}

double uf_normal_below(double z)
{
    return 0.5 * erfc(-z * 0.70710678118654752440);
}

double uf_normal_quantile(double p)
{
    gsl_set_error_handler_off();
    return gsl_cdf_ugaussian_Pinv(p);
}

double uf_beta_quantile(double p, double a, double b)
{
    gsl_set_error_handler_off();
    return gsl_cdf_beta_Pinv(p, a, b);
}

/* ---- quadrature ------------------------------------------------------------------------------ */

enum { MOST_HALVINGS = 14 };
static const double close_enough = 1e-14, close_enough_of_it = 1e-12;

static double integral_of_part(const gsl_function *f, double low, double high, int halvings)
{
    double value = 0, error = 0, middle = (low + high) / 2;
    size_t calls = 0;
    int status = gsl_integration_qng(f, low, high, close_enough, close_enough_of_it, &value, &error, &calls);
    if (status == GSL_SUCCESS || halvings >= MOST_HALVINGS || error < close_enough)
        return value;
    return integral_of_part(f, low, middle, halvings + 1) + integral_of_part(f, middle, high, halvings + 1);
}

double uf_integral(uf_integrand *f, void *context, double low, double high, int panels)
{
    gsl_function function = {f, context};
    double sum = 0, width = (high - low) / panels;
    gsl_set_error_handler_off();
    for (int k = 0; k < panels; k++)
        sum += integral_of_part(&function, low + k * width, low + (k + 1) * width, 0);
    return sum;
}

double uf_sd_ratio_density(double s, double df)
{
    double half = df / 2;
    if (!(s > 0))
        return df > 1 || s < 0 ? 0 : 2 * sqrt(half) / 1.7724538509055160273; /* df 1: a folded normal's top */
    return 2 * exp(half * log(half) - gsl_sf_lngamma(half) + (df - 1) * log(s) - half * s * s);
}

/* For many degrees s is normal about 1 with sd 1 / sqrt(2 df); for few its lower tail ends at 0 and the upper is no
 * heavier than that of one degree, a folded normal's. */
void uf_sd_ratio_range(double df, double *low, double *high)
{
    double reach = 8.5 / sqrt(2 * df);
    *low = fmax(0, 1 - reach);
    *high = 1 + reach * (df < 20 ? 1.2 : 1);
}

/* ---- noncentral t ----------------------------------------------------------------------------- */

typedef struct noncentral {
    double t, df, delta;
} noncentral;

static double noncentral_part(double s, void *context)
{
    const noncentral *n = context;
    return uf_normal_below(n->t * s - n->delta) * uf_sd_ratio_density(s, n->df);
}

double uf_noncentral_t_below(double t, double df, double delta)
{
    noncentral n = {t, df, delta};
    double low, high;
    if (!(df >= 1) || !isfinite(t) || !isfinite(delta) || !isfinite(df))
        return (double)NAN;
    uf_sd_ratio_range(df, &low, &high);
    /* Phi climbs within some 8 / |t| of s = delta / t: parts end there, lest a steep climb fall between their points. */
    double foot = t != 0 ? (delta - 8) / t : low, top = t != 0 ? (delta + 8) / t : high;
    double from = fmin(fmax(fmin(foot, top), low), high), to = fmin(fmax(fmax(foot, top), low), high);
    double sum = 0;
    if (from > low)
        sum += uf_integral(noncentral_part, &n, low, from, 6);
    if (to > from)
        sum += uf_integral(noncentral_part, &n, from, to, 6);
    if (high > to)
        sum += uf_integral(noncentral_part, &n, to, high, 6);
    return fmin(1, sum);
}

/* The probability falls as delta grows, so that halving finds it. */
double uf_noncentrality(double t, double df, double p)
{
    double reach = 10 + fabs(t), low = t - reach, high = t + reach;
    if (isnan(uf_noncentral_t_below(t, df, 0)) || !(p > 0 && p < 1))
        return (double)NAN;
    while (uf_noncentral_t_below(t, df, low) < p)
        low -= reach *= 2;
    while (uf_noncentral_t_below(t, df, high) > p)
        high += reach *= 2;
    for (int k = 0; k < 60 && high - low > 1e-11 * (1 + fabs(low)); k++) {
        double middle = (low + high) / 2;
        if (uf_noncentral_t_below(t, df, middle) > p)
            low = middle;
        else
            high = middle;
    }
    return (low + high) / 2;
}
