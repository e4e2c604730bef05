/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A table of text as CSV holds it, once read: plain data that io fills and others take apart. */
#ifndef UF_BASE_CSV_TABLE_H
#define UF_BASE_CSV_TABLE_H

#include "base/text.h"

/* How the text was written, where it is not plain CSV by RFC 4180. */
typedef struct uf_csv_dialect {
    char separator;   /* ',', ';' or tab */
    bool said;        /* a first line "sep=;" says so */
    bool latin1;      /* not UTF-8: read as Windows-1252 (Latin-1) */
    bool mark;        /* begins with a byte-order mark */
    bool lone_return; /* lines end in a carriage return alone */
} uf_csv_dialect;

/* Every row has `columns` cells; row 0 is the header where there is one. Zeroed it is empty and may be freed. */
typedef struct uf_csv_table {
    int rows, columns;
    char **cells;  /* row after row, NUL-terminated, UTF-8 */
    int *lines;    /* where each row starts in the file, from 1 */
    int *fields;   /* how many fields each row had; the cells after them are empty */
    uf_text bytes; /* what the cells point into */
    uf_csv_dialect dialect;
} uf_csv_table;

static inline const char *uf_csv_cell(const uf_csv_table *table, int row, int column)
{
    return table->cells[(size_t)row * (size_t)table->columns + (size_t)column];
}

#endif
