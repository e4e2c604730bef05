/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How far the wide image is shifted against the near image. */
#ifndef UF_CORRECT_SHIFT_H
#define UF_CORRECT_SHIFT_H

#include "image/channel.h"

typedef struct uf_shift_estimate {
    double dx_px, dy_px; /* what is at x in near is at x + dx in wide */
    double score;        /* correlation peak over the highest value elsewhere; 1 is chance */
    int trusted;         /* score is high enough and the peak lies inside the search range */
} uf_shift_estimate;

/*
 * The two channels show different things: what they share is where the cells end and how the dye is
 * distributed. Both are reduced to their edges (square root, which evens out photon noise, then the
 * difference of two Gaussians), correlated by FFT for the whole-pixel peak, and the peak is refined by the
 * maximum of a quadratic fitted to the correlation around it. Search range: an eighth of the shorter side,
 * at most 64 px. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_shift_find(uf_work *work, const uf_channel *near, const uf_channel *wide,
                                    uf_shift_estimate *estimate, uf_error *error);

#endif
