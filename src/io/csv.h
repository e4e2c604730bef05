/* SPDX-License-Identifier: GPL-3.0-or-later */
/* CSV out, RFC 4180 except that lines end in LF; a field is quoted only when it has to be. */
#ifndef UF_IO_CSV_H
#define UF_IO_CSV_H

#include "record/columns.h"

/* Appends one field, quoted when it holds a comma, a quote, a line end or outer blanks. */
void uf_csv_field(uf_text *out, const char *value);

/* Appends the header of a table: field_id, then its columns. */
void uf_csv_header(uf_text *out, const uf_table *table);

/* Appends one row of the table for field `field_id`; `row` is a struct of the table's kind. */
void uf_csv_row(uf_text *out, const uf_table *table, const char *field_id, const void *row);

#endif
