/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Treated against control, on replicate values. A difference on the scale of differences; a ratio of geometric means
 * where the scale is one of ratios: logarithms are compared and the ends of the interval taken back by exp. Values
 * that are NaN take no part.
 */
#ifndef UF_STATS_CONTRAST_H
#define UF_STATS_CONTRAST_H

#include <stddef.h>

#include "base/status.h"
#include "stats/notes.h"

/* The replicate values of one arm. */
typedef struct uf_arm {
    const double *values;
    size_t count;
} uf_arm;

/*
 * What a comparison of two arms says. `effect` is a difference in the values' unit, or a ratio; it is there as soon
 * as both arms have a value. Interval, t, df, p and g are NaN below UF_REPLICATES_LEAST values in an arm
 * (UF_NOTE_TOO_FEW) and where nothing scatters (UF_NOTE_NO_SPREAD); all is NaN when a ratio is asked of values at or
 * below 0 (UF_NOTE_NOT_POSITIVE).
 */
typedef struct uf_contrast {
    uf_scale scale;
    size_t n_treated, n_control;
    double mean_treated, mean_control; /* geometric for a ratio */
    double sd_treated, sd_control;     /* of the natural logarithms for a ratio */
    double effect, effect_low, effect_high;
    double estimate,
        standard_error; /* the difference, or the natural logarithm of the ratio, and its standard error */
    double t, df, p;    /* two-sided */
    double hedges_g, hedges_g_low, hedges_g_high;
    unsigned notes;
} uf_contrast;

/*
 * Welch's t: standard error sqrt(s1^2/n1 + s2^2/n2), degrees of freedom by Satterthwaite (Welch 1947, Biometrika
 * 34:28; Satterthwaite 1946, Biometrics Bull. 2:110). The arms may differ in number and spread. Hedges' g is over the
 * pooled standard deviation (n1 + n2 - 2 degrees), which supposes like spreads.
 */
uf_contrast uf_welch(uf_arm treated, uf_arm control, uf_scale scale, double level);

/*
 * Two factors, arms[a][b] with a = 1 treated and b = 1 the other condition: does the effect of a hang on b? Effect is
 * (arms[1][1] - arms[0][1]) - (arms[1][0] - arms[0][0]) of means, or the ratio of ratios, with Satterthwaite's
 * degrees of freedom over the four arms. n, mean and sd of `treated` are those of arms[1][1], of `control` those of
 * arms[0][0]; no g.
 */
uf_contrast uf_interaction(uf_arm arms[2][2], uf_scale scale, double level);

/* Puts another interval into a contrast: ends on the scale of `estimate`, as simultaneous ones have them. */
void uf_contrast_set_interval(uf_contrast *contrast, double estimate_low, double estimate_high);

/* ---- effect size ----------------------------------------------------------------------------- */

typedef struct uf_effect_size {
    double g, low, high;
} uf_effect_size;

/*
 * Hedges' g of a t with `df` >= 2 degrees whose standard error is `unit` standard deviations (sqrt(1/n1 + 1/n2) for
 * two arms): d = t unit, times the exact factor Gamma(df/2) / (sqrt(df/2) Gamma((df-1)/2)) that takes its bias away
 * (Hedges 1981, J. Educ. Stat. 6:107, eq. 6e). The interval is that of the population's standardised difference, by
 * the noncentral t (Hedges and Olkin 1985, Statistical Methods for Meta-Analysis, 5.E); the factor is no part of it.
 */
uf_effect_size uf_hedges_g(double t, double df, double unit, double level);

/* ---- blocks ---------------------------------------------------------------------------------- */

/* One value of a blocked experiment. Blocks (days, sessions, plates) and groups are numbered from 0 without gaps;
 * group 0 is the control. */
typedef struct uf_blocked_row {
    double value;
    int block, group;
} uf_blocked_row;

/*
 * Least squares of value ~ block + group, blocks fixed, one residual variance. With two groups in each block once
 * this is the paired t test. Blocks may lack groups or hold some of them several times: effects are then adjusted for
 * the blocks (intra-block analysis; Scheffe 1959, The Analysis of Variance, 5.2). Groups that no chain of blocks
 * joins to the control have effect NaN, and their rows take no part in the residual.
 */
typedef struct uf_blocked {
    uf_scale scale;
    int groups;
    size_t *counts;      /* [groups] values of each */
    double *means, *sds; /* [groups] plain ones, on the scale of estimates; NaN for none */
    double *effects;     /* [groups] against group 0; effects[0] = 0 */
    double *unscaled;    /* [groups * groups] covariance of the effects over the residual variance; row 0 is 0 */
    double residual_sd;  /* NaN without a degree of freedom */
    double df;           /* rows - blocks - groups + 1, of what is joined to the control */
    unsigned notes;
} uf_blocked;

/* Fits. UF_MEMORY is the only failure; the fit is freed by uf_blocked_free, as a zeroed one may be. */
UF_MUST_USE uf_status uf_blocked_fit(const uf_blocked_row *rows, size_t count, int blocks, int groups, uf_scale scale,
                                     uf_blocked *fit, uf_error *error);
void uf_blocked_free(uf_blocked *fit);

/*
 * The contrast of one group against another (0: the control). g is over the residual standard deviation, the scatter
 * within blocks: it is larger than a g of independent arms where days differ.
 */
uf_contrast uf_blocked_contrast(const uf_blocked *fit, int group, int against, double level);

/* Difference of differences (ratio of ratios) in a blocked fit: cells[a][b] are group numbers, as in
 * uf_interaction. */
uf_contrast uf_blocked_interaction(const uf_blocked *fit, int cells[2][2], double level);

#endif
