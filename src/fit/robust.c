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

static float middle_of_three(float a, float b, float c)
{
    if (a > b) {
        float swap = a;
        a = b;
        b = swap;
    }
    return c < a ? a : c > b ? b : c;
}

float uf_select(float *values, size_t count, size_t k)
{
    size_t low = 0, high = count - 1;
    while (low < high) {
        float pivot = middle_of_three(values[low], values[low + (high - low) / 2], values[high]);
        size_t i = low, j = high;
        for (;;) {
            while (values[i] < pivot)
                i++;
            while (values[j] > pivot)
                j--;
            if (i >= j)
                break;
            float swap = values[i];
            values[i++] = values[j];
            values[j--] = swap;
        }
        /* Now all up to j are at most the pivot and all from j + 1 at least. */
        size_t last_low = values[j] <= pivot ? j : j - 1;
        if (k <= last_low)
            high = last_low < high ? last_low : high - 1;
        else
            low = last_low + 1;
    }
    return values[k];
}

void uf_quantiles(float *values, size_t count, size_t total, const double *q, double *out, int n)
{
    size_t from = 0;
    for (int j = 0; j < n; j++) {
        double at = total ? q[j] * (double)(total - 1) : 0.0;
        size_t k = (size_t)at;
        double part = at - (double)k;
        size_t last = part > 0 ? k + 1 : k;
        if (last >= count) {
            out[j] = (double)NAN;
            continue;
        }
        double low = (double)uf_select(values + from, count - from, k - from), high = low;
        if (last > k) {
            high = (double)values[last];
            for (size_t m = last; m < count; m++)
                high = (double)values[m] < high ? (double)values[m] : high;
        }
        out[j] = low + part * (high - low);
        from = k;
    }
}
