/* SPDX-License-Identifier: GPL-3.0-or-later */
/* CSV in, by RFC 4180: commas, quotes doubled inside quotes, a header row. Blank lines are skipped. */
#ifndef UF_IO_CSV_READ_H
#define UF_IO_CSV_READ_H

#include "base/text.h"

/* A table whole: every row has `columns` fields, row 0 is the header. Zeroed it is empty and may be freed. */
typedef struct uf_csv_table {
    int rows, columns;
    char **cells;  /* row after row, NUL-terminated */
    int *lines;    /* where each row starts in the file, from 1 */
    uf_text bytes; /* what the cells point into */
} uf_csv_table;

static inline const char *uf_csv_cell(const uf_csv_table *table, int row, int column)
{
    return table->cells[(size_t)row * (size_t)table->columns + (size_t)column];
}

/* Takes text apart. `path` is for the errors, which name the line: a row longer or shorter than the header, a quote
 * that does not close, semicolons instead of commas, no header. A byte-order mark and Windows line ends are fine. */
UF_MUST_USE uf_status uf_csv_parse(uf_csv_table *table, const char *text, size_t length, const char *path,
                                   uf_error *error);

/* The same of a file of at most `max_bytes`. */
UF_MUST_USE uf_status uf_csv_read(uf_csv_table *table, const char *path, size_t max_bytes, uf_error *error);

/* Number of the header's column called `name`, -1 when there is none. */
int uf_csv_column(const uf_csv_table *table, const char *name);

void uf_csv_free(uf_csv_table *table);

#endif
