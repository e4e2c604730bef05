/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A reference assumed from each cell itself. */
#ifndef UF_GAP_OWN_REFERENCE_H
#define UF_GAP_OWN_REFERENCE_H

#include "image/channel.h"
#include "optics/plan.h"

/*
 * The closest hundredth of each cell is taken to lie at plan->reference_gap_nm: the ratio near / dye, at the scale of the
 * point spread function, that 1 % of the cell's pixels exceed (those nearer to the outline than twice that scale left
 * out, unless nothing else is left). factor[k], k = 1 .. count, becomes the reference at gap 0 of cell k over that of
 * the field, and plan->reference_ratio the field's: the median over cells. A cell without a signal gets 1.
 *
 * Limits: gaps are relative, and a cell that lifts as a whole looks like one that does not. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_own_reference(uf_work *work, uf_plan *plan, uf_plane near, uf_plane dye,
                                       const uf_cell_map *cells, float *factor, uf_error *error);

#endif
