/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Replicate, well, cell. Rows are sorted by who they belong to, so that each treatment, replicate and well is one
 * run of rows, and the sums of squares and the coefficients of their expectation fall out of one walk through the
 * runs. */
#include <math.h>
#include <stdlib.h>

#include "stats/variance.h"

typedef struct item {
    double value;
    int key[3]; /* treatment, replicate, well */
    size_t place;
} item;

static int by_owner(const void *a, const void *b)
{
    const item *x = a, *y = b;
    for (int k = 0; k < 3; k++)
        if (x->key[k] != y->key[k])
            return x->key[k] < y->key[k] ? -1 : 1;
    return (x->place > y->place) - (x->place < y->place);
}

/* The end of the run that starts at `first` and shares its keys down to `depth` (1 treatment, 2 replicate, 3 well). */
static size_t run_end(const item *items, size_t count, size_t first, int depth)
{
    size_t end = first + 1;
    for (; end < count; end++)
        for (int k = 0; k < depth; k++)
            if (items[end].key[k] != items[first].key[k])
                return end;
    return end;
}

static double mean_of(const item *items, size_t first, size_t end)
{
    double sum = 0, n = (double)(end - first), rest = 0;
    for (size_t k = first; k < end; k++)
        sum += items[k].value;
    for (size_t k = first; k < end; k++)
        rest += items[k].value - sum / n;
    return sum / n + rest / n;
}

/* Sums over runs; `wells_by` sum n_well^2, divided by the size of what holds the well. */
typedef struct walk {
    double squares[UF_STRATA];
    double wells_by_replicate, wells_by_treatment, replicates_by_treatment;
    double wells_squared, replicates_squared;
} walk;

static void walk_replicate(const item *items, size_t first, size_t end, double treatment_size, walk *w,
                           uf_components *c)
{
    double mean = mean_of(items, first, end), size = (double)(end - first);
    for (size_t from = first, to; from < end; from = to) {
        to = run_end(items, end, from, 3);
        double well = mean_of(items, from, to), n = (double)(to - from);
        for (size_t k = from; k < to; k++)
            w->squares[UF_STRATUM_CELL] += pow(items[k].value - well, 2);
        w->squares[UF_STRATUM_WELL] += n * pow(well - mean, 2);
        w->wells_by_replicate += n * n / size;
        w->wells_by_treatment += n * n / treatment_size;
        w->wells_squared += n * n;
        c->wells++;
    }
}

static void walk_treatment(const item *items, size_t first, size_t end, walk *w, uf_components *c)
{
    double mean = mean_of(items, first, end), size = (double)(end - first);
    for (size_t from = first, to; from < end; from = to) {
        to = run_end(items, end, from, 2);
        double n = (double)(to - from);
        w->squares[UF_STRATUM_REPLICATE] += n * pow(mean_of(items, from, to) - mean, 2);
        w->replicates_by_treatment += n * n / size;
        w->replicates_squared += n * n;
        walk_replicate(items, from, to, size, w, c);
        c->replicates++;
    }
    c->treatments++;
}

/* ---- from mean squares to variances ------------------------------------------------------------- */

static void set_mean_squares(const walk *w, uf_components *c)
{
    double cells = (double)c->cells, wells = (double)c->wells, replicates = (double)c->replicates;
    const double df[UF_STRATA] = {replicates - (double)c->treatments, wells - replicates, cells - wells};
    for (int k = 0; k < UF_STRATA; k++) {
        c->df[k] = df[k];
        c->mean_square[k] = df[k] > 0 ? w->squares[k] / df[k] : (double)NAN;
    }
    c->well_size = df[UF_STRATUM_WELL] > 0 ? (cells - w->wells_by_replicate) / df[UF_STRATUM_WELL] : (double)NAN;
    if (df[UF_STRATUM_REPLICATE] > 0) {
        c->replicate_well_size = (w->wells_by_replicate - w->wells_by_treatment) / df[UF_STRATUM_REPLICATE];
        c->replicate_size = (cells - w->replicates_by_treatment) / df[UF_STRATUM_REPLICATE];
    }
}

/* A well a replicate: what wells do is part of what replicates do. */
static double well_part(const uf_components *c)
{
    return c->df[UF_STRATUM_WELL] > 0 ? c->replicate_well_size * c->variance_signed[UF_STRATUM_WELL] : 0;
}

