/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distribution functions, by GSL. */
#ifndef UF_FIT_DISTRIBUTION_H
#define UF_FIT_DISTRIBUTION_H

/* Half width of a two-sided interval of the given level (0.95), in standard errors that have `df` degrees of freedom
 * (Student's t). NaN unless df > 0. */
double uf_t_factor(double level, double df);

#endif
