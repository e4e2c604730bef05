/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which fields are complete, while a microscope still writes. */
#ifndef UF_RUN_PLATE_FOLLOW_H
#define UF_RUN_PLATE_FOLLOW_H

#include "io/input.h"
#include "io/watch.h"
#include "run/plate_plan.h"

/* A file is complete when its size and time have stood still for this long. */
#define UF_FOLLOW_STILL_S 2.0

typedef struct uf_follow_file {
    const char *path; /* NULL: the row has none */
    uf_input_facts facts;
    double since; /* when it was first seen like this */
} uf_follow_file;

enum { UF_FOLLOW_FILES = 4 };

typedef struct uf_follow_row {
    uf_follow_file files[UF_FOLLOW_FILES];
} uf_follow_row;

/* Zeroed it is empty and may be freed. */
typedef struct uf_follow {
    uf_follow_row *rows; /* of the plan */
    int count;
    double changed; /* when any file last came or grew */
    uf_watch watch;
} uf_follow;

UF_MUST_USE uf_status uf_follow_start(uf_follow *follow, const uf_plate_plan *plan, double now, uf_error *error);
void uf_follow_free(uf_follow *follow);

/* Looks at the files of a row: 1 when all of them are there and complete. */
int uf_follow_is_complete(uf_follow *follow, int row, double now);

#endif
