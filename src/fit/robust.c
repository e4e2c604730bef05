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

double uf_dense_mode(const double *sorted, size_t count, double share)
{
    size_t run = (size_t)(share * (double)count), best = 0;
    if (run < 8 || run > count)
        return uf_half_sample_mode(sorted, count);
    for (size_t k = 1; k + run <= count; k++)
        if (sorted[k + run - 1] - sorted[k] < sorted[best + run - 1] - sorted[best])
            best = k;
    return uf_half_sample_mode(sorted + best, run);
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

/* Puts the ranks k[0 .. n-1] (ascending, all under count - base) of values[base ..] in place: the middle one first,
 * which halves what the others have to look at. */
static void select_ranks(float *values, size_t base, size_t count, const size_t *k, int n)
{
    if (n < 1 || !count)
        return;
    int middle = n / 2;
    size_t at = k[middle] - base;
    (void)uf_select(values + base, count, at);
    int left = middle, right = middle;
    while (left > 0 && k[left - 1] == k[middle])
        left--;
    while (right + 1 < n && k[right + 1] == k[middle])
        right++;
    select_ranks(values, base, at, k, left);
    select_ranks(values, base + at + 1, count - at - 1, k + right + 1, n - right - 1);
}

enum { MOST_QUANTILES = 16 };

void uf_quantiles(float *values, size_t count, size_t total, const double *q, double *out, int n)
{
    size_t k[MOST_QUANTILES] = {0};
    double part[MOST_QUANTILES] = {0};
    int known = 0; /* those before the missing ones */
    for (int j = 0; j < n; j++) {
        double at = total ? q[j] * (double)(total - 1) : 0.0;
        size_t rank = (size_t)at;
        out[j] = (double)NAN;
        if (known == j && j < MOST_QUANTILES && rank + (at > (double)rank) < count) {
            k[j] = rank;
            part[j] = at - (double)rank;
            known++;
        }
    }
    select_ranks(values, 0, count, k, known);
    for (int j = 0; j < known; j++) {
        double low = (double)values[k[j]], high = low;
        if (part[j] > 0) {
            /* The next larger one lies before the next rank that is in place. */
            size_t end = count;
            for (int i = known - 1; i > j && k[i] > k[j]; i--)
                end = k[i] + 1;
            high = (double)values[k[j] + 1];
            for (size_t m = k[j] + 2; m < end; m++)
                high = (double)values[m] < high ? (double)values[m] : high;
        }
        out[j] = low + part[j] * (high - low);
    }
}
