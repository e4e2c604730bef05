/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The middle of a pixel's values over images, whatever crossed it in some of them. */
#include <math.h>

#include "calibrate/flat_parts.h"
#include "fit/robust.h"

/* Of normal values one in two thousand lies farther out. */
static const double film_sigma = 3.5;

/* Cells lie on one side only and begin with faint rims: closer, though one background value in eighty goes too. */
static const double cells_sigma = 2.5;

/* Fewer values cannot tell which of them stands out. */
enum { LEAST_TO_REJECT = 5, ROUNDS = 50 };

/* From a median absolute departure, or the distance of the lower quartile from the median, which is as large for
 * normal values. */
static double robust_sd(double departure, double median, double typical_sd)
{
    return fmax(UF_MAD_TO_SD * departure, typical_sd * sqrt(fmax(0.01, median)));
}

static double median_of(float *values, size_t n)
{
    size_t middle = (n - 1) / 2;
    float low = uf_select(values, n, middle), next = n > 1 ? values[middle + 1] : low;
    for (size_t k = middle + 2; k < n; k++) /* the rest are no smaller than `low` */
        next = values[k] < next ? values[k] : next;
    return n % 2 ? (double)low : ((double)low + (double)next) / 2;
}

static uf_middle middle_of_film(float *values, size_t n, double typical_sd)
{
    uf_middle m = {.low = -INFINITY, .high = INFINITY};
    m.median = median_of(values, n);
    for (size_t k = 0; k < n; k++)
        values[k] = fabsf(values[k] - (float)m.median);
    m.sd = robust_sd(median_of(values, n), m.median, typical_sd);
    if (n >= LEAST_TO_REJECT) {
        m.low = m.median - film_sigma * m.sd;
        m.high = m.median + film_sigma * m.sd;
    }
    return m;
}

/* Shell's sort with Ciura's gaps (2001, FCT, Lect. Notes Comput. Sci. 2138:106): short, and quick for tens of
 * values. */
static void sort_floats(float *values, size_t n)
{
    static const size_t gaps[] = {8831, 3927, 1750, 701, 301, 132, 57, 23, 10, 4, 1};
    for (size_t g = 0; g < sizeof gaps / sizeof *gaps; g++)
        for (size_t k = gaps[g]; k < n; k++) {
            float value = values[k];
            size_t at = k;
            for (; at >= gaps[g] && values[at - gaps[g]] > value; at -= gaps[g])
                values[at] = values[at - gaps[g]];
            values[at] = value;
        }
}

static double sorted_quantile(const float *values, size_t n, double q)
{
    double at = q * (double)(n - 1);
    size_t low = (size_t)at;
    double a = (double)values[low], b = low + 1 < n ? (double)values[low + 1] : a;
    return a + (at - (double)low) * (b - a);
}

/* From the lowest quarter upwards, the sd from the lower quartile, which cells do not reach. */
static uf_middle middle_of_background(float *values, size_t n, double typical_sd)
{
    uf_middle m = {.low = -INFINITY, .high = INFINITY};
    sort_floats(values, n);
    size_t kept = n >= LEAST_TO_REJECT ? (n + 3) / 4 : n;
    for (int round = 0; round < ROUNDS; round++) {
        size_t before = kept;
        m.median = sorted_quantile(values, kept, 0.5);
        m.sd = robust_sd(m.median - sorted_quantile(values, kept, 0.25), m.median, typical_sd);
        if (n < LEAST_TO_REJECT)
            return m;
        m.high = m.median + cells_sigma * m.sd;
        for (kept = 0; kept < n && (double)values[kept] <= m.high;)
            kept++;
        if (kept == before)
            break;
    }
    m.low = m.median - cells_sigma * m.sd;
    return m;
}

uf_middle uf_flat_middle(uf_flat_sample sample, float *values, size_t n, double typical_sd)
{
    return sample == UF_FLAT_CELLS ? middle_of_background(values, n, typical_sd)
                                   : middle_of_film(values, n, typical_sd);
}

double uf_flat_spread(uf_flat_sample sample, float *values, size_t n, double least_sd)
{
    float median = (float)uf_flat_middle(sample, values, n, 0).median;
    double sd = fmax(least_sd, 0);
    size_t counted = 0;
    /* the film's middle has left the values' absolute departures, that of cells their order */
    for (size_t k = 0; k < n; k++)
        if (sample != UF_FLAT_CELLS)
            values[counted++] = values[k];
        else if (values[k] <= median)
            values[counted++] = median - values[k];
    sd = fmax(sd, UF_MAD_TO_SD * median_of(values, counted));
    for (int round = 0; round < ROUNDS && sd > 0; round++) {
        double squares = 0, within = 0, before = sd;
        for (size_t k = 0; k < counted; k++)
            if ((double)values[k] <= film_sigma * sd) {
                squares += (double)values[k] * (double)values[k];
                within += sample == UF_FLAT_CELLS && values[k] == 0.0f ? 0.5 : 1; /* half of those lie above */
            }
        sd = fmax(least_sd, sqrt(squares / within));
        if (fabs(sd - before) < 1e-6 * before)
            break;
    }
    return sd;
}
