/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "fit/robust.h"

#include <math.h>
#include <stdlib.h>

static int ascending(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

void uf_sort(double *values, size_t count)
{
    qsort(values, count, sizeof *values, ascending);
}

double uf_sorted_quantile(const double *values, size_t count, double q)
{
    if (!count)
        return (double)NAN;
    double at = q * (double)(count - 1);
    size_t low = (size_t)at;
    if (low + 1 >= count)
        return values[count - 1];
    return values[low] + (at - (double)low) * (values[low + 1] - values[low]);
}

double uf_median(double *values, size_t count)
{
    uf_sort(values, count);
    return uf_sorted_quantile(values, count, 0.5);
}

double uf_half_sample_mode(const double *sorted, size_t count)
{
    if (!count)
        return (double)NAN;
    while (count > 3) {
        size_t half = (count + 1) / 2, best = 0;
        double narrowest = sorted[half - 1] - sorted[0];
        for (size_t k = 1; k + half <= count; k++) {
            double range = sorted[k + half - 1] - sorted[k];
            if (range < narrowest) {
                narrowest = range;
                best = k;
            }
        }
        sorted += best;
        count = half;
    }
    if (count == 3)
        return sorted[1] - sorted[0] < sorted[2] - sorted[1] ? (sorted[0] + sorted[1]) / 2
                                                             : (sorted[1] + sorted[2]) / 2;
    return count == 2 ? (sorted[0] + sorted[1]) / 2 : sorted[0];
}
