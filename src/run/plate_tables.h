/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Tables of a plate run: a pure function of plan and records, rebuilt whole. */
#ifndef UF_RUN_PLATE_TABLES_H
#define UF_RUN_PLATE_TABLES_H

#include "io/output.h"
#include "report/well_map.h"
#include "run/plate.h"
#include "run/plate_plan.h"
#include "run/plate_record.h"

#define UF_RECORDS "records"

enum { UF_WELL_METRICS = 80 };

/* One row of wells.csv. */
typedef struct uf_plate_well {
    int first_row;              /* of the plan: stands for what the sheet says of the well */
    int row_count, next_member; /* rows of it are members[next_member ..] */
    int replicate;
    uf_well_state state;
    double used; /* cells that count */
    double cells_per_mm2;
    double *means; /* of each metric */
} uf_plate_well;

/* All of them, for what is drawn of them. Zeroed it is empty and may be freed. */
typedef struct uf_plate_well_list {
    uf_plate_well *wells;
    int count, *members;
    const uf_column *metrics[UF_WELL_METRICS];
    int metric_count;
    uf_arena arena;
} uf_plate_well_list;

void uf_plate_well_list_free(uf_plate_well_list *list);

/* "ok", "empty" .. in wells.csv. */
extern const char *const uf_well_state_words[UF_WELL_STATES];

/* Reads the record of a row; 0 when there is no whole one of this plan. `bytes` is emptied and filled. UF_INPUT when it cannot
 * be read. */
UF_MUST_USE uf_status uf_plate_record_of(const uf_output *output, const uf_plate_plan *plan, int row, uf_arena *arena,
                                         uf_plate_record *record, int *found, uf_error *error);

/* cells.csv, spots.csv, fields.csv, wells.csv, replicates.csv, reference.csv; counts what they hold into the summary. All
 * records must be there. UF_OUTPUT, UF_MEMORY. */
UF_MUST_USE uf_status uf_plate_tables(const uf_output *output, const uf_plate_plan *plan, uf_plate_summary *summary,
                                      uf_plate_well_list *wells, uf_error *error);

/* wells.csv and replicates.csv. */
UF_MUST_USE uf_status uf_plate_wells(const uf_output *output, const uf_plate_plan *plan, uf_plate_summary *summary,
                                     uf_plate_well_list *wells, uf_error *error);

/* Appends the sheet's columns that `want` asks for (NULL: all): the header, or the cells of a row, each with a comma after it. */
typedef int uf_want_column(uf_sheet_column column);
void uf_put_sheet_header(uf_text *out, const uf_sheet *sheet, uf_want_column *want);
void uf_put_sheet_cells(uf_text *out, const uf_sheet *sheet, const uf_sheet_row *row, uf_want_column *want);

#endif
