/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One field through all steps, in memory: the only place that knows their order. */
#ifndef UF_RUN_FIELD_H
#define UF_RUN_FIELD_H

#include "correct/correct.h"
#include "measure/measure.h"

/* What one field gives. Planes and rows live in the worker's arena; spots are freed by uf_field_result_free. */
typedef struct uf_field_result {
    uf_channel near, wide;  /* wide after the shift */
    uf_channel *pages;      /* of a series, in the order of its angles, in the arena; near is the widest of them. NULL
                              without a series */
    uf_plane mask;          /* given labels, data NULL without */
    uf_channel nuclei;      /* imaged as the wide image was; image.data NULL without */
    int one_image;          /* wide is a copy of near: there is no shift between them */
    double reference_ratio; /* at gap 0, as it was in force in this field */
    uf_cell_map cells;
    uf_gap_map gaps;
    uf_mask contact;
    uf_cell *rows; /* cells.labels.count of them */
    uf_spot *spots;
    uf_field field; /* field.spots is their number */
} uf_field_result;

/* Corrects one channel and finds its background. UF_INPUT for a flat or defect map that cannot be used. */
UF_MUST_USE uf_status uf_field_correct(uf_work *work, const uf_raw_channel *raw, uf_channel *channel,
                                       uf_error *error);

/* Measures the field whose corrected channels stand in result->near, ->pages and ->wide (of one size; overwritten).
 * UF_MEMORY is the only failure. */
UF_MUST_USE uf_status uf_field_run(uf_work *work, const uf_plan *plan, const uf_settings *settings,
                                   uf_field_result *result, uf_error *error);

/* Frees what does not live in the arena; a zeroed result may be freed. */
void uf_field_result_free(uf_field_result *result);

#endif
