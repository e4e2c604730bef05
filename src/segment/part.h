/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Parting touching cells by shape and by brightness. Internal to segment. */
#ifndef UF_SEGMENT_PART_H
#define UF_SEGMENT_PART_H

#include "image/channel.h"

/*
 * Replaces the labels of connected pieces by labels of cells, 1 .. count.
 *
 * First everything is parted at the slightest neck (image/basins.h). From the cores of these parts the pieces
 * are flooded again over a relief: the relative gradient of the wide image, in which neighbours that differ
 * in dye have a ridge where one ends and the other begins, plus a little for distance from the middle of the
 * piece, so that without a ridge the neck decides. Then neighbours are joined again, most alike first,
 * unless the neck between them is narrower than `neck` times the half width of the narrower one, or they
 * differ in level and a ridge runs along their border. Tidied as uf_labels_tidy does.
 *
 * `distance_px` is the distance to the outside of all pieces; neck 0 parts nothing. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_part_cells(uf_work *work, const uf_channel *wide, uf_plane distance_px,
                                    double pixel_size_um, double neck, double min_pixels, double max_pixels,
                                    uf_labels *labels, uf_error *error);

#endif
