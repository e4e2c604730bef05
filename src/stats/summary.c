/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/summary.h"

#include <math.h>
#include <stdlib.h>

typedef struct weighted {
    double value, weight;
} weighted;

static double weight_of(const double *values, const double *weights, size_t k)
{
    double weight = weights ? weights[k] : 1;
    return weight > 0 && !isnan(values[k]) ? weight : 0;
}

static double mean_about(const double *values, const double *weights, size_t count, double about, double total)
{
    double sum = 0;
    for (size_t k = 0; k < count; k++) {
        double w = weight_of(values, weights, k);
        if (w > 0)
            sum += w * (values[k] - about);
    }
    return about + sum / total;
}

uf_moments uf_moments_of(const double *values, const double *weights, size_t count)
{
    uf_moments m = {.mean = (double)NAN, .sd = (double)NAN};
    double squared_weights = 0, squares = 0, rest = 0;
    for (size_t k = 0; k < count; k++) {
        double w = weight_of(values, weights, k);
        m.count += w > 0 ? 1 : 0;
        m.weight += w;
        squared_weights += w * w;
    }
    if (!m.count)
        return m;
    m.mean = mean_about(values, weights, count, mean_about(values, weights, count, 0, m.weight), m.weight);
    if (m.count < 2)
        return m;
    for (size_t k = 0; k < count; k++) {
        double w = weight_of(values, weights, k);
        if (w > 0) {
            double off = values[k] - m.mean;
            squares += w * off * off;
            rest += w * off;
        }
    }
    m.sd = sqrt(fmax(0, squares - rest * rest / m.weight) / (m.weight - squared_weights / m.weight));
    return m;
}

/* ---- middle ---------------------------------------------------------------------------------- */

static int ascending(const void *a, const void *b)
{
    const weighted *p = a, *q = b;
    if (p->value != q->value)
        return p->value < q->value ? -1 : 1;
    return (p->weight > q->weight) - (p->weight < q->weight);
}

static double weighted_median(weighted *items, size_t count, double total)
{
    double below = 0;
    qsort(items, count, sizeof *items, ascending);
    for (size_t k = 0; k < count; k++) {
        below += items[k].weight;
        if (2 * below > total * (1 + 1e-12))
            return items[k].value;
        if (2 * below >= total * (1 - 1e-12) && k + 1 < count)
            return (items[k].value + items[k + 1].value) / 2;
    }
    return count ? items[count - 1].value : (double)NAN;
}

uf_status uf_summarize(const double *values, const double *weights, size_t count, uf_summary *summary,
                       uf_error *error)
{
    *summary = (uf_summary){uf_moments_of(values, weights, count), (double)NAN, (double)NAN};
    size_t used = summary->moments.count;
    if (!used)
        return UF_OK;
    weighted *items = malloc(used * sizeof *items);
    if (!items)
        return uf_fail_memory(error, "a median");
    size_t n = 0;
    for (size_t k = 0; k < count; k++)
        if (weight_of(values, weights, k) > 0)
            items[n++] = (weighted){values[k], weight_of(values, weights, k)};
    summary->median = weighted_median(items, used, summary->moments.weight);
    for (size_t k = 0; k < used; k++)
        items[k].value = fabs(items[k].value - summary->median);
    summary->mad = weighted_median(items, used, summary->moments.weight);
    free(items);
    return UF_OK;
}
