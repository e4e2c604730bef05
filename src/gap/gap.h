/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From the two channels to the gap of every pixel. */
#ifndef UF_GAP_GAP_H
#define UF_GAP_GAP_H

#include "image/channel.h"
#include "optics/plan.h"

/*
 * ln decay(gap) = ln(near / dye) - ln(reference ratio at gap 0), pixel by pixel, by the plan's table.
 *
 * Two things are done to the wide signal first. Its background is subtracted. And since the wide image is
 * blurred more than the near image (most of its light comes from membrane out of focus), it falls towards an
 * outline where the dye does not, which would make rims look close: the mean fall with distance from the
 * background, relative to the plateau, is measured over all outlines of the field and divided out, up to
 * the fall that the near image has itself.
 *
 * A pixel is unresolved when its near or dye signal, smoothed to the scale of the point spread function, is
 * below detection_sigma times its noise there (background's uncertainty included).
 *
 * With plan->signal == UF_SIGNAL_NEAR the wide signal plays no part: the dye counts as even over each cell. With
 * plan->reference_from_cell the reference is found here (gap/own_reference.h) and put into plan->reference_ratio.
 *
 * The near image is overwritten: map->near_adu takes its place. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_gap_find(uf_work *work, uf_plan *plan, double detection_sigma, uf_channel *near,
                                  const uf_channel *wide, const uf_cell_map *cells, uf_gap_map *map, uf_error *error);

#endif
