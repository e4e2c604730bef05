/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The record of one field: what it gave, and which files it came from. Written after the field's pictures, so that a record
 * that stands vouches for all of the field. Tables are made of plan and records alone.
 */
#ifndef UF_RUN_PLATE_RECORD_H
#define UF_RUN_PLATE_RECORD_H

#include "io/input.h"
#include "record/pack.h"
#include "run/field.h"
#include "run/read_channel.h"

typedef struct uf_record_input {
    const char *role, *path;
    uf_input_facts facts; /* bytes -1: it was not there */
    uint64_t fingerprint;
} uf_record_input;

typedef struct uf_plate_record {
    uf_field field; /* cells and spots are its counts */
    uf_cell *cells;
    uf_spot *spots;
    double depth_nm, contact_cutoff_nm;
    const char *warnings;       /* one a line */
    const char *overlay;        /* "overlay/KEY.png", NULL: none */
    double thumbnail_white_adu; /* of thumb/KEY.png (report/thumbnail.h); NaN: there is none */
    uf_record_input *inputs;
    int input_count;
} uf_plate_record;

/* Appends a record with its checksum at the end. */
void uf_plate_record_put(uf_text *out, const char *plan_hash, const char *field_id, const uf_plate_record *record);

/* Reads it back into memory of the arena. 0 when it is not whole, or of another plan or field. */
int uf_plate_record_take(const uf_text *bytes, const char *plan_hash, const char *field_id, uf_arena *arena,
                         uf_plate_record *record);

/* Whether all files it came from are as they were (and those that were not there are still missing). */
int uf_plate_record_is_current(const uf_plate_record *record);

#endif
