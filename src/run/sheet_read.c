/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/sheet_read.h"

#include <stdio.h>

#include "io/csv.h"
#include "io/csv_read.h"

/* A million fields with long paths; a picture given by mistake is longer, or no text. */
static const size_t most_bytes = (size_t)256 << 20;

uf_status uf_sheet_read(uf_sheet *sheet, const char *path, const char *root, uf_faults *faults, uf_error *error)
{
    uf_csv_table table;
    *sheet = (uf_sheet){0};
    uf_status status = uf_csv_read_loose(&table, path, most_bytes, error);
    if (status == UF_OK)
        status = uf_sheet_take(sheet, &table, path, root, faults, error);
    uf_csv_free(&table);
    return status;
}

uf_status uf_sheet_refuse(const uf_faults *faults, uf_error *error)
{
    for (int k = 0; k < faults->count; k++) {
        const uf_fault *f = &faults->list[k];
        char more[80] = "";
        if (f->severity != UF_FAULT)
            continue;
        if (faults->faults > 1)
            (void)snprintf(more, sizeof more, " (and %d more faults: underfoot sheet check lists them)",
                           faults->faults - 1);
        if (f->line)
            return uf_fail(error, UF_INPUT, "%.300s:%d: %s%s%.500s%s", f->file ? f->file : "", f->line,
                           f->column ? f->column : "", f->column ? ": " : "", f->text, more);
        return uf_fail(error, UF_INPUT, "%.300s: %.500s%s", f->file ? f->file : "sheet", f->text, more);
    }
    return faults->faults ? uf_fail_memory(error, "the list of faults") : UF_OK;
}

static bool any_text(const uf_sheet *sheet, int column)
{
    for (int k = 0; k < sheet->count; k++)
        if (*sheet->rows[k].text[column])
            return true;
    return false;
}

static void put_row(uf_text *out, const uf_sheet *sheet, const bool *shown, const uf_sheet_row *row)
{
    const char *before = "";
    for (int k = 0; k < UF_SHEET_COLUMNS; k++) {
        if (!shown[k])
            continue;
        uf_text_add(out, before);
        uf_csv_field(out, row ? row->text[k] : uf_sheet_columns[k].name);
        before = ",";
    }
    for (int k = 0; k < sheet->extra_count; k++) {
        uf_text_add(out, before);
        uf_csv_field(out, row ? row->extra[k] : sheet->extra[k]);
    }
    uf_text_add(out, "\n");
}

uf_status uf_sheet_put(uf_text *out, const uf_sheet *sheet, uf_error *error)
{
    bool shown[UF_SHEET_COLUMNS];
    for (int k = 0; k < UF_SHEET_COLUMNS; k++)
        shown[k] = k <= UF_SHEET_WIDE || any_text(sheet, k);
    put_row(out, sheet, shown, NULL);
    for (int k = 0; k < sheet->count; k++)
        put_row(out, sheet, shown, &sheet->rows[k]);
    return uf_text_check(out, "a sheet", error);
}
