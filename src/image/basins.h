/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Parting a mask into the basins of a depth: touching cells at their necks, spots at the saddles between. */
#ifndef UF_IMAGE_BASINS_H
#define UF_IMAGE_BASINS_H

#include "image/plane.h"

/*
 * Replaces the labels of connected pieces (8-connected at most) by labels of basins.
 *
 * Pixels are taken from the deepest to the shallowest: one without a labelled neighbour starts a basin, the
 * others join. Where two basins meet they become one when the depth there, the saddle, is at least `neck`
 * times the depth of the shallower one; else they stay apart. With the distance to the outside as depth,
 * that is half the width of the neck between two cells against the half width of the smaller. Afterwards
 * basins under `min_pixels` join the neighbour they share the longest border with, and pieces still under
 * `min_pixels` or above `max_pixels` are dropped. Depths are told apart to a quarter, ties go row by row.
 * labels.count is set, numbers follow the first pixel row by row. Cost: a sort by counting and one pass.
 * UF_MEMORY.
 */
UF_MUST_USE uf_status uf_basins(uf_work *work, uf_plane depth, double neck, double min_pixels, double max_pixels,
                                uf_labels *labels, uf_error *error);

/* The tidying alone: small labels join, what is left too small or too large goes, numbers follow first pixels. */
UF_MUST_USE uf_status uf_labels_tidy(uf_work *work, double min_pixels, double max_pixels, uf_labels *labels,
                                     uf_error *error);

#endif
