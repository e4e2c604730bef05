/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a plate is to hold: treatments, doses, controls, and how many wells of each. */
#ifndef UF_SHEET_ARMS_H
#define UF_SHEET_ARMS_H

#include "base/arena.h"
#include "base/csv_table.h"
#include "sheet/draw.h"
#include "sheet/fault.h"

/* Zeroed it is empty and may be freed. */
typedef struct uf_arms {
    uf_arm *list;
    int count, capacity, treatments;
    uf_arena arena;
} uf_arms;

/* Adds what is written as "NAME", or "NAME: 0.1, 1, 10 uM", with `wells` wells of each. UF_USAGE. */
UF_MUST_USE uf_status uf_arms_add(uf_arms *arms, const char *text, uf_role role, int wells, uf_error *error);

/* Adds a list: a column treatment or coating; dose, dose_unit, role and wells where there are such (empty wells: `wells`). What is
 * wrong goes to `faults`. UF_MEMORY only. */
UF_MUST_USE uf_status uf_arms_take(uf_arms *arms, const uf_csv_table *table, const char *path, int wells,
                                   uf_faults *faults, uf_error *error);

/* How many wells they take on a plate. */
int uf_arms_wells(const uf_arms *arms);

/* "0.1 uM", nothing without a dose. */
void uf_arm_dose(const uf_arm *arm, bool with_unit, uf_text *out);

void uf_arms_free(uf_arms *arms);

#endif
