/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Dose and response: response = zero + (full - zero) / (1 + (EC50 / dose)^h), the four-parameter logistic (Hill's
 * curve) with zero the response without the compound (dose 0), full that of endless dose, h > 0. Whether it rises or
 * falls is in the sign of full - zero. The EC50 is the relative one: halfway between the fitted plateaus.
 */
#ifndef UF_STATS_DOSE_H
#define UF_STATS_DOSE_H

#include <stddef.h>

#include "base/status.h"
#include "stats/notes.h"

/* One well. Dose 0 is the vehicle; doses in any one unit, which is the EC50's. */
typedef struct uf_dose_point {
    double dose, response;
} uf_dose_point;

typedef enum uf_dose_status {
    UF_DOSE_OK,
    UF_DOSE_ABOVE_RANGE,   /* half the effect lies above the highest dose: only a lower bound */
    UF_DOSE_BELOW_RANGE,   /* below the lowest: only an upper bound */
    UF_DOSE_FLAT,          /* no effect of dose beyond chance */
    UF_DOSE_NOT_BRACKETED, /* within the doses, but they do not bound it on both sides */
    UF_DOSE_NO_FIT         /* too few wells or doses, or no curve found */
} uf_dose_status;

/* The word of tables: ok, above-range, below-range, flat, not-bracketed, no-fit. */
const char *uf_dose_status_word(uf_dose_status status);

/* Fewer different doses above 0 than this, and the Hill slope is held at 1 (UF_NOTE_SLOPE_FIXED). */
enum { UF_DOSES_FOR_SLOPE = 5 };

/* Curve and standard errors are NaN where there is none (flat, no-fit); standard errors without a degree of
 * freedom, too. */
typedef struct uf_dose_fit {
    uf_dose_status status;
    unsigned notes;
    size_t points;                             /* wells that took part */
    int doses;                                 /* different ones above 0 */
    double dose_min, dose_max;                 /* above 0 */
    double effect_f, effect_p;                 /* F test for any effect of dose */
    double zero, full, log10_ec50, hill_slope; /* log10_ec50 as fitted, wherever it lies */
    double zero_se, full_se, log10_ec50_se, hill_slope_se;
    double bottom, top; /* the lower and the higher plateau */
    int direction;      /* 1 rises with dose, -1 falls, 0 no curve */
    double ec50;        /* NaN unless ok or not-bracketed */
    double ec50_low,
        ec50_high; /* profile likelihood; for other states than ok the one that exists is a one-sided bound
                                   of the same level */
    double rss, df, residual_sd;
    double misfit_p; /* F test of the curve against the means of the doses; NaN where no dose is repeated */
} uf_dose_fit;

/*
 * Fits one replicate (or one plate). First F for any effect of dose: between doses against within (one-way analysis
 * of variance); where fewer than three degrees within doses exist, the curve against a constant
 * (UF_NOTE_NO_PURE_ERROR), which is a little too ready to see an effect. p above `alpha` is UF_DOSE_FLAT.
 *
 * Then least squares by Levenberg and Marquardt from the four best points of a grid over EC50 and slope, at each of
 * which the plateaus follow by linear least squares. The EC50 is searched up to three decades beyond the doses, the
 * slope between 1/20 and 20 (UF_NOTE_SLOPE_AT_LIMIT at its ends). The interval is the profile likelihood's: all EC50
 * whose best curve has at most rss (1 + F(level; 1, df) / df) (Bates and Watts 1988, Nonlinear Regression Analysis,
 * 6.1). It holds the scatter of wells of one replicate only, not that between replicates.
 *
 * Whatever the status, UF_NOTE_MISFIT warns of data that are no such curve (a hump, a second step): misfit_p below
 * 0.01 by F, what the curve leaves beyond the scatter within doses (Bates and Watts 1988, 1.3).
 *
 * Points whose dose or response is NaN, or whose dose is negative, take no part. UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_dose_fit_one(const uf_dose_point *points, size_t count, double alpha, double level,
                                      uf_dose_fit *fit, uf_error *error);

/* The EC50 of the compound over replicates. */
typedef struct uf_dose_combined {
    uf_dose_status status;
    unsigned notes;
    size_t replicates, used; /* all, and those whose EC50 is in the mean */
    double ec50, ec50_low, ec50_high;
    double log10_sd;   /* of log10 EC50 between replicates */
    double hill_slope; /* geometric mean */
} uf_dose_combined;

/*
 * Geometric mean and t interval of the replicates' EC50. One replicate keeps its profile interval. Replicates that
 * only bound their EC50 (above-range, below-range) make the whole a bound (UF_NOTE_CENSORED): leaving them out would
 * bias it. Their EC50 is put at the end of their doses and the t interval's one-sided end reported; the status is
 * theirs when they are half or more of the replicates with a curve, else not-bracketed. Flat when more than half of
 * the replicates are; single flat or unfitted ones are left out. Interval NaN below UF_REPLICATES_LEAST
 * (UF_NOTE_TOO_FEW).
 */
uf_dose_combined uf_dose_combine(const uf_dose_fit *fits, size_t count, double level);

#endif
