/* SPDX-License-Identifier: GPL-3.0-or-later */
/* CSV in: by RFC 4180, or as spreadsheets write it. Blank lines are skipped. */
#ifndef UF_IO_CSV_READ_H
#define UF_IO_CSV_READ_H

#include "base/csv_table.h"

/* Takes text apart. `path` is for the errors, which name the line: a row longer or shorter than the header, a quote
 * that does not close, semicolons instead of commas, no header. A byte-order mark and Windows line ends are fine. */
UF_MUST_USE uf_status uf_csv_parse(uf_csv_table *table, const char *text, size_t length, const char *path,
                                   uf_error *error);

/* The same of a file of at most `max_bytes`. */
UF_MUST_USE uf_status uf_csv_read(uf_csv_table *table, const char *path, size_t max_bytes, uf_error *error);

/* The same, as spreadsheets write it: commas, semicolons or tabs (a first line "sep=;" decides, else what most lines
 * hold), rows of any length, Windows-1252 (Latin-1) where the bytes are no UTF-8. table->dialect tells what was met.
 * UF_INPUT with the mend: a workbook (.xlsx and its like) or UTF-16 instead of text, a quote that does not close. */
UF_MUST_USE uf_status uf_csv_parse_loose(uf_csv_table *table, const char *text, size_t length, const char *path,
                                         uf_error *error);
UF_MUST_USE uf_status uf_csv_read_loose(uf_csv_table *table, const char *path, size_t max_bytes, uf_error *error);

/* Number of the header's column called `name`, -1 when there is none. */
int uf_csv_column(const uf_csv_table *table, const char *name);

void uf_csv_free(uf_csv_table *table);

#endif
