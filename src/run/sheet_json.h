/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the sheet commands found, as JSON. */
#ifndef UF_RUN_SHEET_JSON_H
#define UF_RUN_SHEET_JSON_H

#include "base/text.h"
#include "sheet/fault.h"

/* A number by its name, for the head of the object. */
typedef struct uf_named_number {
    const char *name;
    double value;
} uf_named_number;

/* Appends one object: "sheet", the numbers, "faults" and "warnings" (how many), "findings" (severity, kind, file, line,
 * column, text; file, line and column null where there is none). */
UF_MUST_USE uf_status uf_sheet_json(uf_text *out, const char *sheet, const uf_named_number *numbers, int number_count,
                                    const uf_faults *faults, uf_error *error);

#endif
