/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Light of the cells that fell beside them, and slopes of the background. */
#ifndef UF_CORRECT_HALO_H
#define UF_CORRECT_HALO_H

#include "image/channel.h"

typedef struct uf_halo {
    double share;    /* of the cells' own light that is found again, blurred; 0 when none can be told from noise */
    double share_sd; /* 1 sigma of it */
    double blur_um;  /* sigma of that blur */
    double slope;    /* change of the background over the field's width or height, relative to it; 0 when none can be
                        told */
} uf_halo;

/*
 * Finds and takes out, in `channel`, what lies outside cells:
 *
 *   image(x, y) = level + a x + b y + c x^2 + d y^2 + share * (light of the cells, blurred)
 *
 * The light of the cells is `source` inside outlines, above its background: the wide image's own for its haze (out-of-
 * focus light, scatter), the wide image again for the pedestal under the near image (excitation that is not
 * evanescent and reaches the whole cell). Blur of 1.2 to 8 um is tried on the coarse grid of `cells`; level, slopes, bows
 * (what an uneven lamp leaves without a flat) and share are fitted by least squares over blocks beyond the reach of the
 * point spread function, outliers (debris) left out. What is found is subtracted everywhere, cells included, and the level
 * becomes background_adu. Nothing happens where the field has too little outside to tell.
 *
 * Limits: light less blurred than 1.2 um is that of the dorsal membrane and stays (gap/edge_fall.h sees to it); the
 * reference must have been measured with the same correction. A halo wider than 8 um counts as background. Light that stays within the cell it came from (stray
 * light in the excitation) leaves no trace outside; that is what scattered_fraction is for.
 */
UF_MUST_USE uf_status uf_halo_remove(uf_work *work, const uf_channel *source, const uf_cell_map *cells,
                                     double pixel_size_um, uf_channel *channel, uf_halo *halo, uf_error *error);

#endif
