/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where in an image the structure lies that a shift is told by. */
#ifndef UF_CALIBRATE_STRUCTURE_H
#define UF_CALIBRATE_STRUCTURE_H

#include "image/plane.h"

/*
 * Centre of an image's edges: pixels weighted by the squared slope of the image smoothed by 2 px, what is usual in it (the
 * median, mostly noise) taken off, and by a window that falls to the border as that of correlation does. A shift found by
 * correlating a part of a field belongs there, and not to the part's middle: a cell's outline in one corner says where that
 * corner went. The middle of an image without edges. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_structure_centre(uf_work *work, uf_plane image, double *x, double *y, uf_error *error);

#endif
