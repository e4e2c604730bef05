/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Wells and vessels. Names follow the ANSI/SLAS microplate convention: rows A .. Z, AA .. AF from the top, columns from
 * 1 at the left, A1 top left; formats of 6 to 1536 wells. A1, A01 and a1 are one well.
 */
#ifndef UF_SHEET_WELL_H
#define UF_SHEET_WELL_H

#include <stdbool.h>

#include "base/status.h"

/* Counted from 0; row -1: no well of a plate. */
typedef struct uf_well {
    int row, column;
} uf_well;

/* wells 0: a coverslip or a dish, where any name will do. */
typedef struct uf_vessel {
    int wells, rows, columns;
} uf_vessel;

enum { UF_WELL_NAME = 8, UF_MOST_ROWS = 32, UF_MOST_COLUMNS = 48 };

/* Reads a row's letters, A .. AF in either case, all of `text`; -1 for anything else. */
int uf_row_parse(const char *text);

/* Reads all of `text` as a well of a plate of up to 1536 wells, outer blanks allowed. */
bool uf_well_parse(const char *text, uf_well *well);

/* Writes "A01", "AF48". */
void uf_well_name(char name[UF_WELL_NAME], uf_well well);

/* Orders wells row by row. */
static inline int uf_well_compare(uf_well a, uf_well b)
{
    return a.row != b.row ? a.row - b.row : a.column - b.column;
}

static inline bool uf_well_on(uf_vessel vessel, uf_well well)
{
    return well.row >= 0 && well.row < vessel.rows && well.column >= 0 && well.column < vessel.columns;
}

/* Whether the well lies at the plate's rim, whose wells dry out and warm up first. */
static inline bool uf_well_at_edge(uf_vessel vessel, uf_well well)
{
    return well.row == 0 || well.column == 0 || well.row == vessel.rows - 1 || well.column == vessel.columns - 1;
}

/* Reads "96", "96-well", "96 wells", "coverslip" or "dish", case-blind. */
bool uf_vessel_parse(const char *text, uf_vessel *vessel);

/* The smallest plate that holds a well; 1536 wells when none does. */
uf_vessel uf_vessel_holding(uf_well well);

#endif
