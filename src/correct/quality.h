/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Figures of a channel's quality, to compare fields by: higher is better. */
#ifndef UF_CORRECT_QUALITY_H
#define UF_CORRECT_QUALITY_H

#include "image/channel.h"

/*
 * Focus: how much fine structure cells show beside the coarser. Inside outlines the image is split by Gaussians of sigma
 * s, 2 s and 4 s (s twice the ideal point spread function's, at least 0.7 px) into a fine and a coarse band of mean squares F
 * and C, the noise's part taken off both. The figure is sqrt((16 F / C - 1) / 15): 0 for blur far beyond s (the bands
 * are then second derivatives times s^2, so that C = 16 F), 0.68 for sharp edges (F = C / 2), 1 for structure as fine as
 * coarse. Of more than 512 rows four strips of 64 are looked at. NaN without cells, or where the coarse band is not above its
 * noise. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_focus_of(uf_work *work, const uf_channel *channel, uf_labels labels, double psf_px,
                                  double *focus, uf_error *error);

#endif
