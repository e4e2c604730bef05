/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A sheet in the making: rows of cells that names, layouts and options fill in one after the other. */
#ifndef UF_SHEET_DRAFT_H
#define UF_SHEET_DRAFT_H

#include "base/arena.h"
#include "sheet/columns.h"
#include "sheet/fault.h"

/* The sheet's own columns come first, by their numbers; extra ones follow. */
enum { UF_DRAFT_COLUMNS = UF_SHEET_COLUMNS + 32, UF_DRAFT_NAME = 64 };

typedef struct uf_draft_row {
    const char *cells[UF_DRAFT_COLUMNS]; /* NULL: nobody has said anything */
} uf_draft_row;

/* Zeroed it is empty and may be freed. */
typedef struct uf_draft {
    uf_draft_row *rows;
    int count, capacity;
    char extra[UF_DRAFT_COLUMNS - UF_SHEET_COLUMNS][UF_DRAFT_NAME];
    int columns;                  /* in use, at least UF_SHEET_COLUMNS once started */
    bool given[UF_DRAFT_COLUMNS]; /* some row has it from names, positions or options */
    uf_arena arena;
} uf_draft;

void uf_draft_start(uf_draft *draft);
void uf_draft_free(uf_draft *draft);

const char *uf_draft_column_name(const uf_draft *draft, int column);

/* Number of a column, in any letters, made when it is new. -1 with an error for a name of the results, one that is a letter away from
 * a known column, an empty one, or one too many. */
int uf_draft_column(uf_draft *draft, const char *name, uf_error *error);

/* A new empty row, NULL without memory; it moves when the next one is added. */
uf_draft_row *uf_draft_add(uf_draft *draft);

/* A copy of `length` bytes that lives as long as the draft, NULL without memory. */
const char *uf_draft_keep(uf_draft *draft, const char *text, size_t length);

/* Orders by session, plate, well (row by row), field, time and near file, numbers as people count. */
void uf_draft_sort(uf_draft *draft);

/* "plate plate1, well B02, field 1": what tells a row from others, for messages. */
void uf_draft_describe(const uf_draft_row *row, uf_text *out);

/* A cell as it is compared with others: wells as A01, whole numbers without zeros in front, else itself. `out` holds
 * `size` bytes. */
void uf_cell_key(int column, const char *cell, char *out, size_t size);

#endif
