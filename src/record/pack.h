/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Rows as bytes and back: what one field gave, kept until the tables are made. Which members there are comes from THE table
 * of columns, so that a new column is kept without a line here. Numbers are little-endian and exact.
 */
#ifndef UF_RECORD_PACK_H
#define UF_RECORD_PACK_H

#include <stdint.h>

#include "base/arena.h"
#include "record/columns.h"

void uf_pack_count(uf_text *out, uint64_t value);
void uf_pack_real(uf_text *out, double value);
void uf_pack_text(uf_text *out, const char *text); /* NULL stays NULL */
void uf_pack_row(uf_text *out, const uf_table *table, const void *row);
/* A row of cells with its histogram of gaps. */
void uf_pack_cell(uf_text *out, const uf_cell *cell);

/* Reads on from `at`; where bytes are missing or make no sense `broken` is set and everything reads as 0 or NULL. */
typedef struct uf_packed {
    const char *at, *end;
    uf_arena *arena; /* for texts */
    int broken;
} uf_packed;

uint64_t uf_unpack_count(uf_packed *in);
double uf_unpack_real(uf_packed *in);
const char *uf_unpack_text(uf_packed *in);
/* Members that are no columns stay as they are. */
void uf_unpack_row(uf_packed *in, const uf_table *table, void *row);
void uf_unpack_cell(uf_packed *in, uf_cell *cell);

#endif
