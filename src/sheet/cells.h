/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The cells of a sheet's row: their texts into numbers, wells, paths. */
#ifndef UF_SHEET_CELLS_H
#define UF_SHEET_CELLS_H

#include "sheet/sheet_parts.h"

/* Fills in what follows from the row's texts, and adds what is wrong with them. */
UF_MUST_USE uf_status uf_sheet_take_cells(sheet_taking *t, uf_sheet_row *row, uf_error *error);

/* Adds notes on what was understood though it is no plain CSV. */
void uf_sheet_say_understood(const sheet_taking *t);

/* Gives every treatment one unit: that of its first row with a dose. */
UF_MUST_USE uf_status uf_sheet_unify_doses(sheet_taking *t, uf_error *error);

#endif
