/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the parts of the camera calibration share. */
#ifndef UF_CALIBRATE_CAMERA_PARTS_H
#define UF_CALIBRATE_CAMERA_PARTS_H

#include "calibrate/camera.h"

/* ---- tiles ----------------------------------------------------------------------------------- */

/* A frame cut into tiles of about 32 x 32 pixels, as even as they come: small enough for light to be even inside,
 * large enough for a thousand pixels to tell a variance. */
enum { UF_TILE_SIDE = 32, UF_TILE_LARGEST = 2 * UF_TILE_SIDE };

typedef struct uf_tiles {
    int width, height, across, down;
} uf_tiles;

uf_tiles uf_tiles_of(int width, int height);
int uf_tiles_count(uf_tiles tiles);
uf_box uf_tile(uf_tiles tiles, int index);

/* ---- frames ---------------------------------------------------------------------------------- */

/* A number that differs when a plane's pixels differ. */
uint64_t uf_plane_fingerprint(uf_plane plane);

/* Whether all pixels have one value. */
int uf_plane_is_constant(uf_plane plane);

/* Takes the counts of a frame into account. */
void uf_count_step_add(uf_count_step *step, uf_plane frame);

/* The step found, 0 when counts are not whole numbers or never differed. */
double uf_count_step_adu(const uf_count_step *step);

/* ---- figures --------------------------------------------------------------------------------- */

/* Signal (ADU) below which nobody can say that there was light: five times the wander of the dark level, a tenth
 * of the noise of a pixel (the mean is known far better than that, but so small a signal tells nothing). */
double uf_least_light_adu(const uf_dark *dark);

/* Median of n floats that may be reordered, the lower of the middle two. NaN for none. */
double uf_median_float(float *values, size_t n);

/* From the median of absolute departures to the sd of a normal distribution: 1 / 0.6745. */
#define UF_MAD_TO_SD 1.4826022185056018

#endif
