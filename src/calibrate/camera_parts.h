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

/* ---- figures --------------------------------------------------------------------------------- */

/* Signal (ADU) below which nobody can say that there was light: five times the wander of the dark level, a tenth
 * of the noise of a pixel (the mean is known far better than that, but so small a signal tells nothing). */
double uf_least_light_adu(const uf_dark *dark);

#endif
