/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Levels on both sides of the outlines, on a coarse grid. Internal to segment. */
#ifndef UF_SEGMENT_LEVELS_H
#define UF_SEGMENT_LEVELS_H

#include "image/channel.h"

/* Fills factor, plateau_adu and outside_adu of the map; `share` of the way from outside to plateau is the outline.
 * UF_MEMORY. */
UF_MUST_USE uf_status uf_levels_find(uf_work *work, const uf_channel *wide, double pixel_size_um, float share,
                                     uf_cell_map *map, uf_error *error);

/* Distance from cells on the coarse grid, in image pixels, into map->outside_px (from map->labels). */
UF_MUST_USE uf_status uf_levels_outside(uf_work *work, uf_cell_map *map, uf_error *error);

#endif
