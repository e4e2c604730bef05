/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Splitting touching cells by shape. Internal to segment. */
#ifndef UF_SEGMENT_SPLIT_H
#define UF_SEGMENT_SPLIT_H

#include "image/plane.h"

/*
 * Replaces the labels of connected pieces by labels of cells.
 *
 * `distance_px` is the distance to the outside. Pixels are taken from the deepest to the shallowest: one
 * without a labelled neighbour starts a cell, others join. Where two cells meet, the distance is half the
 * width of the neck between them: they stay apart when it is less than `neck` times the depth of the
 * shallower one, and become one otherwise. Afterwards cells under `min_pixels` join the neighbour they share
 * the longest border with; pieces under `min_pixels` or above `max_pixels` are dropped.
 * labels.count is set, numbers follow the first pixel row by row. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_split(uf_work *work, uf_plane distance_px, double neck, double min_pixels,
                               double max_pixels, uf_labels *labels, uf_error *error);

#endif
