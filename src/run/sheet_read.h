/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * A sheet from its file. What a row offers is told in sheet/sheet.h: texts by column, extra columns carried through,
 * paths to open, the well, the role, numbers, and the field_id that keys every table.
 *
 *     uf_sheet sheet;
 *     uf_faults faults = {0};
 *     uf_status status = uf_sheet_read(&sheet, "sheet.csv", NULL, &faults, error);
 *     if (status == UF_OK)
 *         status = uf_sheet_refuse(&faults, error);      when nothing is to be done with a faulty sheet
 *     for (int k = 0; status == UF_OK && k < sheet.count; k++)
 *         use(&sheet.rows[k]);
 *     uf_faults_free(&faults);
 *     uf_sheet_free(&sheet);                              rows and texts go with it; may be called twice
 */
#ifndef UF_RUN_SHEET_READ_H
#define UF_RUN_SHEET_READ_H

#include "sheet/sheet.h"

/* Reads a sheet: CSV as spreadsheets write it (io/csv_read.h). Relative paths are relative to `root`, or, where it is
 * NULL, to the sheet's folder. All that is wrong with the text of it is added to `faults` (with lines), and the sheet is
 * whole all the same; whether files are there is not looked at (run/sheet_check.h does). UF_INPUT: the file cannot
 * be read at all, or is no CSV; UF_MEMORY. After a failure the sheet is empty. */
UF_MUST_USE uf_status uf_sheet_read(uf_sheet *sheet, const char *path, const char *root, uf_faults *faults,
                                    uf_error *error);

/* UF_OK when the list holds no fault (warnings and notes may be there), else UF_INPUT with the first fault in the error
 * and how many more there are. */
UF_MUST_USE uf_status uf_sheet_refuse(const uf_faults *faults, uf_error *error);

/* Appends the sheet as CSV: near and wide, then what any row has, by the order of the table of columns, then extras. */
UF_MUST_USE uf_status uf_sheet_put(uf_text *out, const uf_sheet *sheet, uf_error *error);

#endif
