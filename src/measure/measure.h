/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From labels and gaps to rows. */
#ifndef UF_MEASURE_MEASURE_H
#define UF_MEASURE_MEASURE_H

#include "image/channel.h"
#include "optics/plan.h"
#include "record/records.h"
#include "settings/settings.h"

/* All that measuring looks at. */
typedef struct uf_measure_input {
    const uf_plan *plan;
    const uf_settings *settings;
    const uf_channel *near, *wide;
    const uf_cell_map *cells;
    const uf_gap_map *gaps;
} uf_measure_input;

/* One row a cell into rows[0 .. count - 1] (made in the arena), everything but spots, and the contact map: 1
 * where the gap is at most the cutoff, in patches of at least min_patch_um2, of cells whose contact is reported.
 * UF_MEMORY. */
UF_MUST_USE uf_status uf_measure_cells(uf_work *work, const uf_measure_input *input, uf_cell **rows, uf_mask *contact,
                                       uf_error *error);

/* One row a spot, by cell and then top to bottom, in memory that the caller frees with free(); fills the cells'
 * spot columns. UF_MEMORY. */
UF_MUST_USE uf_status uf_measure_spots(uf_work *work, const uf_measure_input *input, uf_cell *rows, uf_spot **spots,
                                       int *count, uf_error *error);

/* The field's sums over its cells. Fills the counts, densities and levels; shift, status and identity are the
 * caller's. */
void uf_measure_field(const uf_measure_input *input, const uf_cell *rows, int spots, uf_field *field);

#endif
