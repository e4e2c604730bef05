/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/planning.h"

#include <math.h>

#include "fit/chi_square.h"
#include "fit/distribution.h"
#include "stats/scale.h"

double uf_plan_power(const uf_plan *plan, double variance, int replicates)
{
    double effect = fabs(uf_to_scale(plan->scale, plan->detect));
    if (replicates < 2 || !(variance > 0) || isnan(effect))
        return (double)NAN;
    double df = (plan->paired ? 1 : 2) * ((double)replicates - 1), delta = effect / sqrt(2 * variance / replicates);
    double limit = uf_t_factor(plan->level, df);
    if (delta > 60 + limit) /* beyond doubt, and the quadrature's range */
        return 1;
    return 1 - uf_noncentral_t_below(limit, df, delta) + uf_noncentral_t_below(-limit, df, delta);
}

/* Power grows with replicates: doubling finds one that is enough, halving the fewest. */
static int fewest(const uf_plan *plan, double variance, double *power)
{
    int low = UF_REPLICATES_LEAST - 1, high = UF_REPLICATES_LEAST;
    while (high < UF_PLAN_REPLICATES_MOST && uf_plan_power(plan, variance, high) < plan->power) {
        low = high;
        high = 2 * high < UF_PLAN_REPLICATES_MOST ? 2 * high : UF_PLAN_REPLICATES_MOST;
    }
    *power = uf_plan_power(plan, variance, high);
    if (!(*power >= plan->power))
        return 0;
    while (high - low > 1) {
        int middle = (low + high) / 2;
        if (uf_plan_power(plan, variance, middle) < plan->power)
            low = middle;
        else
            high = middle;
    }
    *power = uf_plan_power(plan, variance, high);
    return high;
}

uf_plan_answer uf_plan_replicates(const uf_plan *plan)
{
    uf_plan_answer a = {0, (double)NAN, (double)NAN, 0, (double)NAN, 0};
    a.replicates = fewest(plan, plan->variance, &a.power);
    if (!a.replicates)
        a.notes |= UF_NOTE_OUT_OF_REACH;
    if (!(plan->variance_df > 0))
        return a;
    a.variance_upper = plan->variance * plan->variance_df / uf_chi_square_quantile(0.2, plan->variance_df);
    a.replicates_upper = fewest(plan, a.variance_upper, &a.power_upper);
    if (!a.replicates_upper)
        a.notes |= UF_NOTE_OUT_OF_REACH;
    return a;
}

double uf_plan_variance(const uf_components *components, uf_scale scale, double wells, double cells, double *df)
{
    double variance = uf_replicate_variance(components, wells, cells, df);
    if (scale == UF_SCALE_DIFFERENCE)
        return variance;
    return components->mean > 0 ? variance / (components->mean * components->mean) : (double)NAN;
}
