/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/many.h"

#include <math.h>
#include <stdlib.h>

#include "fit/distribution.h"
#include "stats/scale.h"
#include "stats/summary.h"

static void fill_empty(uf_many *many, size_t groups)
{
    double nan = (double)NAN;
    for (size_t k = 0; k < groups; k++)
        many[k] = (uf_many){nan, nan, nan, nan};
}

/* ---- the family ------------------------------------------------------------------------------- */

/* The arms that take part, packed: t, standard error, loading, and whose they are. */
typedef struct family {
    size_t count;
    double *t, *standard_error, *estimate, *loading;
    size_t *group;
} family;

static int family_new(family *f, size_t most)
{
    *f = (family){0};
    f->t = calloc(4 * most, sizeof *f->t);
    f->group = calloc(most, sizeof *f->group);
    if (f->t) {
        f->standard_error = f->t + most;
        f->estimate = f->t + 2 * most;
        f->loading = f->t + 3 * most;
    }
    return f->t && f->group;
}

static void family_free(family *f)
{
    free(f->t);
    free(f->group);
}

static void family_add(family *f, size_t group, double estimate, double standard_error, double loading)
{
    f->group[f->count] = group;
    f->estimate[f->count] = estimate;
    f->standard_error[f->count] = standard_error;
    f->t[f->count] = estimate / standard_error;
    f->loading[f->count++] = loading;
}

static void judge(const family *f, double df, uf_sides sides, double level, uf_many *many)
{
    if (!f->count || !(df >= 1))
        return;
    double factor = uf_dunnett_factor(level, df, f->loading, f->count, sides);
    for (size_t k = 0; k < f->count; k++) {
        uf_many *m = many + f->group[k];
        double t = f->t[k], limit = sides == UF_TWO_SIDED ? fabs(t) : sides == UF_ABOVE ? t : -t;
        double reach = factor * f->standard_error[k];
        m->t = t;
        m->p_adjusted = fmax(0, 1 - uf_dunnett_below(limit, df, f->loading, f->count, sides));
        m->low = sides == UF_BELOW ? -INFINITY : f->estimate[k] - reach;
        m->high = sides == UF_ABOVE ? INFINITY : f->estimate[k] + reach;
    }
}

/* ---- means ------------------------------------------------------------------------------------ */

uf_status uf_dunnett_means(const double *means, const size_t *counts, size_t groups, double pooled_sd, double df,
                           uf_sides sides, double level, uf_many *many, uf_error *error)
{
    family f;
    fill_empty(many, groups);
    if (!groups || counts[0] < UF_REPLICATES_LEAST || isnan(means[0]) || !(pooled_sd > 0))
        return UF_OK;
    if (!family_new(&f, groups)) {
        family_free(&f);
        return uf_fail_memory(error, "comparisons with a control");
    }
    for (size_t k = 1; k < groups; k++) {
        double n = (double)counts[k], n0 = (double)counts[0];
        if (counts[k] >= UF_REPLICATES_LEAST && !isnan(means[k]))
            family_add(&f, k, means[k] - means[0], pooled_sd * sqrt(1 / n + 1 / n0), sqrt(n / (n + n0)));
    }
    judge(&f, df, sides, level, many);
    family_free(&f);
    return UF_OK;
}

/* Logarithms of an arm for ratios: 0 when one does not exist. */
static int to_scale(uf_arm arm, uf_scale scale, double *values)
{
    for (size_t k = 0; k < arm.count; k++) {
        values[k] = uf_to_scale(scale, arm.values[k]);
        if (isnan(values[k]) && !isnan(arm.values[k]))
            return 0;
    }
    return 1;
}

uf_status uf_dunnett_arms(const uf_arm *arms, size_t groups, uf_scale scale, uf_sides sides, double level,
                          uf_many *many, double *pooled_sd, double *df, uf_error *error)
{
    size_t most = 1;
    double squares = 0, degrees = 0;
    for (size_t k = 0; k < groups; k++)
        most = arms[k].count > most ? arms[k].count : most;
    double *means = calloc(groups + 1, sizeof *means), *values = calloc(most, sizeof *values);
    size_t *counts = calloc(groups + 1, sizeof *counts);
    uf_status status = means && values && counts ? UF_OK : uf_fail_memory(error, "comparisons with a control");
    for (size_t k = 0; k < groups && status == UF_OK; k++) {
        if (!to_scale(arms[k], scale, values))
            continue;
        uf_moments m = uf_moments_of(values, NULL, arms[k].count);
        means[k] = m.mean;
        counts[k] = m.count;
        if (m.count > 1) {
            squares += (double)(m.count - 1) * m.sd * m.sd;
            degrees += (double)(m.count - 1);
        }
    }
    double sd = degrees > 0 ? sqrt(squares / degrees) : (double)NAN;
    if (status == UF_OK)
        status = uf_dunnett_means(means, counts, groups, sd, degrees, sides, level, many, error);
    if (pooled_sd)
        *pooled_sd = sd;
    if (df)
        *df = degrees;
    free(means);
    free(values);
    free(counts);
    return status;
}

