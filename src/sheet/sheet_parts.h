/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Between the files of the sheet reader. */
#ifndef UF_SHEET_SHEET_PARTS_H
#define UF_SHEET_SHEET_PARTS_H

#include "sheet/sheet.h"

/* A sheet being taken from a table. */
typedef struct sheet_taking {
    uf_sheet *sheet;
    const uf_csv_table *table;
    const char *root;
    uf_faults *faults;
    int from[UF_SHEET_COLUMNS]; /* the table's column, -1: none */
    int *extra_from;
    int decimal_commas, backslashes, split_units; /* cells that had them */
    int comma_line, backslash_line, unit_line;    /* the first of each */
} sheet_taking;

#endif
