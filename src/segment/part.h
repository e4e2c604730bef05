/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Parting touching cells by shape and by brightness. Internal to segment. */
#ifndef UF_SEGMENT_PART_H
#define UF_SEGMENT_PART_H

#include "image/channel.h"

typedef struct uf_part_settings {
    double pixel_size_um;
    double neck;                   /* 0 parts nothing, 1 at the slightest neck */
    double min_pixels, max_pixels; /* of a cell */
    uf_labels nuclei;              /* one a cell, of the image's size; data NULL: none are known */
} uf_part_settings;

/*
 * Replaces the labels of connected pieces by labels of cells, 1 .. count.
 *
 * On a grid of about 0.25 um everything is first parted at the slightest neck (image/basins.h). From the cores
 * of these parts the pieces are flooded again over the relative gradient of the image (segment/flood.h), in
 * which neighbours that differ in dye have a ridge where one ends and the other begins. Then neighbours are
 * joined again, widest neck first, unless the neck between them is narrower than `neck` times the half width of
 * the narrower one, or they differ in level and a ridge runs along their border. Last, the borders that are left
 * are drawn in full resolution by a flood of the strip around them, and labels are tidied (uf_labels_tidy).
 *
 * Where nuclei are known they decide instead: a piece with several is flooded from them, one with one or none is one
 * cell, whatever its shape.
 *
 * `wide` holds background and noise, `smooth_adu` its image smoothed, `distance_px` the distance to the outside
 * of all pieces. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_part_cells(uf_work *work, const uf_channel *wide, uf_plane smooth_adu, uf_plane distance_px,
                                    const uf_part_settings *settings, uf_labels *labels, uf_error *error);

#endif
