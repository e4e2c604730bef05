/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * What a plate run is, fixed before the first field is measured: the rows of the sheet in their order, the settings of each,
 * and one reference a plate and session. Written to OUT/plan.json; its hash stands in every record, so that results of two
 * different plans are never mixed.
 */
#ifndef UF_RUN_PLATE_PLAN_H
#define UF_RUN_PLATE_PLAN_H

#include "calibrate/reference.h"
#include "run/field_read.h"
#include "run/row_settings.h"
#include "run/sheet_read.h"

enum { UF_PLATE_HASH = 24 };

/* One plate in one session. */
typedef struct uf_plate_group {
    const char *plate, *session; /* "" where the sheet has none */
    int settings;
    int estimated;                   /* its reference comes from its own fields (from = wells or pooled) */
    double exposure_ms[UF_CHANNELS]; /* of the estimated reference; NaN: not told */
    uf_reference_pool pool;          /* estimated: ratio at gap 0 */
    double blank_adu[UF_CHANNELS], blank_sd_adu[UF_CHANNELS]; /* of its blank wells, above the offset; NaN: none */
    int blanks;                                               /* fields they come from */
    int cells;
    const char *worst_well;
} uf_plate_group;

typedef struct uf_plate_row {
    const uf_sheet_row *row;
    int settings, group;
    const char *key; /* of its files */
    int excluded;    /* does not enter the reference */
} uf_plate_row;

/* Zeroed it is empty and may be freed. */
typedef struct uf_plate_plan {
    uf_sheet sheet;
    uf_row_settings all;
    uf_plate_row *rows; /* sheet.count of them */
    uf_plate_group *groups;
    int group_count;
    char draft[UF_PLATE_HASH]; /* hash of everything but the estimated references */
    char hash[UF_PLATE_HASH];  /* of everything */
    uf_arena arena;
} uf_plate_plan;

/* Reads sheet and settings and sorts rows into groups; references that must be estimated are not yet known. `exclude_path`
 * (NULL: none) is a CSV with a column field_id: rows whose x_um is empty name whole fields that must not enter a reference.
 * UF_INPUT names every kind of fault with its mend. */
UF_MUST_USE uf_status uf_plate_plan_read(uf_plate_plan *plan, const char *sheet_path, const char *exclude_path,
                                         uf_error *error);
void uf_plate_plan_free(uf_plate_plan *plan);

int uf_plate_needs_references(const uf_plate_plan *plan);

/* Whether a row is a field without cells that tells the background: role blank. */
int uf_plate_is_blank(const uf_plate_plan *plan, int row);

/* Whether a row belongs to the fields its group's reference comes from. */
int uf_plate_is_reference(const uf_plate_plan *plan, int row);

/* The row's settings with its own exposures and, where the group's is known, its reference. Shallow: frees nothing. */
struct uf_settings uf_plate_settings(const uf_plate_plan *plan, int row);

/* The same to find the row's own reference with. */
struct uf_settings uf_plate_reference_settings(const uf_plate_plan *plan, int row);

uf_field_files uf_plate_files(const uf_plate_plan *plan, int row);

/* Appends plan.json and sets the hashes. UF_MEMORY. */
UF_MUST_USE uf_status uf_plate_plan_put(uf_plate_plan *plan, uf_text *out, uf_error *error);

/* Takes the references of an earlier plan.json of the same draft; 0 when it is of another, or none. */
int uf_plate_plan_take_references(uf_plate_plan *plan, const uf_text *json);

#endif
