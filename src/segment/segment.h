/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Cells in the wide image. */
#ifndef UF_SEGMENT_SEGMENT_H
#define UF_SEGMENT_SEGMENT_H

#include "image/channel.h"
#include "settings/settings.h"

/*
 * Finds the cells of a field in its wide image.
 *
 * A cell ends where its image falls to half of its own level just inside, over the local level just outside:
 * blur, however wide, leaves that place alone, while one threshold for all puts bright cells' outlines too
 * far out. Both levels are mapped on a coarse grid (segment/levels.c), the image is cut at their middle,
 * holes are filled, touching cells are split at their necks (image/basins.h), debris is dropped.
 *
 * `nuclei` (data NULL: none) says where cells touch: each piece is parted into as many cells as it has nuclei.
 * `given` (data NULL: none) takes the place of all that: its values are the cells, 0 outside.
 *
 * Fills `map`: labels 1 .. count in the order of their first pixel, row by row. Errors: UF_MEMORY; UF_INPUT when
 * `given` holds values that are no labels.
 */
UF_MUST_USE uf_status uf_segment(uf_work *work, const uf_channel *wide, const uf_settings *settings,
                                 double pixel_size_um, uf_plane given, uf_labels nuclei, uf_cell_map *map,
                                 uf_error *error);

/* The nuclei of a channel of their own: found like cells, 10 um2 at least. UF_MEMORY. */
UF_MUST_USE uf_status uf_segment_nuclei(uf_work *work, const uf_channel *channel, double pixel_size_um,
                                        uf_labels *nuclei, uf_error *error);

#endif
