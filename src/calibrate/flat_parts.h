/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the parts of the flat calibration share. */
#ifndef UF_CALIBRATE_FLAT_PARTS_H
#define UF_CALIBRATE_FLAT_PARTS_H

#include "calibrate/flat.h"

/* An image of the stack, in the smallest form that holds it; the other pointer is NULL. */
struct uf_flat_image {
    uint16_t *whole;
    float *real;
    uint64_t fingerprint;
};

/* Row y of image k as raw counts. */
void uf_flat_row(const uf_flat_stack *stack, int k, int y, float *out);

/* The same with the dark subtracted. */
void uf_flat_signal_row(const uf_flat_stack *stack, const uf_flat_request *request, int k, int y, float *out);

/* ---- the middle of values -------------------------------------------------------------------- */

/* What is left of values when those that stand out are gone. */
typedef struct uf_middle {
    double median, sd; /* robust */
    double low, high;  /* values kept lie between, ends included */
} uf_middle;

/* Of n > 0 values, which are reordered. The sd is at least that of shot noise, typical_sd x root of the median,
 * so that a few values that happen to lie close do not throw the others out. */
uf_middle uf_flat_middle(uf_flat_sample sample, float *values, size_t n, double typical_sd);

/* The sd of thousands of values about their middle, which are reordered: of those within 3.5 sd of the median
 * (cells: below it), again and again from the robust sd or `least_sd`. A quantile of whole counts that differ
 * little is 0 or a step; this is in between. */
double uf_flat_spread(uf_flat_sample sample, float *values, size_t n, double least_sd);

/* ---- levels ---------------------------------------------------------------------------------- */

/* Figures found on a lattice of pixels. */
typedef struct uf_flat_levels {
    double *level_adu;  /* of each image */
    double *unlikeness; /* of each image */
    double typical_sd;  /* of a value from the flat, relative, where the flat is 1 */
} uf_flat_levels;

/* Fills the arrays, which the caller has taken. UF_INPUT: an image hardly brighter than the dark, or unlike the
 * rest. */
UF_MUST_USE uf_status uf_flat_find_levels(uf_work *work, const uf_flat_stack *stack, const uf_flat_request *request,
                                          uf_flat_levels *levels, uf_error *error);

/* ---- pixels ---------------------------------------------------------------------------------- */

/* Raw flat (any scale near 1, NaN where there is no value), noise, count, and half the difference of the flats of odd
 * and even images (NaN where one has no value). */
typedef struct uf_flat_pixels {
    uf_plane image, noise, count, half_difference;
    double kept; /* values kept, of all */
} uf_flat_pixels;

UF_MUST_USE uf_status uf_flat_find_pixels(uf_work *work, const uf_flat_stack *stack, const uf_flat_request *request,
                                          const uf_flat_levels *levels, uf_flat_pixels *pixels, uf_error *error);

/* ---- smoothing ------------------------------------------------------------------------------- */

typedef struct uf_flat_smoother {
    uf_plane values, weights; /* scratch of the flat's size */
    double sigma_px;
} uf_flat_smoother;

/*
 * Gaussian over the pixels that have a value (normalised convolution, Knutsson and Westin 1993, CVPR: smoothed
 * values over smoothed presence), after a surface of second degree has been taken out, which comes back
 * afterwards: smoothing would level a fall-off at its summit and, since the image is mirrored there, at the
 * borders. Without smoothing (sigma 0) only the gaps take a value, that of the pixels near them. NaN stays where
 * there is nothing near. `out` may be `in`. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_flat_smooth(uf_work *work, const uf_flat_smoother *s, uf_plane in, uf_plane out,
                                     uf_error *error);

/* By how much a Gaussian narrows the sd of noise that each pixel has for itself; 1 for sigma 0. */
double uf_flat_narrowing(double sigma_px);

#endif