/* ---- blocks ----------------------------------------------------------------------------------- */

static double correlation_of(const uf_blocked *fit, size_t g, size_t h)
{
    size_t n = (size_t)fit->groups;
    return fit->unscaled[g * n + h] / sqrt(fit->unscaled[g * n + g] * fit->unscaled[h * n + h]);
}

static double largest_misfit(const uf_blocked *fit, const family *f)
{
    double worst = 0;
    for (size_t i = 0; i < f->count; i++)
        for (size_t j = 0; j < i; j++)
            worst = fmax(worst, fabs(correlation_of(fit, f->group[i], f->group[j]) - f->loading[i] * f->loading[j]));
    return worst;
}

/* Least squares over the correlations, one loading after the other until none moves (each is a line's slope given the
 * others). One arm has no correlation and two have one: equal loadings. */
static void fit_loadings(const uf_blocked *fit, family *f)
{
    double moved = 1;
    for (size_t k = 0; k < f->count; k++)
        f->loading[k] = f->count == 1 ? 0 : 0.7;
    for (int round = 0; round < 2000 && moved > 1e-13 && f->count > 1; round++) {
        moved = 0;
        for (size_t i = 0; i < f->count; i++) {
            double xy = 0, xx = 0;
            for (size_t j = 0; j < f->count; j++)
                if (j != i) {
                    xy += correlation_of(fit, f->group[i], f->group[j]) * f->loading[j];
                    xx += f->loading[j] * f->loading[j];
                }
            double now = fmin(0.9999, fmax(-0.9999, xx > 0 ? xy / xx : 0));
            if (f->count == 2) /* the other's loading leaves it free: share the correlation */
                now = sqrt(fmax(0, correlation_of(fit, f->group[0], f->group[1])));
            moved = fmax(moved, fabs(now - f->loading[i]));
            f->loading[i] = now;
        }
    }
}

uf_status uf_dunnett_blocked(const uf_blocked *fit, uf_sides sides, double level, uf_many *many, double *misfit,
                             uf_error *error)
{
    family f;
    size_t groups = (size_t)fit->groups;
    fill_empty(many, groups);
    if (misfit)
        *misfit = 0;
    if (!(fit->residual_sd > 0) || fit->notes & UF_NOTE_NOT_POSITIVE || fit->counts[0] < UF_REPLICATES_LEAST)
        return UF_OK;
    if (!family_new(&f, groups)) {
        family_free(&f);
        return uf_fail_memory(error, "comparisons with a control");
    }
    for (size_t k = 1; k < groups; k++)
        if (!isnan(fit->effects[k]) && fit->counts[k] >= UF_REPLICATES_LEAST)
            family_add(&f, k, fit->effects[k], fit->residual_sd * sqrt(fit->unscaled[k * groups + k]), 0);
    fit_loadings(fit, &f);
    if (misfit)
        *misfit = largest_misfit(fit, &f);
    judge(&f, fit->df, sides, level, many);
    family_free(&f);
    return UF_OK;
}

/* ---- Holm ------------------------------------------------------------------------------------- */

typedef struct ranked {
    double p;
    size_t place;
} ranked;

static int ascending(const void *a, const void *b)
{
    const ranked *x = a, *y = b;
    if (x->p != y->p)
        return x->p < y->p ? -1 : 1;
    return (x->place > y->place) - (x->place < y->place);
}

uf_status uf_holm(const double *p, size_t count, double *adjusted, uf_error *error)
{
    ranked *order = malloc((count + 1) * sizeof *order);
    size_t members = 0;
    double so_far = 0;
    if (!order)
        return uf_fail_memory(error, "an adjustment of p values");
    for (size_t k = 0; k < count; k++) {
        adjusted[k] = (double)NAN;
        if (!isnan(p[k]))
            order[members++] = (ranked){p[k], k};
    }
    qsort(order, members, sizeof *order, ascending);
    for (size_t k = 0; k < members; k++) {
        so_far = fmax(so_far, fmin(1, (double)(members - k) * order[k].p));
        adjusted[order[k].place] = so_far;
    }
    free(order);
    return UF_OK;
}

double uf_bonferroni_level(double level, size_t count)
{
    return count ? 1 - (1 - level) / (double)count : (double)NAN;
}

int uf_rejects(double p, double alpha)
{
    return p <= alpha * (1 + 1e-12);
}
