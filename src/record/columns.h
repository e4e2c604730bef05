/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * THE table of columns. From it come the CSV headers, the CSV rows and docs/columns.md; a new column is
 * one member in records.h and one line in columns.c.
 */
#ifndef UF_RECORD_COLUMNS_H
#define UF_RECORD_COLUMNS_H

#include "base/text.h"
#include "record/records.h"

typedef enum uf_column_kind {
    UF_COLUMN_REAL,     /* double; NaN is an empty cell */
    UF_COLUMN_WHOLE,    /* int */
    UF_COLUMN_COUNT,    /* double that holds a count; NaN is an empty cell */
    UF_COLUMN_TEXT,     /* const char *; NULL is an empty cell */
    UF_COLUMN_YES_NO,   /* int */
    UF_COLUMN_FLAGS,    /* uf_flags: words joined by ';' */
    UF_COLUMN_GAP_KIND, /* uf_gap_kind */
    UF_COLUMN_STATE     /* uf_field_state */
} uf_column_kind;

typedef struct uf_column {
    const char *name; /* with its unit: contact_area_um2 */
    uf_column_kind kind;
    size_t offset;       /* of the member in the row's struct */
    const char *meaning; /* one sentence for docs/columns.md */
} uf_column;

typedef struct uf_table {
    const char *name;    /* "cells": the file is cells.csv */
    const char *meaning; /* what one row is */
    const uf_column *columns;
    int count;
} uf_table;

extern const uf_table uf_table_cells, uf_table_spots, uf_table_fields;

/* All of them: what the docs list, and what no column of a sheet may be called. */
extern const uf_table *const uf_tables[];
extern const int uf_table_count;

/* Appends the value of one column of `row` (a struct of the table's kind), unquoted; nothing when it
 * does not exist. */
void uf_column_value(uf_text *out, const uf_column *column, const void *row);

/* Appends docs/columns.md: every table and column with its meaning. */
void uf_columns_page(uf_text *out);

#endif
