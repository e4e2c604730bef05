/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Parting a mask into the basins of a depth: touching cells at their necks, spots at the saddles between. */
#ifndef UF_IMAGE_BASINS_H
#define UF_IMAGE_BASINS_H

#include "image/plane.h"

/*
 * Replaces labels (all that is not 0 is ground) by labels of basins.
 *
 * Pixels are taken from the deepest to the shallowest: one without a labelled neighbour starts a basin, the
 * others join. Where two basins meet they become one when the depth there, the saddle, is at least `neck`
 * times the depth of the shallower one; else they stay apart. With the distance to the outside as depth,
 * that is half the width of the neck between two cells against the half width of the smaller. Depths are told
 * apart to a quarter, ties go row by row. labels.count is the largest number; numbers of basins that joined
 * others are not in use. Cost: a sort by counting and one pass. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_basins(uf_work *work, uf_plane depth, double neck, uf_labels *labels, uf_error *error);

/* Labels under `min_pixels` join the neighbour they share the longest border with; those still under it or above
 * `max_pixels` are dropped; the rest is numbered 1 .. count in the order of first pixels, row by row. UF_MEMORY. */
UF_MUST_USE uf_status uf_labels_tidy(uf_work *work, double min_pixels, double max_pixels, uf_labels *labels,
                                     uf_error *error);

#endif
