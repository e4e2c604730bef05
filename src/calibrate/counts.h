/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Whole frames of counts: what steps they are in, and whether two are the same. */
#ifndef UF_CALIBRATE_COUNTS_H
#define UF_CALIBRATE_COUNTS_H

#include "base/constants.h"
#include "image/plane.h"

/* The step between neighbouring counts, found as the greatest common divisor of their differences: 16 for 12 bits
 * shifted into 16. Zeroed it has seen nothing. */
typedef struct uf_count_step {
    int started, broken; /* broken: not whole numbers */
    int64_t first, divisor;
} uf_count_step;

/* Takes the counts of a frame into account. */
void uf_count_step_add(uf_count_step *step, uf_plane frame);

/* The step found, 0 when counts are not whole numbers or never differed. */
double uf_count_step_adu(const uf_count_step *step);

/* A number that differs when a plane's pixels differ (XXH3 of its rows). */
uint64_t uf_plane_fingerprint(uf_plane plane);

/* Whether all pixels have one value. */
int uf_plane_is_constant(uf_plane plane);

/* Median of n floats that may be reordered, the lower of the middle two. NaN for none. */
double uf_median_float(float *values, size_t n);

#endif
