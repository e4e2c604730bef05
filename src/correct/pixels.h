/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Single pixels that lie. */
#ifndef UF_CORRECT_PIXELS_H
#define UF_CORRECT_PIXELS_H

#include "image/plane.h"

/* Median of the neighbours within `reach` (1 or 2) that the map does not call bad (not 0; data NULL: none is);
 * NaN when all are. */
float uf_neighbour_median(uf_plane image, uf_plane defects, int x, int y, int reach);

#endif
