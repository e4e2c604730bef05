/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The chi-square distribution, by GSL. */
#ifndef UF_FIT_CHI_SQUARE_H
#define UF_FIT_CHI_SQUARE_H

/* The value that a chi-square of `degrees` > 0 stays below with probability 0 < p < 1. */
double uf_chi_square_quantile(double p, double degrees);

/* The same for the probability of staying above, which keeps its digits where p is next to 1. */
double uf_chi_square_upper_quantile(double p_above, double degrees);

/* Probability of a chi-square of `degrees` above `value`; NaN unless degrees > 0. */
double uf_chi_square_above(double value, double degrees);

#endif
