/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What can be told from noise, at the scale of the point spread function. */
#ifndef UF_OPTICS_DETECTION_H
#define UF_OPTICS_DETECTION_H

#include "image/channel.h"
#include "optics/plan.h"

/* Variance of a pixel after smoothing with the point spread function, over that of a pixel: a Gaussian of
 * sigma s averages 4 pi s^2 pixels (the integral of its square is 1 / (4 pi s^2)); under half a pixel none. */
double uf_psf_smoothing(const uf_plan *plan);

/* 1 sigma of a smoothed pixel of `signal_adu` above background, the background's uncertainty included. */
double uf_smoothed_sd(const uf_plan *plan, const uf_channel *channel, double signal_adu);

/* The largest gap that can be told from none where the dye signal is `dye_adu`: there the near signal is
 * detection_sigma times its noise. Of a series at most where its search ends. */
double uf_gap_limit_nm(const uf_plan *plan, double detection_sigma, const uf_channel *near, const uf_channel *wide,
                       double dye_adu);

/* 1 sigma of a gap from the noise of both channels: |d gap / d ln| times the relative noise of near and wide in squares;
 * of a series, from its pages, which are as the filter leaves them.
 * `filter` is what the map's filter leaves of a pixel's variance: plan->restore_variance for the gap map,
 * uf_psf_smoothing for the smooth one. NaN where either signal is not above 0. */
double uf_gap_noise_nm(const uf_plan *plan, double filter, const uf_channel *near, const uf_channel *wide,
                       double near_adu, double dye_adu);

/* |d gap / d ln(relative excitation)| at a gap: the depth, for an exponential. */
double uf_gap_per_ln(const uf_plan *plan, double gap_nm);

#endif
