/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "calibrate/camera_parts.h"

#include <math.h>

/* ---- tiles ----------------------------------------------------------------------------------- */

static int tiles_along(int length)
{
    int count = (length + UF_TILE_SIDE / 2) / UF_TILE_SIDE;
    return count ? count : 1;
}

uf_tiles uf_tiles_of(int width, int height)
{
    return (uf_tiles){width, height, tiles_along(width), tiles_along(height)};
}

int uf_tiles_count(uf_tiles tiles)
{
    return tiles.across * tiles.down;
}

static int cut(int k, int count, int length)
{
    return (int)((int64_t)k * length / count);
}

uf_box uf_tile(uf_tiles tiles, int index)
{
    int i = index % tiles.across, j = index / tiles.across;
    return (uf_box){cut(i, tiles.across, tiles.width), cut(j, tiles.down, tiles.height),
                    cut(i + 1, tiles.across, tiles.width), cut(j + 1, tiles.down, tiles.height)};
}

/* ---- figures --------------------------------------------------------------------------------- */

double uf_least_light_adu(const uf_dark *dark)
{
    return fmax(5 * dark->drift_adu, 0.1 * dark->noise_rms_adu);
}
