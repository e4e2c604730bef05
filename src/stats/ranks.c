/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/ranks.h"

#include <math.h>
#include <stdint.h>
#include <stdlib.h>

#include "fit/distribution.h"
#include "fit/robust.h"
#include "stats/rank_counts.h"
#include "stats/scale.h"

static uf_rank_test empty_test(void)
{
    double nan = (double)NAN;
    return (uf_rank_test){0, 0, nan, nan, nan, nan, nan, nan, 0, nan, nan, nan, nan, 0};
}

/* Copies what is a number, on the scale of comparison. Returns how many. */
static size_t take_values(uf_arm arm, uf_scale scale, double *values, uf_rank_test *test)
{
    size_t count = 0;
    for (size_t k = 0; k < arm.count; k++) {
        double value = uf_to_scale(scale, arm.values[k]);
        if (isnan(arm.values[k]))
            continue;
        if (isnan(value))
            test->notes |= UF_NOTE_NOT_POSITIVE;
        values[count++] = value;
    }
    return count;
}

/* ---- p ------------------------------------------------------------------------------------------ */

/* From shares of sums of doubled ranks; what is observed and expected is in the same unit. Sums are whole and their
 * expectation a fraction, hence the hair's breadth that keeps a sum as far away as the observed one in. */
static void p_by_counting(uf_rank_test *test, const uf_rank_shares *shares, double observed, double expected)
{
    double hair = 1e-9 * (1 + fabs(expected)), away = fabs(observed - expected);
    test->exact = 1;
    test->p_above = uf_share_between(shares, observed - hair, INFINITY);
    test->p_below = uf_share_between(shares, -INFINITY, observed + hair);
    test->p = fmin(1, uf_share_between(shares, -INFINITY, expected - away + hair) +
                          uf_share_between(shares, expected + away - hair, INFINITY));
    if (away <= hair)
        test->p = 1;
}

static void p_by_normal(uf_rank_test *test)
{
    double off = test->statistic - test->expected;
    test->notes |= UF_NOTE_NORMAL;
    test->p_above = uf_normal_below(-(off - 0.5) / test->sd);
    test->p_below = uf_normal_below((off + 0.5) / test->sd);
    test->p = fmin(1, 2 * uf_normal_below(-(fabs(off) - 0.5) / test->sd));
}

/* ---- shift -------------------------------------------------------------------------------------- */

/* The largest c >= 0 with P(statistic <= c - 1) <= (1 - level) / 2, without ties: so many differences are left out
 * at each end but one. 0: there is none. */
static double ends_by_counting(const uf_rank_shares *shares, double lowest_sum, double level, double *coverage)
{
    double below = 0, c = 0;
    for (int s = (int)lowest_sum; s <= shares->top; s++) {
        if (below + shares->share[s] > (1 - level) / 2 * (1 + 1e-12))
            break;
        below += shares->share[s];
        c++;
    }
    *coverage = c > 0 ? 1 - 2 * below : (double)NAN;
    return c;
}

static double ends_by_normal(double expected, double sd, double level)
{
    return floor(expected + 0.5 - uf_normal_quantile(0.5 + level / 2) * sd);
}

/* Median and ends of the sorted pairwise values. */
static void take_shift(uf_rank_test *test, uf_scale scale, double *pairwise, size_t count, double ends)
{
    test->shift = uf_from_scale(scale, uf_median(pairwise, count));
    if (!(ends >= 1)) {
        test->notes |= UF_NOTE_LEVEL_OUT_OF_REACH;
        return;
    }
    size_t c = (size_t)ends;
    test->shift_low = uf_from_scale(scale, pairwise[c - 1]);
    test->shift_high = uf_from_scale(scale, pairwise[count - c]);
}

static void forget_test(uf_rank_test *test)
{
    test->p = test->p_above = test->p_below = test->shift_low = test->shift_high = test->coverage = (double)NAN;
    test->exact = 0;
    test->notes &= ~(unsigned)(UF_NOTE_NORMAL | UF_NOTE_LEVEL_OUT_OF_REACH);
}

/* ---- Mann and Whitney --------------------------------------------------------------------------- */

