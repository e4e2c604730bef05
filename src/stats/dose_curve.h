/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The curve of stats/dose.h and its least squares. For use inside src/stats. */
#ifndef UF_STATS_DOSE_CURVE_H
#define UF_STATS_DOSE_CURVE_H

#include "fit/nonlinear.h"
#include "stats/dose.h"

typedef struct uf_dose_data {
    size_t count;
    double *log_dose; /* log10; -INFINITY for dose 0 */
    double *response;
    double log_low, log_high; /* lowest and highest above 0 */
    int slope_fixed;          /* at 1 */
} uf_dose_data;

typedef struct uf_curve {
    double zero, full, log10_ec50, hill_slope;
    double se[4]; /* in this order, from the scatter; NaN for what was held */
    double rss;
    int found;
} uf_curve;

/* The best curve, from several starts. */
UF_MUST_USE uf_status uf_curve_best(const uf_dose_data *data, uf_curve *curve, uf_error *error);

/* The best curve whose EC50 is held; `near` is a slope to start from beside the grid's. */
UF_MUST_USE uf_status uf_curve_at(const uf_dose_data *data, double log10_ec50, double near, uf_curve *curve,
                                  uf_error *error);

#endif
