/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "stats/contrast.h"

#include <gsl/gsl_sf_gamma.h>
#include <math.h>

#include "fit/distribution.h"
#include "stats/contrast_parts.h"
#include "stats/scale.h"

/* ---- one arm --------------------------------------------------------------------------------- */

/* Count, mean and variance of the mean of an arm, on the scale of comparison. */
typedef struct arm_mean {
    size_t count;
    double mean, sd;
    unsigned notes;
} arm_mean;

static double mean_about(uf_arm arm, uf_scale scale, double about, size_t count)
{
    double sum = 0;
    for (size_t k = 0; k < arm.count; k++)
        if (!isnan(arm.values[k]))
            sum += uf_to_scale(scale, arm.values[k]) - about;
    return about + sum / (double)count;
}

static arm_mean mean_of(uf_arm arm, uf_scale scale)
{
    arm_mean m = {.mean = (double)NAN, .sd = (double)NAN};
    double squares = 0;
    for (size_t k = 0; k < arm.count; k++) {
        m.count += isnan(arm.values[k]) ? 0 : 1;
        if (scale == UF_SCALE_RATIO && arm.values[k] <= 0)
            m.notes |= UF_NOTE_NOT_POSITIVE;
    }
    if (m.count)
        m.mean = mean_about(arm, scale, mean_about(arm, scale, 0, m.count), m.count);
    for (size_t k = 0; k < arm.count; k++)
        if (!isnan(arm.values[k]))
            squares += pow(uf_to_scale(scale, arm.values[k]) - m.mean, 2);
    if (m.count > 1)
        m.sd = sqrt(squares / (double)(m.count - 1));
    if (m.count < UF_REPLICATES_LEAST)
        m.notes |= UF_NOTE_TOO_FEW;
    return m;
}

/* ---- what every contrast ends with ------------------------------------------------------------- */

void uf_contrast_set_interval(uf_contrast *contrast, double estimate_low, double estimate_high)
{
    contrast->effect_low = uf_from_scale(contrast->scale, estimate_low);
    contrast->effect_high = uf_from_scale(contrast->scale, estimate_high);
}

uf_contrast uf_contrast_empty(uf_scale scale)
{
    double nan = (double)NAN;
    return (uf_contrast){scale, 0, 0, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, 0};
}

void uf_contrast_finish(uf_contrast *c, double estimate, double standard_error, double df, double level)
{
    c->estimate = estimate;
    c->effect = uf_from_scale(c->scale, estimate);
    if (c->notes & (UF_NOTE_TOO_FEW | UF_NOTE_NOT_POSITIVE | UF_NOTE_NOT_CONNECTED) || !(df > 0))
        return;
    if (!(standard_error > 0)) {
        c->notes |= UF_NOTE_NO_SPREAD;
        return;
    }
    double half_width = uf_t_factor(level, df) * standard_error;
    c->standard_error = standard_error;
    c->df = df;
    c->t = estimate / standard_error;
    c->p = uf_t_beyond(c->t, df);
    uf_contrast_set_interval(c, estimate - half_width, estimate + half_width);
}

void uf_contrast_set_g(uf_contrast *c, double t, double df, double unit, double level)
{
    uf_effect_size size = uf_hedges_g(t, df, unit, level);
    c->hedges_g = size.g;
    c->hedges_g_low = size.low;
    c->hedges_g_high = size.high;
}

/* ---- effect size ----------------------------------------------------------------------------- */

static double bias_factor(double df)
{
    return exp(gsl_sf_lngamma(df / 2) - gsl_sf_lngamma((df - 1) / 2)) / sqrt(df / 2);
}

uf_effect_size uf_hedges_g(double t, double df, double unit, double level)
{
    double tail = (1 - level) / 2;
    if (!(df >= 2) || isnan(t))
        return (uf_effect_size){(double)NAN, (double)NAN, (double)NAN};
    return (uf_effect_size){bias_factor(df) * t * unit, unit * uf_noncentrality(t, df, 1 - tail),
                            unit * uf_noncentrality(t, df, tail)};
}

/* ---- unpaired arms ----------------------------------------------------------------------------- */

/* Standard error and degrees of freedom of a sum of +/- means. */
static double satterthwaite(const arm_mean *arms, int count, double *df)
{
    double variance = 0, below = 0;
    for (int k = 0; k < count; k++) {
        double part = arms[k].sd * arms[k].sd / (double)arms[k].count;
        variance += part;
        below += part * part / (double)(arms[k].count - 1);
    }
    *df = variance > 0 ? variance * variance / below : 1;
    return sqrt(variance);
}

static uf_contrast of_arms(arm_mean treated, arm_mean control, uf_scale scale)
{
    uf_contrast c = uf_contrast_empty(scale);
    c.n_treated = treated.count;
    c.n_control = control.count;
    c.mean_treated = uf_from_scale(scale, treated.mean);
    c.mean_control = uf_from_scale(scale, control.mean);
    c.sd_treated = treated.sd;
    c.sd_control = control.sd;
    c.notes = treated.notes | control.notes;
    return c;
}

static void set_pooled_g(uf_contrast *c, const arm_mean *arms, double level)
{
    double n1 = (double)arms[0].count, n2 = (double)arms[1].count, df = n1 + n2 - 2, unit = sqrt(1 / n1 + 1 / n2);
    double pooled = sqrt(((n1 - 1) * arms[0].sd * arms[0].sd + (n2 - 1) * arms[1].sd * arms[1].sd) / df);
    uf_contrast_set_g(c, c->estimate / (pooled * unit), df, unit, level);
}

uf_contrast uf_welch(uf_arm treated, uf_arm control, uf_scale scale, double level)
{
    arm_mean arms[2] = {mean_of(treated, scale), mean_of(control, scale)};
    uf_contrast c = of_arms(arms[0], arms[1], scale);
    double df = 0, standard_error = satterthwaite(arms, 2, &df);
    uf_contrast_finish(&c, arms[0].mean - arms[1].mean, standard_error, df, level);
    if (!isnan(c.t))
        set_pooled_g(&c, arms, level);
    return c;
}

uf_contrast uf_interaction(uf_arm arms[2][2], uf_scale scale, double level)
{
    arm_mean means[4] = {mean_of(arms[1][1], scale), mean_of(arms[0][0], scale), mean_of(arms[0][1], scale),
                         mean_of(arms[1][0], scale)};
    uf_contrast c = of_arms(means[0], means[1], scale);
    double df = 0, standard_error = satterthwaite(means, 4, &df);
    c.notes |= means[2].notes | means[3].notes;
    uf_contrast_finish(&c, (means[0].mean - means[2].mean) - (means[3].mean - means[1].mean), standard_error, df,
                       level);
    return c;
}
