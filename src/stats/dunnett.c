/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Dunnett's distribution by quadrature. Given the common factor z and the estimated over the true standard deviation
 * s, the statistics are independent, so that the probability is the integral over both of a product of normal
 * probabilities. Like loadings are taken together as powers: a plate of compounds with as many replicates each costs
 * no more than one.
 */
#include <math.h>
#include <string.h>

#include "fit/distribution.h"
#include "stats/many.h"

enum { KINDS_MOST = 64 };
static const double factor_reach = 8.3; /* normal sds; less than 1e-16 lies beyond */

typedef struct dunnett {
    double limit, df, width; /* width = limit * s, what the inner integral sees */
    int kinds, two_sided;
    double loading[KINDS_MOST], spread[KINDS_MOST], times[KINDS_MOST]; /* spread = sqrt(1 - loading^2) */
} dunnett;

static double given_factor(double z, void *context)
{
    const dunnett *d = context;
    double product = 0.39894228040143267794 * exp(-z * z / 2);
    for (int k = 0; k < d->kinds && product > 0; k++) {
        double shift = d->loading[k] * z, in = uf_normal_below((d->width + shift) / d->spread[k]);
        if (d->two_sided)
            in -= uf_normal_below((-d->width + shift) / d->spread[k]);
        product *= d->times[k] > 1 ? pow(fmax(0, in), d->times[k]) : fmax(0, in);
    }
    return product;
}

static double given_sd(double s, void *context)
{
    dunnett *d = context;
    d->width = d->limit * s;
    double density = uf_sd_ratio_density(s, d->df);
    return density > 1e-17 ? density * uf_integral(given_factor, d, -factor_reach, factor_reach, 4) : 0;
}

/* More than KINDS_MOST different loadings are as good as merged with their nearest. */
static void add_kind(dunnett *d, double loading)
{
    int nearest = 0;
    for (int k = 1; k < d->kinds; k++)
        if (fabs(d->loading[k] - loading) < fabs(d->loading[nearest] - loading))
            nearest = k;
    if (d->kinds && (fabs(d->loading[nearest] - loading) < 1e-12 || d->kinds == KINDS_MOST)) {
        d->times[nearest]++;
        return;
    }
    d->loading[d->kinds] = loading;
    d->spread[d->kinds] = sqrt(1 - loading * loading);
    d->times[d->kinds++] = 1;
}

double uf_dunnett_below(double limit, double df, const double *loading, size_t count, uf_sides sides)
{
    dunnett d = {.limit = limit, .df = df, .two_sided = sides == UF_TWO_SIDED};
    double low, high;
    if (!(df >= 1) || isnan(limit) || !count)
        return (double)NAN;
    if (d.two_sided && limit <= 0)
        return 0;
    for (size_t k = 0; k < count; k++)
        add_kind(&d, loading[k]);
    uf_sd_ratio_range(df, &low, &high);
    return fmin(1, uf_integral(given_sd, &d, low, high, 4));
}

/* Regula falsi that halves the weight of the end that stays (Dowell and Jarratt 1971, BIT 11:168): some ten
 * quadratures. */
double uf_dunnett_factor(double level, double df, const double *loading, size_t count, uf_sides sides)
{
    double low = sides == UF_TWO_SIDED ? 0 : -10, high = 4, at = high;
    double below = uf_dunnett_below(low, df, loading, count, sides) - level;
    double above = uf_dunnett_below(high, df, loading, count, sides) - level;
    int kept = 0;
    if (isnan(below))
        return (double)NAN;
    while (above < 0 && high < 1e6)
        above = uf_dunnett_below(high *= 2, df, loading, count, sides) - level;
    for (int k = 0; k < 80 && high - low > 1e-10 * high; k++) {
        double before = at;
        at = (low * above - high * below) / (above - below);
        double here = uf_dunnett_below(at, df, loading, count, sides) - level;
        if (fabs(here) < 1e-11 || fabs(at - before) < 1e-11 * fabs(at))
            break;
        if (here < 0) {
            low = at;
            below = here;
            above /= kept < 0 ? 2 : 1;
            kept = -1;
        } else {
            high = at;
            above = here;
            below /= kept > 0 ? 2 : 1;
            kept = 1;
        }
    }
    return at;
}
