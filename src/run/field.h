/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One field through all steps, in memory: the only place that knows their order. */
#ifndef UF_RUN_FIELD_H
#define UF_RUN_FIELD_H

#include "correct/correct.h"
#include "measure/measure.h"

/* What one field gives. Planes and rows live in the worker's arena; spots are freed by uf_field_result_free. */
typedef struct uf_field_result {
    uf_channel near, wide; /* wide after the shift */
    uf_cell_map cells;
    uf_gap_map gaps;
    uf_mask contact;
    uf_cell *rows;  /* cells.labels.count of them */
    uf_spot *spots;
    uf_field field; /* field.spots is their number */
} uf_field_result;

/* Measures a field from the counts of its two channels (overwritten). Same sizes are the caller's to check.
 * UF_INPUT for flats or defect maps that cannot be used, UF_MEMORY. */
UF_MUST_USE uf_status uf_field_run(uf_work *work, const uf_plan *plan, const uf_settings *settings,
                                   const uf_raw_channel raw[UF_CHANNELS], uf_field_result *result, uf_error *error);

/* Frees what does not live in the arena; a zeroed result may be freed. */
void uf_field_result_free(uf_field_result *result);

#endif
