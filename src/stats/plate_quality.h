/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Is a plate good enough to score? Controls against each other, and what the place on the plate does. */
#ifndef UF_STATS_PLATE_QUALITY_H
#define UF_STATS_PLATE_QUALITY_H

#include <stddef.h>

#include "base/status.h"
#include "stats/notes.h"

/* Wells of each control below which there is no verdict. */
enum { UF_PLATE_WELLS_LEAST = 8 };

/* By Z': from 0.5 up, from 0 up, below (common practice after Zhang, Chung and Oldenburg 1999). */
typedef enum uf_plate_verdict {
    UF_PLATE_NO_VERDICT,
    UF_PLATE_GOOD,
    UF_PLATE_MARGINAL,
    UF_PLATE_POOR
} uf_plate_verdict;

typedef struct uf_index {
    double value, low, high;
} uf_index;

typedef struct uf_plate_quality {
    size_t n_control, n_positive;
    uf_index z_prime, z_prime_robust, ssmd, ssmd_robust, signal_window;
    uf_plate_verdict verdict;
    unsigned notes;
} uf_plate_quality;

/*
 * From the wells of the (negative) control and of the positive one, m and s their means and standard deviations:
 *   z_prime        1 - 3 (s1 + s2) / |m1 - m2| (Zhang, Chung and Oldenburg 1999, J. Biomol. Screen. 4:67; IUPAC Gold Book)
 *   ssmd           (m_positive - m_control) / sqrt(s1^2 + s2^2) (Zhang 2007, Genomics 89:552)
 *   signal_window  (|m1 - m2| - 3 (s1 + s2)) / s of the control with the higher mean (Sittampalam and others 1997, J.
 *                  Biomol. Screen. 2:159)
 * and, robust, with medians and 1.4826 median absolute deviations in place of m and s.
 *
 * Intervals by error propagation under normal scatter: variances s^2 / n of a mean and s^2 / (2 (n - 1)) of a
 * standard deviation; pi/2 and 2.72 times as much for a median and a scaled median deviation (their asymptotic
 * efficiencies, Rousseeuw and Croux 1993, J. Am. Stat. Assoc. 88:1273); Student's t of n1 + n2 - 2 degrees; for Z' on
 * the logarithm of 1 - Z', which is a ratio. They know the wells' scatter on this plate, nothing of other plates.
 * Robust ones are rough below some 16 wells.
 *
 * NaN below two wells of either, and what has no spread or no distance to divide by (UF_NOTE_NO_SPREAD). UF_MEMORY is
 * the only failure.
 */
UF_MUST_USE uf_status uf_plate_quality_of(const double *control, size_t n_control, const double *positive,
                                          size_t n_positive, double level, uf_plate_quality *quality,
                                          uf_error *error);

/* ---- places ----------------------------------------------------------------------------------- */

/* A well by its place (from 0) and what is in it (treatment, dose, coating together: numbered from 0). */
typedef struct uf_plate_well {
    double value;
    int row, column, treatment;
} uf_plate_well;

/* One kind of place: the largest effect of a row, of a column, or the edge's. */
typedef struct uf_place_effect {
    double effect;  /* in the values' unit; NaN when confounded */
    double sigma;   /* effect in its standard errors: beyond 3 or so it is no accident */
    int where;      /* the row or column that has it, -1 for none */
    int confounded; /* the layout cannot tell it from treatment */
} uf_place_effect;

typedef struct uf_place_effects {
    uf_place_effect row, column, edge;
    double residual_sd; /* robust, of the residuals all this rests on; NaN without any */
    unsigned notes;
} uf_place_effects;

/*
 * Residuals are values less the median of their treatment on the plate. A row's effect is the median residual of its
 * wells less the median of all; the edge's the median of wells at the rim less that of the others. Only treatments
 * that stand in two or more rows (columns; at the rim and not) say anything, and the effect is confounded unless such
 * treatments join all rows (columns, sides) that hold values into one chain. Treatments in few rows share an effect
 * out between their wells, so that a row's effect comes out too small there: by a half for pairs. Standard errors are
 * 1.2533 sd / sqrt(n) of a median. Wells whose value is NaN take no part. UF_MEMORY is the only failure.
 */
UF_MUST_USE uf_status uf_place_effects_of(const uf_plate_well *wells, size_t count, int rows, int columns,
                                          int treatments, uf_place_effects *effects, uf_error *error);

#endif
