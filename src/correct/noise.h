/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The camera's noise from one image, where nobody measured it. */
#ifndef UF_CORRECT_NOISE_H
#define UF_CORRECT_NOISE_H

#include "image/channel.h"

/*
 * Fills channel->noise: variance = signal / gain + read^2 fitted to one image. Second differences in both directions
 * (Immerkaer 1996, Comput. Vis. Image Underst. 64:300: the kernel 1 -2 1 / -2 4 -2 / 1 -2 1, of norm 6) leave the noise of
 * what is smooth over three pixels. Where the image is sorted by its local mean into bins, the median of their absolute
 * values gives each bin's variance (over 0.6745 squared and 36), and a straight line through the bins gain and read noise (the
 * photon transfer relation, EMVA 1288).
 *
 * Limits: fine structure counts as noise, so that bright places look noisier than they are, and undersampled images
 * most. Returns 0 and leaves the channel as it is when the line does not rise: the caller falls back on the
 * background's spread. *status is UF_MEMORY or UF_OK.
 */
UF_MUST_USE int uf_noise_from_image(uf_work *work, uf_channel *channel, uf_status *status, uf_error *error);

#endif