static void set_variances(uf_components *c)
{
    const double *ms = c->mean_square;
    double *v = c->variance_signed;
    v[UF_STRATUM_CELL] = ms[UF_STRATUM_CELL];
    v[UF_STRATUM_WELL] = (ms[UF_STRATUM_WELL] - ms[UF_STRATUM_CELL]) / c->well_size;
    v[UF_STRATUM_REPLICATE] = (ms[UF_STRATUM_REPLICATE] - ms[UF_STRATUM_CELL] - well_part(c)) / c->replicate_size;
    for (int k = 0; k < UF_STRATA; k++) {
        c->variance[k] = v[k] < 0 ? 0 : v[k];
        if (v[k] < 0)
            c->notes |= UF_NOTE_NEGATIVE_AS_ZERO;
        if (isnan(v[k]) && (k != UF_STRATUM_WELL || c->wells > c->replicates))
            c->notes |= UF_NOTE_TOO_FEW;
    }
}

static void set_shares(const walk *w, uf_components *c)
{
    double cells = (double)c->cells, replicate = c->variance[UF_STRATUM_REPLICATE];
    double well = isnan(c->variance[UF_STRATUM_WELL]) ? 0 : c->variance[UF_STRATUM_WELL];
    double total = replicate + well + c->variance[UF_STRATUM_CELL];
    if (!(total > 0))
        return;
    c->icc_replicate = replicate / total;
    c->icc_well = (replicate + well) / total;
    c->design_effect = 1 - c->icc_well + (c->icc_well - c->icc_replicate) * w->wells_squared / cells +
                       c->icc_replicate * w->replicates_squared / cells;
    c->effective_n = cells / c->design_effect;
}

static void components_of(item *items, size_t count, uf_components *c)
{
    walk w = {0};
    qsort(items, count, sizeof *items, by_owner);
    c->cells = count;
    c->mean = mean_of(items, 0, count);
    for (size_t from = 0, to; from < count; from = to) {
        to = run_end(items, count, from, 1);
        walk_treatment(items, from, to, &w, c);
    }
    set_mean_squares(&w, c);
    set_variances(c);
    set_shares(&w, c);
}

uf_status uf_components_fit(const uf_nested_row *rows, size_t count, uf_components *components, uf_error *error)
{
    double nan = (double)NAN;
    size_t used = 0;
    *components = (uf_components){.mean = nan, .well_size = nan, .replicate_well_size = nan, .replicate_size = nan};
    components->icc_replicate = components->icc_well = components->design_effect = components->effective_n = nan;
    for (int k = 0; k < UF_STRATA; k++)
        components->mean_square[k] = components->variance[k] = components->variance_signed[k] = nan;
    item *items = malloc((count + 1) * sizeof *items);
    if (!items)
        return uf_fail_memory(error, "variance components");
    for (size_t k = 0; k < count; k++)
        if (!isnan(rows[k].value))
            items[used++] = (item){rows[k].value, {rows[k].treatment, rows[k].replicate, rows[k].well}, k};
    if (used)
        components_of(items, used, components);
    else
        components->notes |= UF_NOTE_TOO_FEW;
    free(items);
    return UF_OK;
}

/* ---- what a replicate mean varies by ------------------------------------------------------------ */

/* The variance as a sum of mean squares, each times its share: c_cell MS(cells) and so on. Components shown as 0
 * leave it. */
static void mean_square_shares(const uf_components *c, double wells, double cells, double *share)
{
    int has_well = c->variance[UF_STRATUM_WELL] > 0, has_replicate = c->variance[UF_STRATUM_REPLICATE] > 0;
    share[UF_STRATUM_REPLICATE] = has_replicate ? 1 / c->replicate_size : 0;
    double well = has_well ? 1 / wells : 0; /* how often the well's variance is in it */
    if (has_replicate && !isnan(c->variance[UF_STRATUM_WELL]) && has_well)
        well -= c->replicate_well_size / c->replicate_size;
    share[UF_STRATUM_WELL] = has_well ? well / c->well_size : 0;
    share[UF_STRATUM_CELL] = 1 / (wells * cells) - share[UF_STRATUM_REPLICATE] - share[UF_STRATUM_WELL];
}

double uf_replicate_variance(const uf_components *c, double wells, double cells, double *df)
{
    double share[UF_STRATA], below = 0;
    double well = isnan(c->variance[UF_STRATUM_WELL]) ? 0 : c->variance[UF_STRATUM_WELL];
    double variance =
        c->variance[UF_STRATUM_REPLICATE] + well / wells + c->variance[UF_STRATUM_CELL] / (wells * cells);
    mean_square_shares(c, wells, cells, share);
    for (int k = 0; k < UF_STRATA; k++)
        if (c->df[k] > 0)
            below += pow(share[k] * c->mean_square[k], 2) / c->df[k];
    if (df)
        *df = below > 0 ? fmax(1, variance * variance / below) : (double)NAN;
    return variance;
}
