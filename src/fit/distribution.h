/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distribution functions, by GSL; what GSL has not, by quadrature over its parts. */
#ifndef UF_FIT_DISTRIBUTION_H
#define UF_FIT_DISTRIBUTION_H

/* Half width of a two-sided interval of the given level (0.95), in standard errors that have `df` degrees of freedom
 * (Student's t). NaN unless df > 0. */
double uf_t_factor(double level, double df);

/* Probability of Student's t of `df` degrees at or below t, and of one farther from 0 than |t|. NaN unless df > 0. */
double uf_t_below(double t, double df);
double uf_t_beyond(double t, double df);

/* Probability of an F of (df1, df2) degrees above f, and the value it stays below with probability 0 < p < 1.
 * NaN unless both are above 0. */
double uf_f_above(double f, double df1, double df2);
double uf_f_quantile(double p, double df1, double df2);

/* The standard normal's distribution function and, for 0 < p < 1, its quantile. */
double uf_normal_below(double z);
double uf_normal_quantile(double p);

/* Quantile 0 < p < 1 of the beta distribution of shapes a, b > 0. */
double uf_beta_quantile(double p, double a, double b);

/*
 * Probability of a noncentral t of `df` >= 1 degrees and noncentrality `delta` at or below t: the integral of Phi(t s
 * - delta) over the distribution of s = sqrt(chi-square / df) (Johnson, Kotz and Balakrishnan 1995, Continuous
 * Univariate Distributions, vol. 2, ch. 31). Good to 1e-11. NaN for df below 1 or anything not finite.
 */
double uf_noncentral_t_below(double t, double df, double delta);

/* The noncentrality at which a noncentral t of `df` degrees stays at or below t with probability 0 < p < 1 (good to
 * 1e-9 of its size): the end of an interval for an effect size. NaN where uf_noncentral_t_below is. */
double uf_noncentrality(double t, double df, double p);

/* ---- quadrature ------------------------------------------------------------------------------ */

typedef double uf_integrand(double x, void *context);

/* The integral from `low` to `high` of a smooth function, to about 1e-13 in absolute terms: Gauss, Kronrod and
 * Patterson's nested rules (GSL's qng) on `panels` equal parts, each halved where the rules do not agree. Takes no
 * memory. */
double uf_integral(uf_integrand *f, void *context, double low, double high, int panels);

/* Density at s > 0 of s = sqrt(chi-square / df), the ratio of an estimated to the true standard deviation, and the
 * range beyond which less than 1e-14 of it lies. df >= 1. */
double uf_sd_ratio_density(double s, double df);
void uf_sd_ratio_range(double df, double *low, double *high);

#endif
