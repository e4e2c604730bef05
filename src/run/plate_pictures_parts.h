/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Between the files of a plate run's pictures. */
#ifndef UF_RUN_PLATE_PICTURES_PARTS_H
#define UF_RUN_PLATE_PICTURES_PARTS_H

#include <pthread.h>

#include "run/plate_pictures.h"

/* Of one field, small enough to be held for all of them. */
typedef struct plate_fact {
    uf_field_state status;
    int cells;
    double near_focus, wide_focus, near_background_adu, wide_background_adu, thumbnail_white_adu;
} plate_fact;

typedef struct plate_pictures {
    const uf_output *output;
    const uf_plate_plan *plan;
    const uf_plate_well_list *wells;
    uf_pool *pool;
    uf_work *works;        /* one a hand */
    plate_fact *facts;     /* of each row */
    double *white_adu;     /* of each of the plan's groups: what contact sheets draw white */
    pthread_mutex_t mutex; /* guards all below */
    uf_output_batch batch;
    uf_status status; /* the first that went wrong */
    uf_error error;
} plate_pictures;

/* The first failure is kept; it ends the pictures. */
void plate_pictures_note(plate_pictures *job, uf_status status, const uf_error *error);
int plate_pictures_failed(plate_pictures *job);

/* Encodes and writes folder/NAME.png, `name` being a key already; `folder` may be NULL. */
UF_MUST_USE uf_status plate_pictures_write(plate_pictures *job, const char *folder, const char *name,
                                           const uf_indexed *picture, uf_error *error);

/* What the sheet says of a well. */
const uf_sheet_row *plate_well_row(const plate_pictures *job, int well);

/* Whether the plan has this plate in more than one session. */
int plate_has_sessions(const plate_pictures *job, const char *plate);

/* A copy of `text` as a file's name in `work`'s arena; NULL without memory. */
const char *plate_picture_key(uf_work *work, const uf_text *text);

/* Two pictures of one name (plate "a", well "b_c" and plate "a_b", well "c") are told apart: those after the first get "=2",
 * "=3" .. in the order of the list. `work` holds the new names. UF_MEMORY. */
UF_MUST_USE uf_status plate_names_apart(uf_work *work, const char **names, int count, uf_error *error);

uf_status plate_maps(plate_pictures *job, uf_error *error);
uf_status plate_contact_sheets(plate_pictures *job, uf_error *error);
uf_status plate_drift(plate_pictures *job, uf_error *error);

#endif
