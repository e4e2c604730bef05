/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/rank_counts.h"

#include <math.h>
#include <stdlib.h>

/* ---- midranks --------------------------------------------------------------------------------- */

typedef struct placed {
    double value;
    size_t place;
} placed;

static int ascending(const void *a, const void *b)
{
    const placed *x = a, *y = b;
    if (x->value != y->value)
        return x->value < y->value ? -1 : 1;
    return (x->place > y->place) - (x->place < y->place);
}

uf_status uf_double_midranks(const double *values, size_t count, int *ranks, double *ties, uf_error *error)
{
    placed *order = malloc((count + 1) * sizeof *order);
    if (!order)
        return uf_fail_memory(error, "ranks");
    for (size_t k = 0; k < count; k++)
        order[k] = (placed){values[k], k};
    qsort(order, count, sizeof *order, ascending);
    *ties = 0;
    for (size_t first = 0, end; first < count; first = end) {
        for (end = first + 1; end < count && order[end].value == order[first].value; end++) {
        }
        double alike = (double)(end - first);
        *ties += alike * alike * alike - alike;
        for (size_t k = first; k < end; k++)
            ranks[order[k].place] = (int)(first + 1 + end);
    }
    free(order);
    return UF_OK;
}

/* ---- sums ------------------------------------------------------------------------------------- */

static int sum_of(const int *ranks, size_t count)
{
    int sum = 0;
    for (size_t k = 0; k < count; k++)
        sum += ranks[k];
    return sum;
}

/* Row j holds, by sum, the share of choices of j among the ranks seen so far; each new rank moves part of a row
 * into the next. As a share of all choices of `chosen` at the end, it is kept in range by dividing as it grows: the
 * chance that the rank is taken given how many are still to come and to take. */
static uf_status shares_of_few(const int *ranks, size_t count, size_t chosen, uf_rank_shares *shares, uf_error *error)
{
    size_t width = (size_t)sum_of(ranks, count) + 1;
    *shares = (uf_rank_shares){NULL, (int)width - 1};
    double *rows = calloc((chosen + 1) * width, sizeof *rows);
    shares->share = calloc(width, sizeof *shares->share);
    if (!rows || !shares->share) {
        free(rows);
        free(shares->share);
        return uf_fail_memory(error, "counting permutations");
    }
    rows[0] = 1;
    for (size_t k = 0; k < count; k++) {
        double left = (double)(count - k);
        for (size_t j = chosen + 1; j-- > 0;) {
            double take = fmin(1, (double)(chosen - j) / left); /* rows that cannot be are empty */
            double *row = rows + j * width;
            for (size_t s = 0; s < width; s++) {
                if (row[s] <= 0)
                    continue;
                if (take > 0)
                    rows[(j + 1) * width + s + (size_t)ranks[k]] += row[s] * take;
                row[s] *= 1 - take;
            }
        }
    }
    for (size_t s = 0; s < width; s++)
        shares->share[s] = rows[chosen * width + s];
    free(rows);
    return UF_OK;
}

/* The ranks left out are a choice too, and often the smaller one. */
uf_status uf_shares_of_choices(const int *ranks, size_t count, size_t chosen, uf_rank_shares *shares, uf_error *error)
{
    int mirrored = 2 * chosen > count;
    uf_status status = shares_of_few(ranks, count, mirrored ? count - chosen : chosen, shares, error);
    for (int s = 0; status == UF_OK && mirrored && 2 * s < shares->top; s++) {
        double swap = shares->share[s];
        shares->share[s] = shares->share[shares->top - s];
        shares->share[shares->top - s] = swap;
    }
    return status;
}

uf_status uf_shares_of_signs(const int *ranks, size_t count, uf_rank_shares *shares, uf_error *error)
{
    int top = sum_of(ranks, count), reached = 0;
    *shares = (uf_rank_shares){calloc((size_t)top + 1, sizeof *shares->share), top};
    if (!shares->share)
        return uf_fail_memory(error, "counting permutations");
    shares->share[0] = 1;
    for (size_t k = 0; k < count; k++) {
        reached += ranks[k];
        for (int s = reached; s >= 0; s--)
            shares->share[s] = (shares->share[s] + (s >= ranks[k] ? shares->share[s - ranks[k]] : 0)) / 2;
    }
    return UF_OK;
}

double uf_share_between(const uf_rank_shares *shares, double low, double high)
{
    double sum = 0;
    for (int s = (int)fmax(0, ceil(low)); s <= shares->top && s <= high; s++)
        sum += shares->share[s];
    return fmin(1, sum);
}
