/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Mean, spread and middle of a list of numbers. */
#ifndef UF_STATS_SUMMARY_H
#define UF_STATS_SUMMARY_H

#include <stddef.h>

#include "base/status.h"

/* All in the unit of the values. */
typedef struct uf_moments {
    size_t count;  /* values that took part */
    double weight; /* their weights' sum */
    double mean;   /* NaN for none */
    double sd;     /* of the population the values stand for; NaN below two values */
} uf_moments;

typedef struct uf_summary {
    uf_moments moments;
    double median, mad; /* NaN for none */
} uf_summary;

/*
 * Mean and standard deviation in two passes, each corrected for the rounding of the mean before it (Chan, Golub and
 * LeVeque 1983, Am. Stat. 37:242, eq. 1.7). `weights` may be NULL: all 1. They stand for how many cells a cell speaks
 * for (the edge weight, one over the chance that a cell of its size is whole in the field): mean = sum w x / W, and
 * the variance has the divisor W - sum w^2 / W, which makes it unbiased for weights that do not hang on the value,
 * and n - 1 when all are alike.
 *
 * A value that is NaN, and a weight that is not above 0, take no part.
 */
uf_moments uf_moments_of(const double *values, const double *weights, size_t count);

/*
 * The same with the median and the median absolute deviation from it (not scaled: 1.4826 of it estimates a normal's
 * sd). The weighted median is where the weights below and above balance, the mean of two neighbours where they
 * balance between them; with equal weights this is the usual one. UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_summarize(const double *values, const double *weights, size_t count, uf_summary *summary,
                                   uf_error *error);

#endif
