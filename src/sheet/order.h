/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From the running numbers of stage positions to wells. */
#ifndef UF_SHEET_ORDER_H
#define UF_SHEET_ORDER_H

#include "sheet/draft.h"
#include "sheet/well.h"

typedef struct uf_order {
    bool serpentine;     /* every other row from right to left; else every row from the left */
    int fields_per_well; /* from 1 */
    uf_vessel vessel;
    const char *wells; /* "B02-G11" corner to corner, several joined by commas; NULL: the whole plate */
} uf_order;

/* Whether a well is among the wells named; a fault of the text is UF_USAGE. */
UF_MUST_USE uf_status uf_wells_parse(const char *text, uf_vessel vessel, bool wells[UF_MOST_ROWS][UF_MOST_COLUMNS],
                                     uf_error *error);

/* Gives each row well and field by its place among the positions of its plate and session, in the order people count.
 * UF_INPUT, with both counts, when the positions are not the wells times the fields. */
UF_MUST_USE uf_status uf_order_apply(const uf_order *order, uf_draft *draft, uf_error *error);

#endif