/* What both halves of a rank test work on: n treated values first, then m of the control; scratch for ranks and
 * pairs. */
typedef struct two_arms {
    size_t n, m;
    double *values, *pairwise;
    int *ranks;
} two_arms;

static uf_status rank_arms(const two_arms *a, uf_rank_test *test, uf_error *error)
{
    size_t total = a->n + a->m;
    double n = (double)a->n, m = (double)a->m, all = (double)total, ties, sum = 0;
    uf_rank_shares shares = {0};
    uf_status status = uf_double_midranks(a->values, total, a->ranks, &ties, error);
    if (status != UF_OK)
        return status;
    for (size_t k = 0; k < a->n; k++)
        sum += a->ranks[k];
    test->statistic = sum / 2 - n * (n + 1) / 2;
    test->expected = n * m / 2;
    test->sd = sqrt(n * m / 12 * (all + 1 - ties / (all * (all - 1))));
    if (!(test->sd > 0)) {
        test->notes |= UF_NOTE_NO_SPREAD;
        return UF_OK;
    }
    if (total > UF_RANKS_EXACT_MOST) {
        p_by_normal(test);
        return UF_OK;
    }
    status = uf_shares_of_choices(a->ranks, total, a->n, &shares, error);
    if (status != UF_OK)
        return status;
    p_by_counting(test, &shares, sum, n * (all + 1));
    free(shares.share);
    return UF_OK;
}

static uf_status shift_arms(const two_arms *a, uf_scale scale, double level, uf_rank_test *test, uf_error *error)
{
    size_t total = a->n + a->m, count = 0;
    double n = (double)a->n, m = (double)a->m;
    double ends = ends_by_normal(n * m / 2, sqrt(n * m * (n + m + 1) / 12), level);
    if (total <= UF_RANKS_EXACT_MOST) {
        uf_rank_shares shares = {0};
        for (size_t k = 0; k < total; k++)
            a->ranks[k] = (int)k + 1;
        uf_status status = uf_shares_of_choices(a->ranks, total, a->n, &shares, error);
        if (status != UF_OK)
            return status;
        ends = ends_by_counting(&shares, n * (n + 1) / 2, level, &test->coverage);
        free(shares.share);
    }
    for (size_t i = 0; i < a->n; i++)
        for (size_t j = 0; j < a->m; j++)
            a->pairwise[count++] = a->values[i] - a->values[a->n + j];
    take_shift(test, scale, a->pairwise, count, ends);
    return UF_OK;
}

static void two_arms_free(two_arms *a)
{
    free(a->values);
    free(a->pairwise);
    free(a->ranks);
}

uf_status uf_mann_whitney(uf_arm treated, uf_arm control, uf_scale scale, double level, size_t least,
                          uf_rank_test *test, uf_error *error)
{
    *test = empty_test();
    if (control.count && treated.count > SIZE_MAX / sizeof(double) / control.count)
        return uf_fail_memory(error, "a rank test");
    two_arms a = {.values = calloc(treated.count + control.count + 1, sizeof *a.values),
                  .pairwise = calloc(treated.count * control.count + 1, sizeof *a.pairwise),
                  .ranks = calloc(treated.count + control.count + 1, sizeof *a.ranks)};
    uf_status status = a.values && a.pairwise && a.ranks ? UF_OK : uf_fail_memory(error, "a rank test");
    if (status == UF_OK) {
        a.n = test->n_treated = take_values(treated, scale, a.values, test);
        a.m = test->n_control = take_values(control, scale, a.values + a.n, test);
        if (a.n && a.m && !(test->notes & UF_NOTE_NOT_POSITIVE)) {
            status = rank_arms(&a, test, error);
            if (status == UF_OK)
                status = shift_arms(&a, scale, level, test, error);
        }
    }
    if (a.n < least || a.m < least) {
        forget_test(test);
        test->notes |= UF_NOTE_TOO_FEW;
    }
    two_arms_free(&a);
    return status;
}

/* ---- Wilcoxon's signed ranks ---------------------------------------------------------------------- */

