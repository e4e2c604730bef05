/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Smooth random variation: standard normals on a square lattice, joined by cubic B-splines. Where a pixel
 * lies between lattice points, the four weights per axis are divided by the root of their summed squares, so
 * that every pixel is exactly standard normal, whatever the spacing. Neighbours correlate like a Gaussian
 * blur of sigma 0.58 spacings (a cubic B-spline has variance 1/3). Cost: eight products a pixel.
 */
#ifndef UF_SCENE_LATTICE_NOISE_H
#define UF_SCENE_LATTICE_NOISE_H

#include "image/plane.h"
#include "scene/random.h"

/* Fills `out`. A spacing below one pixel is taken as one. Scratch from the arena is given back. UF_MEMORY. */
UF_MUST_USE uf_status uf_lattice_noise(uf_work *work, uf_random *random, double spacing_px, uf_plane out,
                                       uf_error *error);

#endif
