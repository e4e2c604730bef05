/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Gaussian smoothing, reduction to a coarse grid, and the sub-pixel shift. */
#ifndef UF_IMAGE_SMOOTH_H
#define UF_IMAGE_SMOOTH_H

#include "image/plane.h"

/* out = in convolved with a Gaussian of `sigma_px` (0: a copy), cut at 4 sigma and normalised, the image
 * mirrored at its borders (d c b a | a b c d). `out` may be `in`. The same definition as
 * scipy.ndimage.gaussian_filter with its defaults. Scratch comes from the arena and is given back. */
UF_MUST_USE uf_status uf_smooth(uf_work *work, uf_plane in, double sigma_px, uf_plane out, uf_error *error);

/* Mean over blocks of factor x factor pixels, those at the right and lower border over what there is.
 * `out` is ceil(width / factor) x ceil(height / factor). NaN does not belong here. */
void uf_reduce(const uf_work *work, uf_plane in, int factor, uf_plane out);

/* out(x, y) = in(x + dx, y + dy) by a 6-point Lagrange interpolation in each direction (exact for
 * polynomials up to degree 5); beyond the border the border pixel goes on. Whole-pixel shifts are copies. */
UF_MUST_USE uf_status uf_shift(uf_work *work, uf_plane in, double dx, double dy, uf_plane out, uf_error *error);

/* Row y of a coarse plane (as uf_reduce makes it with `factor`) at full resolution: bilinear between the centres
 * of its pixels, the outermost going on beyond them. `columns` is `width` pixels wide at uf_expand_columns. */
typedef struct uf_expand_column {
    int32_t left;
    float part; /* of the way to the next */
} uf_expand_column;

void uf_expand_columns(int coarse_width, int factor, int width, uf_expand_column *columns);
void uf_expand_row(uf_plane coarse, int factor, int y, const uf_expand_column *columns, float *out, int width);

#endif
