/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What spreadsheets make of CSV, undone before it is parsed. */
#ifndef UF_IO_CSV_DIALECT_H
#define UF_IO_CSV_DIALECT_H

#include "base/csv_table.h"

/* Puts `text` into `plain` as UTF-8 with line feeds, without a byte-order mark and without a line "sep=;"; `dialect`
 * tells what was met and which separator holds. UF_INPUT for what is no text: a workbook, UTF-16, zero bytes. */
UF_MUST_USE uf_status uf_csv_plain(uf_text *plain, const char *text, size_t length, const char *path,
                                   uf_csv_dialect *dialect, uf_error *error);

#endif
