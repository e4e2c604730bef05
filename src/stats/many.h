/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Many comparisons at once: Dunnett's of several arms with one control, Holm's of anything. */
#ifndef UF_STATS_MANY_H
#define UF_STATS_MANY_H

#include <stddef.h>

#include "base/status.h"
#include "stats/contrast.h"

/* Which way an arm may differ: either; only above the control; only below. */
typedef enum uf_sides { UF_TWO_SIDED, UF_ABOVE, UF_BELOW } uf_sides;

/*
 * Probability that of `count` t statistics with a common variance of `df` >= 1 degrees none exceeds `limit` (in
 * absolute value for UF_TWO_SIDED), where any two have the correlation loading[i] * loading[j], -1 < loading < 1.
 * With one control and groups of n and n0 values loading = sqrt(n / (n + n0)), whose products are the exact
 * correlations. The double integral of Dunnett 1955, J. Am. Stat. Assoc. 50:1096, over the common factor and over s,
 * good to 1e-9. NaN for df below 1.
 */
double uf_dunnett_below(double limit, double df, const double *loading, size_t count, uf_sides sides);

/* The limit that is met with probability `level` (0.95): the half width of simultaneous intervals, in standard
 * errors. */
double uf_dunnett_factor(double level, double df, const double *loading, size_t count, uf_sides sides);

/* One arm's place in a family. `low` and `high` are ends for `estimate` (uf_contrast_set_interval takes them); one
 * side is infinite for one-sided families. */
typedef struct uf_many {
    double t, p_adjusted, low, high;
} uf_many;

/*
 * Dunnett's comparison of means[1 .. groups-1] with means[0], from counts and a pooled standard deviation of `df`
 * degrees. many[k] belongs to group k; many[0] is empty (NaN). Groups of fewer than UF_REPLICATES_LEAST values, and
 * all when the control has fewer, there is no degree of freedom or no spread, are NaN and take no part. UF_MEMORY is
 * the only failure.
 */
UF_MUST_USE uf_status uf_dunnett_means(const double *means, const size_t *counts, size_t groups, double pooled_sd,
                                       double df, uf_sides sides, double level, uf_many *many, uf_error *error);

/* The same from arms[0] (the control) and arms[1 ..]: fits means and the pooled standard deviation first, on `scale`.
 * *pooled_sd and *df may be NULL. A value at or below 0 on the scale of ratios takes its whole arm out. */
UF_MUST_USE uf_status uf_dunnett_arms(const uf_arm *arms, size_t groups, uf_scale scale, uf_sides sides, double level,
                                      uf_many *many, double *pooled_sd, double *df, uf_error *error);

/*
 * Dunnett's on the effects of a blocked fit against group 0. Where blocks lack arms the correlations need not be
 * products; they are then replaced by the nearest that are (least squares over the loadings; Hsu 1992, J. Comput.
 * Graph. Stat. 1:151), and *misfit (may be NULL) is the largest difference: 0 to rounding in complete blocks, where
 * all are 1/2. At a misfit of 0.09, the largest of eight irregular layouts tried, p was off by 0.0003;
 * UF_NOTE_CORRELATION_FITTED is there to be said. UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_dunnett_blocked(const uf_blocked *fit, uf_sides sides, double level, uf_many *many,
                                         double *misfit, uf_error *error);

/*
 * Holm's step-down adjustment (Holm 1979, Scand. J. Stat. 6:65): adjusted p that may be compared with any level. A p
 * that is NaN stays NaN and is no member of the family. UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_holm(const double *p, size_t count, double *adjusted, uf_error *error);

/* The level of each of `count` intervals that shall hold `level` together, Bonferroni's: the plain choice beside
 * Holm's p (it may hold 0 where Holm just rejects). NaN for none. */
double uf_bonferroni_level(double level, size_t count);

/* Whether an (adjusted) p rejects at the level alpha: at or below it, as Holm has it. Rounding of the last digits
 * does not decide. 0 for NaN. */
int uf_rejects(double p, double alpha);

#endif