/* Differences of `count` pairs in a.values; their sizes go to the second half. */
static uf_status rank_signs(const two_arms *a, size_t count, uf_rank_test *test, uf_error *error)
{
    double *sizes = a->values + a->m, ties, sum = 0, total = 0;
    size_t n = 0;
    uf_rank_shares shares = {0};
    for (size_t k = 0; k < count; k++)
        if (a->values[k] != 0)
            sizes[n++] = fabs(a->values[k]);
    uf_status status = uf_double_midranks(sizes, n, a->ranks, &ties, error);
    if (status != UF_OK)
        return status;
    for (size_t k = 0, j = 0; k < count; k++)
        if (a->values[k] != 0) {
            total += a->ranks[j];
            sum += a->values[k] > 0 ? a->ranks[j] : 0;
            j++;
        }
    double pairs = (double)n;
    test->statistic = sum / 2;
    test->expected = pairs * (pairs + 1) / 4;
    test->sd = sqrt((pairs * (pairs + 1) * (2 * pairs + 1) - ties / 2) / 24);
    if (!n) {
        test->notes |= UF_NOTE_NO_SPREAD;
        return UF_OK;
    }
    if (n > UF_RANKS_EXACT_MOST) {
        p_by_normal(test);
        return UF_OK;
    }
    status = uf_shares_of_signs(a->ranks, n, &shares, error);
    if (status != UF_OK)
        return status;
    p_by_counting(test, &shares, sum, total / 2);
    free(shares.share);
    return UF_OK;
}

static uf_status shift_pairs(const two_arms *a, size_t n, uf_scale scale, double level, uf_rank_test *test,
                             uf_error *error)
{
    double pairs = (double)n;
    double ends = ends_by_normal(pairs * (pairs + 1) / 4, sqrt(pairs * (pairs + 1) * (2 * pairs + 1) / 24), level);
    size_t count = 0;
    if (n <= UF_RANKS_EXACT_MOST) {
        uf_rank_shares shares = {0};
        for (size_t k = 0; k < n; k++)
            a->ranks[k] = (int)k + 1;
        uf_status status = uf_shares_of_signs(a->ranks, n, &shares, error);
        if (status != UF_OK)
            return status;
        ends = ends_by_counting(&shares, 0, level, &test->coverage);
        free(shares.share);
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j <= i; j++)
            a->pairwise[count++] = (a->values[i] + a->values[j]) / 2;
    take_shift(test, scale, a->pairwise, count, ends);
    return UF_OK;
}

/* The differences of whole pairs. Returns how many there are. */
static size_t take_pairs(const double *treated, const double *control, size_t pairs, uf_scale scale, double *values,
                         uf_rank_test *test)
{
    size_t n = 0;
    for (size_t k = 0; k < pairs; k++) {
        if (isnan(treated[k]) || isnan(control[k]))
            continue;
        values[n] = uf_to_scale(scale, treated[k]) - uf_to_scale(scale, control[k]);
        if (isnan(values[n++]))
            test->notes |= UF_NOTE_NOT_POSITIVE;
    }
    return n;
}

uf_status uf_signed_rank(const double *treated, const double *control, size_t pairs, uf_scale scale, double level,
                         size_t least, uf_rank_test *test, uf_error *error)
{
    *test = empty_test();
    two_arms a = {.m = pairs,
                  .values = calloc(2 * pairs + 1, sizeof *a.values),
                  .pairwise = calloc(pairs * (pairs + 1) / 2 + 1, sizeof *a.pairwise),
                  .ranks = calloc(pairs + 1, sizeof *a.ranks)};
    uf_status status = a.values && a.pairwise && a.ranks ? UF_OK : uf_fail_memory(error, "a rank test");
    size_t n = 0;
    if (status == UF_OK) {
        n = take_pairs(treated, control, pairs, scale, a.values, test);
        if (n && !(test->notes & UF_NOTE_NOT_POSITIVE)) {
            status = rank_signs(&a, n, test, error);
            if (status == UF_OK)
                status = shift_pairs(&a, n, scale, level, test, error);
        }
    }
    test->n_treated = test->n_control = n;
    if (n < least) {
        forget_test(test);
        test->notes |= UF_NOTE_TOO_FEW;
    }
    two_arms_free(&a);
    return status;
}
