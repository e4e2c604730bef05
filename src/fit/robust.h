/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Order statistics. They reorder or copy nothing the caller still needs: values come in scratch. */
#ifndef UF_FIT_ROBUST_H
#define UF_FIT_ROBUST_H

#include <stddef.h>

/* Median of `values`, the mean of the middle two for an even count, NaN for none. Sorts `values`. */
double uf_median(double *values, size_t count);

/* Quantile 0 <= q <= 1 of sorted values by linear interpolation between order statistics at (n - 1) q
 * (definition 7 of Hyndman and Fan 1996, Am. Stat. 50:361; numpy's default). NaN for none. */
double uf_sorted_quantile(const double *values, size_t count, double q);

/* Sorts ascending. No NaN. */
void uf_sort(double *values, size_t count);

/* Mode by repeated halving: the half of the sorted sample with the smallest range, again and again (Bickel and
 * Fruehwirth 2006, Comput. Stat. Data Anal. 50:3500). Sorted values in, NaN for none. */
double uf_half_sample_mode(const double *sorted, size_t count);

/* The same within the narrowest run of `share` of the sample: finds a peak that holds little more than that share,
 * where halving the whole sample would follow the larger, broader part. */
double uf_dense_mode(const double *sorted, size_t count, double share);

/* Moves the k-th smallest (from 0) of `count` floats to values[k], smaller ones before it and larger ones after
 * (Hoare 1961, Commun. ACM 4:321), in linear time on average. No NaN. Returns it. */
float uf_select(float *values, size_t count, size_t k);

/* Quantiles at ascending q[0 .. n-1] (at most 16) of `count` floats out of `total`, the missing ones counting as larger than
 * all: as uf_sorted_quantile over all `total`; NaN where the answer lies among the missing. Reorders values. */
void uf_quantiles(float *values, size_t count, size_t total, const double *q, double *out, int n);

#endif
