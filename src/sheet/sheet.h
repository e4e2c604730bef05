/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * A sheet: CSV that lists the fields of an experiment and what was done to them. Here it is plain data, taken from a
 * table of text; run/sheet_read.h opens the file.
 */
#ifndef UF_SHEET_SHEET_H
#define UF_SHEET_SHEET_H

#include "base/arena.h"
#include "base/csv_table.h"
#include "sheet/columns.h"
#include "sheet/fault.h"
#include "sheet/well.h"

/*
 * One field. Texts are never NULL, an empty cell is "". They are as written but for outer blanks and what has one way
 * to be written: wells ("A01"), numbers (a decimal point), units ("uM"), and doses, which are in one unit within a
 * treatment. Numbers that are not there are NaN.
 */
typedef struct uf_sheet_row {
    int line;                           /* of the sheet, from 1 */
    const char *field_id;               /* plate/well/field/time of those there are where the row has a well (without
                                           a plate the session stands for it), else the near path, with "#page" where
                                           it is not the first */
    const char *text[UF_SHEET_COLUMNS]; /* by column */
    const char **extra;                 /* extra_count texts, by the order of uf_sheet.extra */
    const char *near_path, *wide_path, *nuclei_path, *mask_path, *instrument_path; /* to open; NULL: empty cell */
    int near_page, wide_page;                                                      /* from 1 */
    uf_role role;
    uf_well well; /* row -1: none, or the name of a coverslip or a dish */
    double dose, time_min, exposure_near_ms, exposure_wide_ms;
} uf_sheet_row;

/* Zeroed it is empty and may be freed. All it points to is its own. */
typedef struct uf_sheet {
    const char *path; /* as the user typed it */
    uf_sheet_row *rows;
    int count;
    bool has[UF_SHEET_COLUMNS]; /* columns that the header names */
    const char **extra;         /* names of the other columns, in the sheet's order: carried through */
    int extra_count;
    uf_csv_dialect dialect;
    uf_arena arena;
} uf_sheet;

/*
 * Takes a sheet from a table whose row 0 is the header; `table` may be freed afterwards. Relative paths are relative
 * to `root`, NULL: to the folder of `path`. All that is wrong with single cells, the header, and rows against each
 * other is added to `faults`, with lines: unknown roles, unknown wells, numbers that are none, two rows of one field,
 * doses of one treatment in units that cannot be converted, columns with the name of a result. A sheet with a fault
 * must not be used, but is whole: every row is there. UF_MEMORY only.
 */
UF_MUST_USE uf_status uf_sheet_take(uf_sheet *sheet, const uf_csv_table *table, const char *path, const char *root,
                                    uf_faults *faults, uf_error *error);

void uf_sheet_free(uf_sheet *sheet);

/* Orders words as people count: a2 before a10. Words that differ only in zeros before numbers are ordered by strcmp. */
int uf_natural_compare(const char *a, const char *b);

#endif
