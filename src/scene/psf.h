/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * What the objective does to a plane of light: a Gaussian blur, and a displacement by any part of a pixel.
 *
 * Light is taken as evenly spread over each pixel of the scene, is blurred by the Gaussian, and is collected
 * by the square pixels of the camera. Along one axis a tap is then the Gaussian convolved with the triangle
 * of half-width 1, and has a closed form: the second difference of G(u) = u Phi(u / sigma) + sigma
 * phi(u / sigma), with Phi and phi the normal distribution and density. Three things follow. The taps sum to
 * 1 and their mean is the displacement, so nothing is interpolated; sigma 0 without displacement leaves the
 * plane as it is; and the two pixels add 1/6 px^2 to the variance of a wide blur.
 *
 * Taps end 4 sigma out (1e-4 of the light, put back by scaling). Beyond the plane light is mirrored.
 */
#ifndef UF_SCENE_PSF_H
#define UF_SCENE_PSF_H

#include "image/plane.h"

/* `out` becomes `in` blurred and moved by (dx, dy): what was at (x, y) lies at (x + dx, y + dy). `out` may be
 * `in`. Scratch from the arena is given back. Cost: 2 (8 sigma + 3) products a pixel. UF_MEMORY. */
UF_MUST_USE uf_status uf_psf_blur(uf_work *work, uf_plane in, double sigma_px, double dx_px, double dy_px,
                                  uf_plane out, uf_error *error);

#endif
