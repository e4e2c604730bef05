/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Layouts: what was done to which well, as people write it down. Either blocks as drawn on paper (the property's name in
 * the corner, columns 1.. to the right, rows A.. below; several in one file, under each other or side by side, each with
 * its plate's name above it where plates differ), or a list: one well (plate, session, position, ...) a line.
 *
 * Nothing is guessed: a well left blank stays blank, and how many there are is said.
 */
#ifndef UF_SHEET_LAYOUT_H
#define UF_SHEET_LAYOUT_H

#include "base/csv_table.h"
#include "sheet/draft.h"
#include "sheet/well.h"

/* One drawn block. */
typedef struct uf_block {
    const char *file;
    int line;                        /* of its corner */
    const char *property;            /* what the corner says, without a unit in brackets */
    const char *unit;                /* that unit, or NULL */
    const char *plate, *title;       /* a plate's name said above it; other words above it; or NULL */
    int first_column, columns;       /* drawn columns, from 0 */
    const char **rows[UF_MOST_ROWS]; /* cells of the rows drawn, "" where blank; NULL: not drawn */
    int lines[UF_MOST_ROWS];
    int blank; /* wells drawn but blank */
} uf_block;

/* A list. Cell `c` of row `r` is cells[r * columns + c]. */
typedef struct uf_list {
    const char *file;
    const char **names, **units; /* of the columns; unit NULL: none */
    int columns, rows;
    const char **cells;
    int *lines;
    const char *plate; /* said on the command line, or NULL */
} uf_list;

/* Zeroed it is empty and may be freed. */
typedef struct uf_layout {
    uf_block *blocks;
    int block_count, block_capacity;
    uf_list *lists;
    int list_count, list_capacity;
    uf_arena arena;
} uf_layout;

/* Adds what a file holds; `plate` (may be NULL) is the plate all of it belongs to. What cannot be read is added to
 * `faults` with its line, and so is how many wells are blank. UF_MEMORY only. */
UF_MUST_USE uf_status uf_layout_take(uf_layout *layout, const uf_csv_table *table, const char *path,
                                     const char *plate, uf_faults *faults, uf_error *error);

/* Fills the draft's rows in. A list's columns that the draft was given already are what its lines are found by, the
 * others are what they say. Faults: a row without a line in a list, two lines for one row, a property said twice, wells
 * beyond the drawing. Warnings: wells and lines without images. */
UF_MUST_USE uf_status uf_layout_apply(const uf_layout *layout, uf_draft *draft, uf_faults *faults, uf_error *error);

/* Adds rows for `fields` fields in each well that the layout says something about: for images that are yet to be made. */
UF_MUST_USE uf_status uf_layout_expect(const uf_layout *layout, int fields, uf_draft *draft, uf_faults *faults,
                                       uf_error *error);

void uf_layout_free(uf_layout *layout);

#endif
