/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How many replicates the next experiment needs. */
#ifndef UF_STATS_PLANNING_H
#define UF_STATS_PLANNING_H

#include "stats/notes.h"
#include "stats/variance.h"

enum { UF_PLAN_REPLICATES_MOST = 1000 };

/* Two arms of as many replicates each. */
typedef struct uf_plan {
    uf_scale scale;
    double detect; /* the difference (not 0), or the ratio (above 0, not 1), that shall be seen */
    double power;  /* with this probability, 0.8 */
    double level;  /* by an interval or a two-sided test of this level, 0.95 */
    int paired;    /* each replicate holds both arms */
    double
        variance; /* of one replicate value: squared units, or of natural logarithms for a ratio. Paired: of what is left
                        when replicates' own levels are taken out (the residual variance of a blocked fit) */
    double variance_df; /* degrees of freedom it was estimated with; NaN when it is known or guessed */
} uf_plan;

typedef struct uf_plan_answer {
    int replicates;        /* in each arm; 0 when more than UF_PLAN_REPLICATES_MOST (UF_NOTE_OUT_OF_REACH) */
    double power;          /* that they reach */
    double variance_upper; /* upper 80 % limit of the variance */
    int replicates_upper;  /* needed if the variance is that */
    double power_upper;
    unsigned notes;
} uf_plan_answer;

/*
 * Power of the t test of two arms of `replicates` each, or of pairs: both tails of the noncentral t with
 * noncentrality effect / sqrt(2 variance / n) and 2 (n - 1) degrees, pairs n - 1 (Cohen 1988, Statistical Power
 * Analysis, ch. 2; exact for normal values of like variance). NaN below two replicates or without a variance above 0.
 */
double uf_plan_power(const uf_plan *plan, double variance, int replicates);

/*
 * The fewest replicates, at least UF_REPLICATES_LEAST, that reach the power; and again at the upper 80 % limit of the
 * variance, df s^2 / chi-square(0.2; df), because half of all pilots estimate it too low (Browne 1995, Stat. Med.
 * 14:1933). Without variance_df the upper figures are NaN and 0.
 */
uf_plan_answer uf_plan_replicates(const uf_plan *plan);

/* The variance of a replicate value with `wells` wells of `cells` cells (uf_replicate_variance), for a plan on
 * `scale`: divided by the squared mean for a ratio, which is the variance of a logarithm to first order (good to a
 * few per cent up to a coefficient of variation of 0.3). NaN for a ratio about a mean that is not above 0. *df may
 * be NULL. */
double uf_plan_variance(const uf_components *components, uf_scale scale, double wells, double cells, double *df);

#endif
