/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Taking blur out without raising noise. A plane smoothed once (s = G f) and twice (t = G s) gives
 *
 *   restored = s + gain (s - t)
 *
 * one step of Van Cittert's iteration (1931, Z. Phys. 69:298) on the smoothed plane: fine noise is gone with G, and what
 * G and the blur before it took from larger structures comes back. To first order in the square of the wave number it
 * undoes a Gaussian blur of sigma b before a smoothing of sigma s where gain = 1 + (b / s)^2.
 */
#ifndef UF_IMAGE_RESTORE_H
#define UF_IMAGE_RESTORE_H

#include "image/plane.h"

/* out = restored, from `smooth`, which was smoothed by sigma_px. */
UF_MUST_USE uf_status uf_restore(uf_work *work, uf_plane smooth, double sigma_px, double gain, uf_plane out,
                                 uf_error *error);

/* Variance of white noise after smoothing and restoring, over that before: the sum of squares of the filter's taps. */
double uf_restore_variance(double sigma_px, double gain);

#endif
