/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What to ask of a sheet as an experiment. */
#ifndef UF_SHEET_CHECKS_H
#define UF_SHEET_CHECKS_H

#include "sheet/sheet.h"

/* Adds faults: fields of one well that say different things, two vessels of one plate. Adds warnings: no control on a plate, fewer than three replicates, replicates that look like numbered wells, names
 * that a spreadsheet made into dates, wells without a treatment. `pooled`: a reference pooled over all wells is asked for, which
 * must not hold a single treatment and coating. UF_MEMORY only. */
UF_MUST_USE uf_status uf_sheet_check_design(const uf_sheet *sheet, bool pooled, uf_faults *faults, uf_error *error);

/* Why a word looks like what a spreadsheet made of another: "a date", "a number in scientific notation", "an error of
 * a formula"; NULL when it does not. */
const char *uf_spreadsheet_damage(const char *word);

#endif
