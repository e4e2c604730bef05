/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/share.h"

#include <math.h>

#include "fit/distribution.h"

static const uf_share no_share = {(double)NAN, (double)NAN, (double)NAN};

uf_share uf_wilson_by(double hits, double trials, double quantile)
{
    if (!(trials > 0) || isnan(hits) || isnan(quantile))
        return no_share;
    double p = hits / trials, z2 = quantile * quantile / trials, below = 1 + z2;
    double middle = (p + z2 / 2) / below;
    double half = quantile / below * sqrt((p * (1 - p) + z2 / 4) / trials);
    /* All or none: one end is exactly 1 or 0, which rounding must not miss. */
    return (uf_share){p, hits <= 0 ? 0 : fmax(0, middle - half), hits >= trials ? 1 : fmin(1, middle + half)};
}

uf_share uf_wilson(double hits, double trials, double level)
{
    return uf_wilson_by(hits, trials, uf_normal_quantile(0.5 + level / 2));
}

uf_share uf_clopper_pearson(double hits, double trials, double level)
{
    double tail = (1 - level) / 2;
    if (!(trials > 0) || isnan(hits))
        return no_share;
    return (uf_share){hits / trials, hits > 0 ? uf_beta_quantile(tail, hits, trials - hits + 1) : 0,
                      hits < trials ? uf_beta_quantile(1 - tail, hits + 1, trials - hits) : 1};
}

/* Variance of the ratio between wells over the binomial variance p (1 - p) / trials. */
static double design_effect_of(const double *hits, const double *trials, size_t wells, double p, double all,
                               double used)
{
    double squares = 0;
    for (size_t k = 0; k < wells; k++)
        if (trials[k] > 0)
            squares += pow(hits[k] - p * trials[k], 2);
    return used / (used - 1) * squares / (all * p * (1 - p));
}

uf_wells_share uf_share_of_wells(const double *hits, const double *trials, size_t wells, double level)
{
    uf_wells_share s = {no_share, (double)NAN, (double)NAN, 0};
    double hit = 0, all = 0, used = 0;
    for (size_t k = 0; k < wells; k++)
        if (trials[k] > 0) {
            hit += hits[k];
            all += trials[k];
            used++;
        }
    if (!(all > 0)) {
        s.notes = UF_NOTE_TOO_FEW;
        return s;
    }
    s.share.share = hit / all;
    if (used < UF_REPLICATES_LEAST) {
        s.notes = UF_NOTE_TOO_FEW;
        return s;
    }
    if (hit <= 0 || hit >= all)
        s.notes = UF_NOTE_DISPERSION_UNKNOWN;
    double effect = s.notes ? 1 : design_effect_of(hits, trials, wells, hit / all, all, used);
    s.design_effect = fmax(1, effect);
    s.effective_n = all / s.design_effect;
    s.share = uf_wilson(hit, all, level);
    if (!(effect > 0)) /* wells exactly alike: what is left is chance */
        return s;
    uf_share spread = uf_wilson_by(hit / effect, all / effect, uf_t_factor(level, used - 1));
    s.share.low = fmin(s.share.low, spread.low);
    s.share.high = fmax(s.share.high, spread.high);
    return s;
}
